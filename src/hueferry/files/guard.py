"""Decoding in a process of its own, with a limit of memory and of time: a file may take that one along, and no other.

The child gets an open pipe and an open piece of shared memory that has no name, decodes one file, puts its pixels into
the shared memory and everything else into the pipe. Where it dies, stalls or runs out of memory the parent says so.
"""

from __future__ import annotations

import mmap
import os
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from multiprocessing import parent_process
from multiprocessing.connection import Connection
from pathlib import Path
from typing import Any

import attrs
import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import HueferryError, PictureError
from hueferry.files.codec import Decoded
from hueferry.files.probe import promised_pixels
from hueferry.picture import Encoding, Metadata

SECONDS = 120.0
"""Time that one file may take."""

MEMORY = 4 << 30
"""Bytes that decoding one file may take beyond what the process needs anyway."""

_MANY_PIXELS, _PIXELS_OF_A_BYTE = 16_000_000, 50


@attrs.frozen
class Limits:
    """What a guarded file may take.

    Attributes:
        seconds: wall-clock time.
        memory: bytes.
    """

    seconds: float = attrs.field(default=SECONDS, validator=attrs.validators.gt(0))
    memory: int = attrs.field(default=MEMORY, validator=attrs.validators.gt(0))


def is_suspicious(format_: str, data: bytes) -> bool:
    """Whether a file is to be decoded under guard although nobody asked.

    That is so where its header promises 16 million pixels or more with less than a byte for 50 of them, which no
    photograph does, unless this process is itself somebody's worker, and so is a guard already.
    """
    promised = promised_pixels(format_, data)
    alone = parent_process() is None and can_guard()
    return alone and promised >= _MANY_PIXELS and promised > _PIXELS_OF_A_BYTE * len(data)


def can_guard() -> bool:
    """Whether this system can hand open files to a child (POSIX)."""
    return os.name == "posix"


def decode_guarded(path: Path, format_: str, *, accept_loss: bool, limits: Limits | None = None) -> Decoded:
    """Decode a file in a child.

    Raises:
        PictureError: as the reader does, or the child died, stalled or ran out of memory.
    """
    limits = Limits() if limits is None else limits
    receiver, sender = os.pipe()
    with _shared() as memory:
        child = _start(path, (sender, memory), (format_, accept_loss, limits))
        os.close(sender)
        try:
            answer = _answer(path, Connection(receiver, writable=False), child, limits)
        finally:
            child.kill()
            child.wait()
        if isinstance(answer, HueferryError):
            raise answer
        shape, dtype, facts, fields = answer
        pixels = _pixels(memory, shape, np.dtype(dtype))
    encoding = None if facts["encoding"] is None else _known(facts["encoding"])
    return Decoded(**{**facts, "pixels": pixels, "metadata": Metadata(**fields), "encoding": encoding})


def _pixels(memory: int, shape: tuple[int, ...], dtype: np.dtype[Any]) -> Pixels:
    with mmap.mmap(memory, int(np.prod(shape, dtype=np.int64)) * dtype.itemsize, prot=mmap.PROT_READ) as view:
        return np.frombuffer(view, dtype).reshape(shape).copy()


@contextmanager
def _shared() -> Iterator[int]:
    """Give memory that two processes can open and that is gone when both have closed it."""
    if hasattr(os, "memfd_create"):
        handle = os.memfd_create("pixels")
        try:
            yield handle
        finally:
            os.close(handle)
        return
    with tempfile.TemporaryFile() as stream:
        yield stream.fileno()


def _start(path: Path, handles: tuple[int, int], task: tuple[str, bool, Limits]) -> subprocess.Popen[bytes]:
    format_, accept_loss, limits = task
    code = "from hueferry.files.guard import serve; serve()"
    words = [*map(str, handles), os.fspath(path), format_, str(int(accept_loss)), str(limits.memory)]
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(entry for entry in sys.path if entry)}
    command = [sys.executable, "-c", code, *words]
    quiet = subprocess.DEVNULL
    return subprocess.Popen(  # noqa: S603 - our own interpreter and our own words
        command, stdin=quiet, stdout=quiet, stderr=quiet, pass_fds=handles, env=environment
    )


def _answer(path: Path, pipe: Connection[Any, Any], child: subprocess.Popen[bytes], limits: Limits) -> Any:  # noqa: ANN401
    size = f"its {path.stat().st_size:,} bytes"
    way_round = "open it in another program and save it anew, or raise the limit"
    with pipe:
        if not pipe.poll(limits.seconds):
            raise PictureError(path, f"{size} were not decoded within the limit of {limits.seconds:g} s; {way_round}")
        try:
            return pipe.recv()
        except (EOFError, OSError):
            code = child.wait()
    reason = f"its decoder died of {size}" + (f" (signal {-code})" if code < 0 else f" (code {code})")
    raise PictureError(path, f"{reason}, under a limit of {limits.memory >> 20:,} MB; {way_round}")


def serve() -> None:
    """Decode the file that the command line names; the child's part."""
    sender, memory, name, format_, accept_loss, limit = sys.argv[1:]
    with Connection(int(sender), readable=False) as pipe:
        try:
            pipe.send(_decode(Path(name), format_, bool(int(accept_loss)), (int(limit), int(memory))))
        except (HueferryError, MemoryError) as error:
            short = isinstance(error, MemoryError) or isinstance(error.__cause__, MemoryError)
            pipe.send(_out_of_memory(Path(name), int(limit)) if short else error)


def _out_of_memory(path: Path, limit: int) -> PictureError:
    size = f"decoding its {path.stat().st_size:,} bytes"
    return PictureError(
        path, f"{size} takes more memory than the limit of {limit >> 20:,} MB; raise it, if you trust it"
    )


def _decode(path: Path, format_: str, accept_loss: bool, room: tuple[int, int]) -> tuple[Any, ...]:
    from hueferry.files.formats import codec

    reader, data = codec(format_).read, path.read_bytes()
    limit, memory = room
    _limit_memory(limit)
    decoded = reader(path, data, accept_loss=accept_loss)
    pixels = np.ascontiguousarray(decoded.pixels)
    os.ftruncate(memory, pixels.nbytes)
    with mmap.mmap(memory, pixels.nbytes) as view:
        np.frombuffer(view, pixels.dtype)[:] = pixels.ravel()
    return pixels.shape, pixels.dtype.str, _fields(decoded), _fields(decoded.metadata)


def _fields(value: Decoded | Metadata) -> dict[str, Any]:
    """Return the fields that go through the pipe; the container, a read-only view, as a plain mapping."""
    found = attrs.asdict(value, recurse=False, filter=lambda one, _: one.name not in ("pixels", "metadata"))
    return {**found, "container": dict(found["container"])} if "container" in found else found


def _limit_memory(limit: int) -> None:
    """Limit what this process may take beyond what it has (RLIMIT_AS), where the system says what that is."""
    import resource

    taken = Path("/proc/self/statm")
    if not taken.exists():
        resource.setrlimit(resource.RLIMIT_DATA, (limit, limit))
        return
    now = int(taken.read_text().split()[0]) * resource.getpagesize()
    hard = resource.getrlimit(resource.RLIMIT_AS)[1]
    most = now + limit if hard == resource.RLIM_INFINITY else min(now + limit, hard)
    resource.setrlimit(resource.RLIMIT_AS, (most, hard))


def _known(encoding: Encoding) -> Encoding:
    """Return this process's own object for an encoding that came through the pipe."""
    from hueferry.colour.encoding import BT2020, DISPLAY_P3, SRGB

    return next((one for one in (SRGB, DISPLAY_P3, BT2020) if one.name == encoding.name), encoding)
