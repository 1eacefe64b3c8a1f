"""A file appears whole under its name, or not at all."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Callable
from pathlib import Path

from hueferry.errors import OutputError

Verify = Callable[[Path], None]
"""Looks at the finished temporary file and raises if it is not what it should be."""


def write_bytes(path: Path, data: bytes, *, overwrite: bool = False, verify: Verify | None = None) -> Path:
    """Write `data` beside `path`, verify it, and give it its name in one step.

    Raises:
        OutputError: the name is taken and `overwrite` is false, or nothing can be written there.
    """
    return place(path, lambda temporary: _store(temporary, data), overwrite=overwrite, verify=verify)


def place(path: Path, store: Callable[[Path], None], *, overwrite: bool = False, verify: Verify | None = None) -> Path:
    """Let `store` write a temporary file in the folder of `path`, verify it, and give it its name in one step.

    The temporary file has the suffix of `path`, is flushed to the disk before it is renamed, and is removed whatever
    happens. Without `overwrite` the name is taken by a hard link, which fails if somebody else took it meanwhile.

    Raises:
        OutputError: the name is taken and `overwrite` is false, or nothing can be written there.
    """
    if path.is_dir():
        raise OutputError(path, "this is a folder; name a file")
    if not overwrite and path.exists():
        raise OutputError(path, "this exists already; choose another name, or allow overwriting")
    try:
        handle, name = tempfile.mkstemp(prefix=".hueferry-", suffix=path.suffix[:16], dir=path.parent)
        os.close(handle)
    except OSError as error:
        raise OutputError(path, f"nothing can be written here: {error.strerror or error}") from error
    temporary = Path(name)
    try:
        store(temporary)
        if verify is not None:
            verify(temporary)
        _flush(temporary)
        _publish(temporary, path, overwrite=overwrite)
    except OSError as error:
        raise OutputError(path, f"writing failed: {error.strerror or error}") from error
    finally:
        temporary.unlink(missing_ok=True)
    return path


def _store(path: Path, data: bytes) -> None:
    path.write_bytes(data)


def _flush(path: Path) -> None:
    with path.open("rb") as stream:
        os.fsync(stream.fileno())


def _publish(temporary: Path, path: Path, *, overwrite: bool) -> None:
    temporary.chmod(0o666 & ~_umask())
    if overwrite:
        temporary.replace(path)
        return
    try:
        os.link(temporary, path)
    except FileExistsError as error:
        raise OutputError(path, "this was created meanwhile by somebody else; nothing was written") from error
    except OSError:
        # A file system without hard links: the check at the start has to do.
        temporary.replace(path)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
