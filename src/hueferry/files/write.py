"""Writing pictures: whole, verified, never over an original."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import attrs
import numpy as np

from hueferry.colour.scene import is_scene_linear
from hueferry.errors import InputError, OutputError
from hueferry.files.atomic import write_bytes
from hueferry.files.exif import with_orientation
from hueferry.files.formats import FORMATS, Format, codec, missing, named
from hueferry.files.jpeg_blocks import MOST_EXIF
from hueferry.files.light import light_of
from hueferry.files.thumbnail import upright
from hueferry.files.verify import verify
from hueferry.picture import Picture


def write(picture: Picture, path: Path, *, overwrite: bool = False, quality: int | None = None) -> Path:
    """Write a picture in the format that the suffix of `path` names; profile and metadata go with it.

    A picture that came without a profile gets that of its encoding. The file is decoded again before it gets its name.

    Args:
        picture: the picture.
        path: where to; the folder must exist.
        overwrite: replace what is there, unless it is the picture's own original.
        quality: 1 … 100 for JPEG and WebP; None means no worse than the source.

    Raises:
        OutputError: the suffix names no format, the format cannot hold the picture, the name is taken or is that of
            the original, or nothing can be written there.
    """
    format_ = named(path)
    if format_ is None:
        readable = next((one for one in FORMATS.values() if path.suffix.lower() in one.suffixes), None)
        if readable is not None:
            raise OutputError(path, f"{readable.title} is not written ({readable.remark})")
        usual = [one.suffixes[0] for one in FORMATS.values() if one.writes]
        raise OutputError(path, f"the suffix names no format; use {', '.join(usual[:-1])} or {usual[-1]}")
    if picture.path is not None and path.exists() and picture.path.exists() and path.samefile(picture.path):
        raise OutputError(path, "this is the original; choose another folder")
    _check_holds(path, picture, format_)
    stored = fitted(picture, format_)
    data = _encoded(stored, format_, quality=quality)
    return write_bytes(
        path, data, overwrite=overwrite, verify=lambda made: verify(made, path, stored.pixels, format_.name)
    )


def _check_holds(path: Path, picture: Picture, format_: Format) -> None:
    lacking = missing(format_)
    if lacking:
        raise OutputError(path, lacking)
    if format_.scene_linear and not is_scene_linear(picture.encoding):
        reason = f"{format_.title} holds scene-linear light and the picture is coded in {picture.encoding.name}"
        raise OutputError(path, f"{reason}; write {_titles(lambda one: not one.scene_linear)} instead")
    is_float = picture.pixels.dtype == np.float32
    if is_float and 32 not in format_.depths:
        others = _titles(lambda one: 32 in one.depths)
        raise OutputError(path, f"{format_.title} holds integers and the picture is float; write {others} instead")
    if not is_float and _depth(format_, picture.bits) is None:
        others = _titles(lambda one: _depth(one, picture.bits) is not None)
        most = max(format_.depths)
        raise OutputError(path, f"{format_.title} holds {most} bits and the picture is deeper; write {others} instead")
    if picture.has_alpha and not format_.alpha:
        others = _titles(lambda one: one.alpha and (32 in one.depths or not is_float))
        raise OutputError(path, f"{format_.title} holds no alpha and the picture has some; write {others} instead")


def _titles(holds: Callable[[Format], bool]) -> str:
    found = [one.title for one in FORMATS.values() if one.writes and holds(one)]
    return " or ".join([", ".join(found[:-1]), found[-1]] if len(found) > 1 else found)


def _depth(format_: Format, bits: int) -> int | None:
    """Return the least depth of a format that holds integers of so many bits."""
    return next((depth for depth in format_.depths if bits <= depth < 32), None)


def encode(picture: Picture, format_: str, *, quality: int | None = None) -> bytes:
    """Return the file of a picture in a format that can hold it."""
    return _encoded(fitted(picture, FORMATS[format_]), FORMATS[format_], quality=quality)


def _encoded(stored: Picture, format_: Format, *, quality: int | None) -> bytes:
    write_format = codec(format_.name).write
    if write_format is None:
        raise InputError(f"{format_.title} is read only; name another format")
    profile = stored.encoding.profile
    if profile is None and not format_.scene_linear:
        from hueferry.colour.make_profile import gray_profile_of, profile_of

        alone = stored.is_gray and format_.gray
        profile = gray_profile_of(stored.encoding) if alone else profile_of(stored.encoding)
    return write_format(stored, profile, quality=quality)


def lost_in(picture: Picture, path: Path) -> tuple[str, ...]:
    """Return what of a picture's metadata has no place in the format that a path names, as notes for the record."""
    format_, metadata = named(path), picture.metadata
    if format_ is None or format_.name == metadata.format:
        return ()
    blocks = {"exif": metadata.exif, "xmp": metadata.xmp, "iptc": metadata.iptc}
    lost = [
        f"{name.upper()} ({len(body):,} bytes)" for name, body in blocks.items() if body and name not in format_.keeps
    ]
    if format_.name == "jpeg" and len(metadata.exif) > MOST_EXIF:
        lost.append(f"EXIF ({len(metadata.exif):,} bytes, and a JPEG holds {MOST_EXIF:,})")
    return (f"{format_.title} has no place for {', '.join(lost)}, which was left out",) if lost else ()


def fitted(picture: Picture, format_: Format) -> Picture:
    """Return the picture as a format stores it: at a depth that it has, and upright where it keeps no orientation."""
    return _at_depth(_turned(_as_light(picture, format_), format_), format_)


def _as_light(picture: Picture, format_: Format) -> Picture:
    """Return light itself, for a float format that states it by a profile of straight curves."""
    from hueferry.colour.scene import SceneLinear

    encoding = picture.encoding
    if format_.scene_linear or not isinstance(encoding, SceneLinear):
        return picture
    return attrs.evolve(picture, pixels=light_of(picture, associated=False), encoding=encoding.light)


def _turned(picture: Picture, format_: Format) -> Picture:
    """Return the picture with EXIF that says what its orientation is, and upright where the file could not say it."""
    metadata = picture.metadata
    said = None if format_.turn == "upright" else with_orientation(metadata.exif, metadata.orientation)
    if said is None and format_.turn == "own":
        return picture
    if said is not None:
        # A file with a field of its own needs no EXIF for that.
        exif = said if metadata.exif or format_.turn == "exif" else b""
        return attrs.evolve(picture, metadata=attrs.evolve(metadata, exif=exif))
    exif = with_orientation(metadata.exif, 1) or b""
    pixels = upright(picture.pixels, metadata.orientation)
    return attrs.evolve(picture, pixels=pixels, metadata=attrs.evolve(metadata, exif=exif, orientation=1))


def _at_depth(picture: Picture, format_: Format) -> Picture:
    """Return the picture with codes that fill a depth of the format: 10 bits in a 16-bit file become 16."""
    depth = None if picture.pixels.dtype == np.float32 else _depth(format_, picture.bits)
    if depth is None or depth == picture.bits:
        return picture
    codes = np.rint(picture.pixels * ((2.0**depth - 1) / picture.top_code))
    return attrs.evolve(picture, pixels=codes.astype(np.uint8 if depth == 8 else np.uint16), bits=depth)
