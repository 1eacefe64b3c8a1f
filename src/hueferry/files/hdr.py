"""Radiance HDR: lines of the header read and written by ourselves, pixels in shared exponents.

References:
    Ward (1991), Real Pixels, Graphics Gems II, 80–83: three mantissas of eight bits and a common exponent.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.errors import InputError, PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.light import NOTE, Light, Original, bands, codes_of, light_of
from hueferry.files.probe import check_size
from hueferry.picture import Metadata, Picture

MAGICS = (b"#?RADIANCE", b"#?RGBE")
_SIZE = re.compile(rb"([-+])([XY]) +(\d{1,9}) +([-+])([XY]) +(\d{1,9})\s*\Z")
_MOST_HEADER = 1 << 16
_LEAST, _MOST = 2.0**-127, 2.0**127 * (255 / 256)
"""Light that shared exponents can state."""


@attrs.frozen
class Head:
    """What stands before the pixels.

    Attributes:
        lines: of the header, without the first one, in order.
        shape: rows and columns.
        upright: whether rows run from the top and columns from the left.
        end: where the pixels begin.
    """

    lines: tuple[bytes, ...]
    shape: tuple[int, int]
    upright: bool
    end: int

    def value(self, name: bytes) -> bytes:
        """Return what a line "name=value" says, the last one if there are several, or nothing."""
        found = [line.partition(b"=")[2] for line in self.lines if line.partition(b"=")[0].strip() == name]
        return found[-1].strip() if found else b""


def read_head(data: bytes) -> Head:
    """Read the header.

    Raises:
        InputError: it is broken.
    """
    end = data.find(b"\n\n", 0, _MOST_HEADER)
    stop = data.find(b"\n", end + 2, end + 200)
    found = _SIZE.match(data[end + 2 : stop]) if end >= 0 and stop >= 0 else None
    if found is None or {found[2], found[5]} != {b"X", b"Y"}:
        raise InputError("its header states no size")
    first, second = int(found[3]), int(found[6])
    upright = (found[1], found[2], found[4]) == (b"-", b"Y", b"+")
    shape = (first, second) if found[2] == b"Y" else (second, first)
    return Head(tuple(data[:end].split(b"\n")[1:]), shape, upright, stop + 1)


def read_hdr(path: Path, data: bytes) -> Decoded:
    """Decode a Radiance picture as codes of light.

    Raises:
        PictureError: the file is broken.
        RefusedError: it holds XYZ instead of RGB, or is not stored from the top left.
    """
    from hueferry.colour.scene import REC_709, scene_linear

    try:
        head = read_head(data)
        check_size(path, head.shape)
        _check_kind(path, head)
        stated = head.value(b"PRIMARIES").split()
        encoding = scene_linear([float(value) for value in stated] if stated else REC_709)
        light = _decode(data, head)
    except (RefusedError, PictureError):
        raise
    except (InputError, ValueError, MemoryError) as error:
        raise PictureError(path, f"the Radiance file is broken: {error}") from error
    light.flags.writeable = False
    metadata = Metadata(format="hdr", container={"light": Original(light), "lines": head.lines})
    notes = (NOTE,) if stated else (NOTE, "no primaries: taken as Rec. 709")
    return Decoded(codes_of(light, associated=False), metadata, None, encoding=encoding, notes=notes)


def _check_kind(path: Path, head: Head) -> None:
    if head.value(b"FORMAT") not in (b"", b"32-bit_rle_rgbe"):
        raise RefusedError(path, "this Radiance file holds XYZ; convert it to RGB first")
    if not head.upright:
        raise RefusedError(path, "this Radiance file is not stored from the top left; turn it upright first")


def _decode(data: bytes, head: Head) -> Light:
    """Decode by OpenCV; a plain header is put before the pixels, since its reader asks for a narrower one."""
    import cv2

    rows, columns = head.shape
    if not rows or not columns:
        raise InputError("it has no pixels")
    plain = b"#?RADIANCE\nFORMAT=32-bit_rle_rgbe\n\n" + b"-Y %d +X %d\n" % (rows, columns)
    try:
        decoded = cv2.imdecode(np.frombuffer(plain + data[head.end :], np.uint8), cv2.IMREAD_UNCHANGED)
    except cv2.error as error:
        raise InputError(f"its pixels cannot be decoded: {error}") from error
    if decoded is None or decoded.shape != (rows, columns, 3) or decoded.dtype != np.float32:
        raise InputError("its pixels cannot be decoded; the file ends early")
    return np.ascontiguousarray(decoded[:, :, ::-1])


def write_hdr(picture: Picture) -> bytes:
    """Encode a Radiance picture, run-length packed; gray as three equal channels.

    Args:
        picture: in a `SceneLinear` encoding, whose primaries the header states, without alpha.
    """
    import imagecodecs

    facts: Mapping[str, Any] = picture.metadata.container if picture.metadata.format == "hdr" else {}
    light = light_of(picture, associated=False)
    rounded = to_shared_exponents(np.repeat(light, 3, axis=2) if light.shape[2] == 1 else light)
    lines = facts.get("lines")
    kept = [line for line in lines if isinstance(line, bytes)] if isinstance(lines, tuple) else [_primaries(picture)]
    if not any(line.startswith(b"FORMAT=") for line in kept):
        kept.append(b"FORMAT=32-bit_rle_rgbe")
    rows, columns = picture.shape
    # What does not pack grows by a byte in 128; the encoder's own guess is too small for it.
    room = 5 * rows * columns + 64 * rows
    pixels = bytes(imagecodecs.rgbe_encode(rounded, header=False, rle=True, out=room))
    return b"\n".join([b"#?RADIANCE", *kept, b"", b"-Y %d +X %d" % (rows, columns), pixels])


def _primaries(picture: Picture) -> bytes:
    from hueferry.colour.scene import SceneLinear

    if not isinstance(picture.encoding, SceneLinear):
        raise InputError(f"Radiance holds scene-linear light, not {picture.encoding.name}")
    return b"PRIMARIES=" + b" ".join(b"%.4f" % value for value in picture.encoding.chromaticities)


def to_shared_exponents(light: Light) -> Light:
    """Round (h, w, 3) light to what the format can state, so that no later step has to cut.

    What is negative or not a number becomes 0: the format has no sign.
    """
    rounded = np.empty(light.shape, np.float32)
    for rows in bands(light.shape):
        rounded[rows] = _rounded(light[rows])
    return rounded


def _rounded(light: Light) -> NDArray[np.float64]:
    held = np.clip(np.nan_to_num(light.astype(np.float64), nan=0.0, posinf=_MOST, neginf=0.0), 0.0, _MOST)
    most = held.max(axis=2, keepdims=True)
    step = np.exp2(np.frexp(most)[1] - 8.0)
    # A mantissa that rounds up to 256 belongs to the next exponent.
    step = np.where(np.rint(most / step) > 255, 2 * step, step)
    return np.asarray(np.where(most < _LEAST, 0.0, np.rint(held / step) * step))
