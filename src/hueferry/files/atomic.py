"""A file appears whole under its name, or not at all."""

from __future__ import annotations

import errno
import os
import secrets
from collections.abc import Callable
from pathlib import Path

from hueferry.errors import OutputError

_NEW = os.O_CREAT | os.O_EXCL | os.O_WRONLY
_MOST_TRIES = 100
_TAKEN = "this was created meanwhile by somebody else; nothing was written"

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

    The temporary file has the suffix of `path`, is flushed to the disk before it gets its name, as its folder is
    afterwards, and is removed whatever happens. Without `overwrite` the name is taken by a hard link, or, where there
    are none, by an empty file that must not exist yet: both fail if somebody else took the name meanwhile.

    Raises:
        OutputError: the name is taken and `overwrite` is false, or nothing can be written there.
    """
    if path.is_dir():
        raise OutputError(path, "this is a folder; name a file")
    if not overwrite and path.exists():
        raise OutputError(path, "this exists already; choose another name, or allow overwriting")
    temporary = _temporary(path)
    try:
        store(temporary)
        if verify is not None:
            verify(temporary)
        _flush(temporary)
        _publish(temporary, path, overwrite=overwrite)
        _flush_folder(path.parent)
    except OSError as error:
        raise OutputError(path, f"writing failed: {error.strerror or error}") from error
    finally:
        temporary.unlink(missing_ok=True)
    return path


def _store(path: Path, data: bytes) -> None:
    path.write_bytes(data)


def _temporary(path: Path) -> Path:
    """Create an empty file beside `path` under a name that nobody has, with the rights that new files get here."""
    for _ in range(_MOST_TRIES):
        temporary = path.with_name(f".hueferry-{secrets.token_hex(8)}{path.suffix[:16]}")
        try:
            os.close(os.open(temporary, _NEW, 0o666))
        except FileExistsError:
            continue
        except (OSError, ValueError) as error:
            reason = error.strerror if isinstance(error, OSError) else error
            raise OutputError(path, f"nothing can be written here: {reason or error}") from error
        return temporary
    raise OutputError(path, "nothing can be written here: no free name was found")


def _flush(path: Path) -> None:
    with path.open("rb") as stream:
        os.fsync(stream.fileno())


def _flush_folder(folder: Path) -> None:
    """Bring the new name to the disk too, where the system can do that (POSIX)."""
    if not hasattr(os, "O_DIRECTORY"):
        return
    handle = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
    try:
        os.fsync(handle)
    except OSError as error:
        if error.errno not in (errno.EINVAL, errno.ENOTSUP, errno.EROFS):
            raise
    finally:
        os.close(handle)


def _publish(temporary: Path, path: Path, *, overwrite: bool) -> None:
    if overwrite:
        temporary.replace(path)
        return
    try:
        os.link(temporary, path)
    except FileExistsError as error:
        raise OutputError(path, _TAKEN) from error
    except OSError:
        _claim_and_replace(temporary, path)


def _claim_and_replace(temporary: Path, path: Path) -> None:
    """Take the name with an empty file, which fails if somebody has it, and replace that, where there are no links."""
    try:
        os.close(os.open(path, _NEW, 0o666))
    except FileExistsError as error:
        raise OutputError(path, _TAKEN) from error
    try:
        temporary.replace(path)
    except OSError:
        path.unlink(missing_ok=True)  # ours, and empty
        raise
