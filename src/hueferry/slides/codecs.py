"""How a tile of a slide is packed."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from enum import StrEnum
from types import MappingProxyType

import attrs
import numpy as np

from hueferry.arrays import Pixels


class Packing(StrEnum):
    """How tiles are compressed."""

    JPEG = "jpeg"
    """JPEG 4:4:4: stains are told apart by colour, so colour keeps its full resolution."""
    DEFLATE = "deflate"
    """Lossless, readable everywhere."""
    ZSTD = "zstd"
    """Lossless and faster; not every reader knows it."""


@attrs.frozen
class Codec:
    """A packing as TIFF knows it.

    Attributes:
        compression: TIFF compression tag.
        predictor: TIFF predictor tag: 1 none, 2 horizontal differences.
        photometric: "rgb" or "ycbcr".
        encode: (tile, quality) to bytes.
    """

    compression: int
    predictor: int
    photometric: str
    encode: Callable[[Pixels, int], bytes]


def _jpeg(tile: Pixels, quality: int) -> bytes:
    import imagecodecs

    return bytes(
        imagecodecs.jpeg8_encode(tile, level=quality, colorspace="RGB", outcolorspace="YCbCr", subsampling="444")
    )


def _differences(tile: Pixels) -> bytes:
    if tile.dtype == np.float32:
        return tile.tobytes()
    import imagecodecs

    return bytes(np.asarray(imagecodecs.delta_encode(tile, axis=1)).tobytes())


def _deflate(tile: Pixels, _: int) -> bytes:
    import imagecodecs

    return bytes(imagecodecs.zlib_encode(_differences(tile), level=6))


def _zstd(tile: Pixels, _: int) -> bytes:
    import imagecodecs

    return bytes(imagecodecs.zstd_encode(_differences(tile), level=5))


CODECS: Mapping[Packing, Codec] = MappingProxyType(
    {
        Packing.JPEG: Codec(7, 1, "ycbcr", _jpeg),
        Packing.DEFLATE: Codec(8, 2, "rgb", _deflate),
        Packing.ZSTD: Codec(50000, 2, "rgb", _zstd),
    }
)
"""Every packing."""
