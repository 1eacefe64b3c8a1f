"""The way to each format's reader and writer, imported when they are needed and given one shape."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from hueferry.arrays import Pixels
from hueferry.files.codec import Codec, Decoded, Reader, Writer
from hueferry.picture import Metadata, Picture

Triple = tuple[Pixels, Metadata, bytes | None]


def _reads(read: Callable[..., Triple]) -> Reader:
    def reader(path: Path, data: bytes, *, accept_loss: bool) -> Decoded:
        pixels, metadata, profile = read(path, data, accept_loss=accept_loss)
        return Decoded(pixels, metadata, profile)

    return reader


def _writes(write: Callable[..., bytes], *, with_quality: bool) -> Writer:
    def writer(picture: Picture, profile: bytes | None, *, quality: int | None) -> bytes:
        options = {"quality": quality} if with_quality else {}
        return write(picture.pixels, picture.metadata, profile, **options)

    return writer


def load_jpeg() -> Codec:
    """JPEG."""
    from hueferry.files.jpeg import read_jpeg, write_jpeg

    return Codec(read_jpeg, _writes(write_jpeg, with_quality=True))


def load_png() -> Codec:
    """PNG."""
    from hueferry.files.png import read_png, write_png

    return Codec(read_png, _writes(write_png, with_quality=False))


def load_tiff() -> Codec:
    """TIFF."""
    from hueferry.files.tiff import read_tiff, write_tiff

    return Codec(_reads(read_tiff), _writes(write_tiff, with_quality=False))


def load_webp() -> Codec:
    """WebP."""
    from hueferry.files.webp import read_webp, write_webp

    return Codec(read_webp, _writes(write_webp, with_quality=True))


def load_avif() -> Codec:
    """AVIF."""
    from hueferry.files.avif import read_avif, write_avif

    return Codec(read_avif, write_avif)


def load_jxl() -> Codec:
    """JPEG XL."""
    from hueferry.files.jxl import read_jxl, write_jxl

    return Codec(read_jxl, write_jxl)


def load_exr() -> Codec:
    """OpenEXR."""
    from hueferry.files.exr import read_exr, write_exr

    return Codec(read_exr, lambda picture, *_, **__: write_exr(picture))


def load_hdr() -> Codec:
    """Radiance HDR."""
    from hueferry.files.hdr import read_hdr, write_hdr

    return Codec(
        lambda path, data, **_: read_hdr(path, data),
        lambda picture, *_, **__: write_hdr(picture),
    )


def load_heic() -> Codec:
    """HEIC, which is read only."""
    from hueferry.files.heic import read_heic

    return Codec(read_heic, None)
