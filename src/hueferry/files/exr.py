"""OpenEXR: attributes read and spliced by ourselves, pixels by OpenEXR's own library, half or float.

References:
    OpenEXR File Layout (openexr.com): magic number, version field, header attributes, offset table, chunks.
"""

from __future__ import annotations

import io
import struct
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import attrs
import numpy as np

from hueferry.errors import InputError, PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.light import NOTE, Light, Original, codes_of, light_of
from hueferry.files.probe import check_size
from hueferry.picture import Metadata, Picture

MAGIC = b"\x76\x2f\x31\x01"
_DEEP, _PARTS = 0x800, 0x1000
_HALF, _FLOAT = 1, 2
_COMPRESSIONS = ("NO", "RLE", "ZIPS", "ZIP", "PIZ")
"""Lossless ones by number; what came in a lossy one leaves in ZIP."""

_STRUCTURE = frozenset(
    {b"channels", b"compression", b"dataWindow", b"displayWindow", b"lineOrder", b"tiles", b"type", b"chunkCount"}
    | {b"version", b"preview"}
)
"""Attributes that say how the pixels are stored, and the small preview, which would be out of date."""

_LAYOUTS: Mapping[frozenset[str], str] = {
    frozenset("RGB"): "RGB",
    frozenset("RGBA"): "RGBA",
    frozenset("Y"): "Y",
    frozenset("YA"): "YA",
}
_MOST_HALF = float(np.finfo(np.float16).max)

Attributes = dict[bytes, tuple[bytes, bytes]]
"""Name to type and value, byte for byte."""


@attrs.frozen(eq=False)
class Head:
    """What stands before the pixels.

    Attributes:
        flags: of the version field.
        attributes: of the first part.
        end: where the header ends.
    """

    flags: int
    attributes: Attributes
    end: int

    @property
    def channels(self) -> dict[str, tuple[int, int, int]]:
        """Channels by name: kind (0 whole number, 1 half, 2 float) and how many columns and rows one sample covers."""
        body, at, found = self.attributes.get(b"channels", (b"", b""))[1], 0, {}
        while at < len(body) and body[at]:
            end = body.find(b"\0", at)
            if end < 0 or end + 17 > len(body):
                raise InputError("the list of channels ends early")
            kind, _, across, down = struct.unpack_from("<iiii", body, end + 1)
            found[body[at:end].decode("latin-1")] = (kind, across, down)
            at = end + 17
        return found

    def window(self, name: bytes) -> tuple[int, int, int, int]:
        """Return left, top, right and bottom, the last two included."""
        value = self.attributes.get(name, (b"", b""))[1]
        if len(value) != 16:
            raise InputError(f"the attribute {name.decode()} is missing or broken")
        left, top, right, bottom = struct.unpack("<iiii", value)
        return left, top, right, bottom


def read_head(data: bytes) -> Head:
    """Read the header of the first part.

    Raises:
        InputError: it is broken.
    """
    flags, at = int.from_bytes(data[4:8], "little") >> 8 << 8, 8
    attributes: Attributes = {}
    while True:
        name, at = _text(data, at)
        if not name:
            return Head(flags, attributes, at)
        kind, at = _text(data, at)
        size = int.from_bytes(data[at : at + 4], "little")
        if at + 4 + size > len(data):
            raise InputError("an attribute is longer than the file")
        attributes[name] = (kind, data[at + 4 : at + 4 + size])
        at += 4 + size


def _text(data: bytes, start: int) -> tuple[bytes, int]:
    end = data.find(b"\0", start, start + 256)
    if end < 0:
        raise InputError("the header ends early")
    return data[start:end], end + 1


def read_exr(path: Path, data: bytes, *, accept_loss: bool) -> Decoded:
    """Decode an OpenEXR picture: RGB or Y, with or without alpha, as codes of light.

    Raises:
        PictureError: the file is broken.
        RefusedError: several parts, further channels or deep pixels, which would be lost.
    """
    from hueferry.colour.scene import REC_709, scene_linear

    try:
        head = read_head(data)
        layout = _layout(path, head, accept_loss=accept_loss)
        left, top, right, bottom = head.window(b"dataWindow")
        check_size(path, (bottom - top + 1, right - left + 1))
        stated = head.attributes.get(b"chromaticities", (b"", b""))[1]
        encoding = scene_linear(struct.unpack("<8f", stated) if len(stated) == 32 else REC_709)
        light = _decode(data, head, layout)
    except (RefusedError, PictureError):
        raise
    except InputError as error:
        raise PictureError(path, f"the OpenEXR file is broken: {error}") from error
    except (RuntimeError, ValueError, KeyError, MemoryError, TypeError, OSError) as error:
        raise PictureError(path, f"the OpenEXR file cannot be decoded: {error}") from error
    light.flags.writeable = False
    metadata = Metadata(format="exr", container=_facts(head, layout, light))
    notes = (NOTE,) if stated else (NOTE, "no chromaticities: taken as Rec. 709")
    return Decoded(codes_of(light, associated=True), metadata, None, encoding=encoding, notes=notes)


def _layout(path: Path, head: Head, *, accept_loss: bool) -> str:
    """Return the names of the channels that make the picture, in order."""
    if head.flags & _DEEP:
        raise RefusedError(path, "this OpenEXR holds deep pixels; flatten it first")
    if head.flags & _PARTS and not accept_loss:
        raise RefusedError(path, "all parts of this OpenEXR but the first would be lost; accept the loss to go on")
    channels = head.channels
    base = "RGB" if set("RGB") <= set(channels) else "Y"
    layout = _LAYOUTS[frozenset(base) | (frozenset("A") & set(channels))]
    if not set(base) <= set(channels) or {"RY", "BY"} & set(channels):
        raise RefusedError(path, f"its channels {', '.join(sorted(channels))} are not R, G, B or Y; convert it to RGB")
    others = sorted(set(channels) - set(layout))
    if others and not accept_loss:
        raise RefusedError(path, f"its channels {', '.join(others)} would be lost; accept the loss to go on")
    if any(channels[name][0] not in (_HALF, _FLOAT) or channels[name][1:] != (1, 1) for name in layout):
        raise RefusedError(path, "its channels hold whole numbers or are subsampled; save it as half or float")
    return layout


def _decode(data: bytes, head: Head, layout: str) -> Light:
    """Decode by the library's plain reader: the newer one says on standard output what it cannot decode."""
    import Imath
    import OpenEXR

    left, top, right, bottom = head.window(b"dataWindow")
    file = OpenEXR.InputFile(io.BytesIO(data))
    try:
        planes = file.channels(list(layout), Imath.PixelType(Imath.PixelType.FLOAT))
    finally:
        file.close()
    shape = bottom - top + 1, right - left + 1
    return np.stack([np.frombuffer(plane, np.float32).reshape(shape) for plane in planes], axis=2)


def _facts(head: Head, layout: str, light: Light) -> dict[str, object]:
    packing = head.attributes.get(b"compression", (b"", b""))[1]
    return {
        "light": Original(light),
        "half": all(head.channels[name][0] == _HALF for name in layout),
        "compression": _COMPRESSIONS[packing[0]] if len(packing) == 1 and packing[0] < len(_COMPRESSIONS) else "ZIP",
        "windows": (head.window(b"dataWindow"), head.window(b"displayWindow")),
        "attributes": tuple((name, *held) for name, held in head.attributes.items() if name not in _STRUCTURE),
    }


def write_exr(picture: Picture) -> bytes:
    """Encode an OpenEXR: half where the source was half, float otherwise; always lossless.

    Args:
        picture: in a `SceneLinear` encoding, whose chromaticities the file states.
    """
    import OpenEXR

    facts: Mapping[str, Any] = picture.metadata.container if picture.metadata.format == "exr" else {}
    light = light_of(picture, associated=True)
    if facts.get("half", False):
        finite = np.isfinite(light)
        light = np.where(finite, np.clip(light, -_MOST_HALF, _MOST_HALF), light).astype(np.float16)
    names = {1: "Y", 2: "YA", 3: "RGB", 4: "RGBA"}[light.shape[2]]
    channels = {name: np.ascontiguousarray(light[:, :, place]) for place, name in enumerate(names)}
    header = {
        "compression": getattr(OpenEXR, f"{facts.get('compression', 'ZIP')}_COMPRESSION"),
        "type": OpenEXR.scanlineimage,
        **_windows(facts.get("windows"), picture.shape),
    }
    stream = io.BytesIO()
    with OpenEXR.File(header, channels, num_threads=1) as file:
        file.write(stream)
    kept = facts.get("attributes")
    added = {name: (kind, value) for name, kind, value in kept} if isinstance(kept, tuple) else {}
    if not kept:
        added[b"chromaticities"] = (b"chromaticities", _chromaticities(picture))
    return spliced(stream.getvalue(), added)


def _windows(windows: object, shape: tuple[int, int]) -> dict[str, Any]:
    """Return the data and display windows of the source, if the picture still has its size."""
    if not isinstance(windows, tuple):
        return {}
    left, top, right, bottom = windows[0]
    if (bottom - top + 1, right - left + 1) != shape:
        return {}
    names = ("dataWindow", "displayWindow")
    pairs = [tuple(np.array(window[start : start + 2], np.int32) for start in (0, 2)) for window in windows]
    return dict(zip(names, pairs, strict=True))


def _chromaticities(picture: Picture) -> bytes:
    from hueferry.colour.scene import SceneLinear

    if not isinstance(picture.encoding, SceneLinear):
        raise InputError(f"OpenEXR holds scene-linear light, not {picture.encoding.name}")
    return struct.pack("<8f", *picture.encoding.chromaticities)


def spliced(stream: bytes, added: Attributes) -> bytes:
    """Put attributes into the header of a file of ours, and shift its table of offsets by what they take."""
    head = read_head(stream)
    attributes = {**head.attributes, **added}
    body = b"".join(
        name + b"\0" + kind + b"\0" + struct.pack("<I", len(value)) + value
        for name, (kind, value) in attributes.items()
    )
    front = stream[:8] + body + b"\0"
    # Chunks follow their table in order: the first offset says where it ends.
    first = int.from_bytes(stream[head.end : head.end + 8], "little")
    offsets = np.frombuffer(stream[head.end : first], "<u8") + np.uint64(len(front)) - np.uint64(head.end)
    return front + offsets.astype("<u8").tobytes() + stream[first:]
