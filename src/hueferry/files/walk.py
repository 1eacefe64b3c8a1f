"""Which pictures lie under the paths that a caller named."""

from __future__ import annotations

import os
from collections.abc import Iterator, Sequence
from pathlib import Path

from hueferry.errors import PictureError
from hueferry.files.formats import SUFFIXES

_SUFFIXES = frozenset(suffix for suffixes in SUFFIXES.values() for suffix in suffixes)


def find_pictures(paths: Sequence[Path]) -> list[Path]:
    """List the pictures under files and folders, each once, folders in the order of their names.

    A file that was named is taken whatever its name; in folders the usual suffixes decide, hidden names are passed
    over, and links to folders are not followed, so that no loop can arise.

    Raises:
        PictureError: a path does not exist.
    """
    found: dict[Path, None] = {}
    for path in paths:
        if path.is_dir():
            found.update(dict.fromkeys(_under(path)))
        elif path.exists() or path.is_symlink():
            found[path] = None
        else:
            raise PictureError(path, "there is no such file or folder")
    return list(found)


def _under(folder: Path) -> Iterator[Path]:
    for place, folders, names in os.walk(folder):
        folders[:] = sorted(name for name in folders if not name.startswith("."))
        for name in sorted(names):
            if not name.startswith(".") and Path(name).suffix.lower() in _SUFFIXES:
                yield Path(place) / name
