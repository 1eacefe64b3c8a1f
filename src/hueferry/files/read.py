"""Reading pictures: the bytes decide the format, the profile decides the colour."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from hueferry.errors import InputError, PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.formats import FORMATS, SUFFIXES, codec, missing, refusal, sniff
from hueferry.files.guard import can_guard, decode_guarded, is_suspicious
from hueferry.files.sniff import HEAD
from hueferry.picture import Encoding, Picture

if TYPE_CHECKING:
    from hueferry.picture import PictureSource


def read(path: Path, *, accept_loss: bool = False, guarded: bool | None = None) -> Picture:
    """Read a picture with its encoding, depth and metadata; pixels stay as stored.

    Args:
        path: the file.
        accept_loss: go on where further frames or a gain map would be lost.
        guarded: decode in a process of its own, with limits of memory and time; None does so where the header promises
            far more pixels than the file has bytes for, see `hueferry.files.guard.is_suspicious`.

    Raises:
        PictureError: missing, empty, a folder, of an unknown format, or broken.
        RefusedError: understood, but reading would lose something; the message says the way round.
    """
    data = _bytes_of(path)
    format_ = sniff(data[:HEAD])
    if not format_:
        raise _unknown(path, data[:HEAD])
    lacking = missing(FORMATS[format_])
    if lacking:
        raise RefusedError(path, lacking)
    if is_suspicious(format_, data) if guarded is None else guarded and can_guard():
        decoded = decode_guarded(path, format_, accept_loss=accept_loss)
    else:
        decoded = codec(format_).read(path, data, accept_loss=accept_loss)
    encoding, notes = _encoding(path, decoded)
    if path.suffix.lower() not in SUFFIXES[format_]:
        notes += (f"named {path.suffix or 'without a suffix'}, but it is {FORMATS[format_].title}",)
    bits = {np.dtype(np.uint8): 8, np.dtype(np.uint16): 16}.get(decoded.pixels.dtype, 32)
    return Picture(
        decoded.pixels, encoding, decoded.metadata, bits=decoded.bits or bits, path=path, notes=decoded.notes + notes
    )


def _unknown(path: Path, head: bytes) -> PictureError:
    refused = refusal(head)
    if refused:
        return RefusedError(path, refused)
    *first, last = [one.title for one in FORMATS.values()]
    return PictureError(path, f"this is not a {', '.join(first)} or {last} file, whatever its name says")


def open_source(path: Path) -> PictureSource:
    """Open a picture for reading by windows."""
    return read(path)


def _bytes_of(path: Path) -> bytes:
    if path.is_dir():
        raise PictureError(path, "this is a folder, not a picture")
    try:
        data = path.read_bytes()
    except FileNotFoundError as error:
        raise PictureError(path, "there is no such file") from error
    except OSError as error:
        raise PictureError(path, f"the file cannot be read: {error.strerror or error}") from error
    if not data:
        raise PictureError(path, "the file is empty")
    return data


def _encoding(path: Path, decoded: Decoded) -> tuple[Encoding, tuple[str, ...]]:
    from hueferry.colour.encoding import SRGB

    if decoded.encoding is not None:
        return decoded.encoding, ()
    if decoded.profile is None:
        return SRGB, ("no profile: taken as sRGB",)
    from hueferry.colour.profile import read_profile

    try:
        return read_profile(decoded.profile), ()
    except InputError as error:
        raise PictureError(path, f"its colour profile cannot be used: {error}") from error
