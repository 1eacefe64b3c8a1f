"""How many pictures fit into memory at once."""

from __future__ import annotations

import os
from collections.abc import Sequence
from pathlib import Path

FEW = 6
"""Pictures up to which starting processes costs more than it brings."""

PER_WORKER = 250_000_000
"""Bytes that a worker takes before it has a picture: the interpreter, the libraries, references."""

PER_FILE_BYTE = 60
"""Bytes of memory for each byte of a compressed file: about 2 bits a pixel in the file, 15 bytes a pixel at work."""

_SHARE = 0.8
"""Share of the free memory that workers may take."""


def choose_workers(files: Sequence[Path], *, asked: int | None = None) -> int:
    """Return how many pictures to do at a time.

    Args:
        files: the pictures.
        asked: what the caller wants, never raised and never lowered except to the number of pictures; None chooses:
            one for a few pictures, else as many as there are cores and as fit into the free memory.
    """
    if asked is not None:
        return max(1, min(asked, len(files)))
    if len(files) <= FEW:
        return 1
    fitting = int(_SHARE * free_memory() / memory_of(files))
    return max(1, min(cores(), len(files), fitting))


def memory_of(files: Sequence[Path]) -> int:
    """Return the bytes that a worker takes for the largest of the pictures, at most."""
    return PER_WORKER + PER_FILE_BYTE * max((path.stat().st_size for path in files if path.is_file()), default=0)


def cores() -> int:
    """Return how many cores this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def free_memory() -> int:
    """Return the bytes that may be taken without harm: what the system says, or what is left of a container's limit."""
    free = [value for value in (_system_memory(), _container_memory()) if value is not None]
    return max(0, min(free, default=PER_WORKER * 8))


def _system_memory(path: Path = Path("/proc/meminfo")) -> int | None:
    try:
        lines = path.read_text(encoding="ascii").splitlines()
    except OSError:
        return None
    return next((int(line.split()[1]) * 1024 for line in lines if line.startswith("MemAvailable:")), None)


def _container_memory(folder: Path = Path("/sys/fs/cgroup")) -> int | None:
    try:
        limit = (folder / "memory.max").read_text(encoding="ascii").strip()
        used = (folder / "memory.current").read_text(encoding="ascii").strip()
    except OSError:
        return None
    return None if limit == "max" else int(limit) - int(used)
