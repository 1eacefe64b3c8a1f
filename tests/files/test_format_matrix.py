"""Every format × depth × gray, colour, alpha × profile × orientation, through an identity table and back.

Pictures, profiles and metadata are made here. Lossless formats give every bit back; lossy ones at least 45 dB.
"""

from __future__ import annotations

import io
import struct
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import attrs
import imagecodecs
import numpy as np
import pytest
from PIL import Image

from hueferry.applying.engine import apply_table
from hueferry.colour.encoding import DISPLAY_P3, SRGB
from hueferry.colour.make_profile import assemble, matrix_profile
from hueferry.colour.profile import read_profile
from hueferry.files.formats import FORMATS, Format
from hueferry.files.read import read
from hueferry.files.thumbnail import upright
from hueferry.files.write import write
from hueferry.picture import Encoding, Metadata, Picture
from hueferry.tables.build import build_table
from hueferry.tables.table import Table
from photographs import photograph

from ..colour.test_profile import lut_profile

CHANNELS = {"gray": 1, "gray with alpha": 2, "colour": 3, "colour with alpha": 4}
XMP = b"<x:xmpmeta xmlns:x='adobe:ns:meta/'><!-- by hand --></x:xmpmeta>"
IPTC = b"\x1c\x02\x78\x00\x07by hand"


def gray_profile() -> bytes:
    """Gamma 2.2 on the neutral axis (ICC.1:2022, clause 8.4.3)."""
    text = b"mluc\0\0\0\0" + struct.pack(">II", 0, 12)
    curve = b"para\0\0\0\0" + struct.pack(">HHi", 0, 0, round(2.2 * 65536))
    white = b"XYZ \0\0\0\0" + np.rint(np.array([0.9642, 1.0, 0.8249]) * 65536).astype(">i4").tobytes()
    tags = {b"desc": text, b"cprt": text, b"wtpt": white, b"kTRC": curve}
    return assemble(tags, kind=b"mntr", space=b"GRAY", connection=b"XYZ ")


PROFILES = {
    "sRGB": matrix_profile(SRGB),
    "Display P3": matrix_profile(DISPLAY_P3),
    "tables": lut_profile(),
    "gray": gray_profile(),
}


def exif(orientation: int) -> bytes:
    block = Image.Exif()
    block[0x010F] = "made by hand"
    block[0x0112] = orientation
    return block.tobytes().removeprefix(b"Exif\0\0")


def tags(block: bytes) -> dict[int, object]:
    read = Image.Exif()
    read.load(block)
    return dict(read)


@cache
def encoding_of(profile: str) -> Encoding:
    return read_profile(PROFILES[profile])


@cache
def identity(profile: str) -> Table:
    return build_table(lambda colours: colours, encoding_of(profile), size=9)


def cases() -> Iterator[tuple[str, int, str]]:
    for name, one in FORMATS.items():
        if one.writes and not one.scene_linear:
            for depth in one.depths:
                for kind, channels in CHANNELS.items():
                    if (one.gray or channels > 2) and (one.alpha or channels % 2):
                        yield name, depth, kind


def made(depth: int, channels: int, profile: str, orientation: int, *, step: int = 16) -> Picture:
    photo = photograph("china", step=step).astype(np.float64) / 255
    codes = np.dstack([photo, photo[:, ::-1, 1]])[:, :, [1, 3, 0, 2][:channels] if channels < 3 else np.s_[:channels]]
    kind = np.float32 if depth == 32 else np.uint8 if depth == 8 else np.uint16
    scale = 1.0 if depth == 32 else 2.0**depth - 1
    pixels = (codes * scale if depth == 32 else np.rint(codes * scale)).astype(kind)
    metadata = Metadata(exif=exif(orientation), xmp=XMP, iptc=IPTC, orientation=orientation)
    return Picture(pixels, encoding_of(profile), metadata, bits=depth)


def decibels(first: Picture, second: Picture) -> float:
    error = np.mean((first.pixels.astype(np.float64) - second.pixels) ** 2)
    return float(10 * np.log10(first.top_code**2 / max(error, 1e-12)))


def check_kept(format_: Format, given: Picture, first: Picture, again: Picture) -> None:
    orientation = given.metadata.orientation
    assert again.metadata.orientation == first.metadata.orientation == (1 if format_.turn == "upright" else orientation)
    for picture in (first, again):
        kept = picture.metadata
        assert ("profile" in format_.keeps) == (picture.encoding.profile == given.encoding.profile)
        same = tags if format_.name == "tiff" else bytes  # directories of TIFF's own, in its own byte order
        assert ("exif" in format_.keeps) == (same(kept.exif) == same(exif(kept.orientation)))
        assert ("xmp" in format_.keeps) == (kept.xmp == XMP)
        assert ("iptc" in format_.keeps) == (kept.iptc == IPTC)
        assert picture.notes == ()


@pytest.mark.parametrize(("name", "depth", "kind"), list(cases()))
def test_an_identity_gives_everything_back(name: str, depth: int, kind: str, tmp_path: Path) -> None:
    format_, channels = FORMATS[name], CHANNELS[kind]
    suffix = format_.suffixes[0]
    profiles = ["gray"] if channels <= 2 else ["sRGB", "Display P3", "tables"]
    for profile in profiles:
        for orientation in range(1, 9):
            step = 24 if format_.lossless else 8
            given = made(depth, channels, profile, orientation, step=step)
            first = read(write(given, tmp_path / f"{profile}-{orientation}{suffix}"))

            again = read(write(apply_table(identity(profile), first), tmp_path / f"{profile}-{orientation}-b{suffix}"))

            check_kept(format_, given, first, again)
            shown = upright(given.pixels, orientation) if format_.turn == "upright" else given.pixels
            assert (first.bits, first.pixels.shape, first.pixels.dtype) == (depth, shown.shape, shown.dtype)
            if format_.lossless:
                np.testing.assert_array_equal(first.pixels, shown)
                np.testing.assert_array_equal(again.pixels, first.pixels)
            else:
                assert decibels(first, again) >= 45


def encoded(name: str, pixels: np.ndarray) -> bytes:
    """A lossy file by another encoder."""
    if name == "avif":
        return bytes(imagecodecs.avif_encode(pixels, level=85, pixelformat="420", speed=8))
    if name == "jxl":
        return bytes(imagecodecs.jpegxl_encode(pixels, level=85))
    stream = io.BytesIO()
    Image.fromarray(pixels).save(stream, name, quality=85)
    return stream.getvalue()


@pytest.mark.parametrize("name", ["jpeg", "webp", "avif", "jxl"])
@pytest.mark.parametrize("photo", ["china", "flower"])
def test_lossy_files_of_others_come_back_at_45_decibels(name: str, photo: str, tmp_path: Path) -> None:
    suffix = FORMATS[name].suffixes[0]
    path = tmp_path / f"a{suffix}"
    path.write_bytes(encoded(name, photograph(photo, step=1)))
    first = read(path)

    again = read(write(apply_table(identity("sRGB"), first), tmp_path / f"b{suffix}"))

    assert decibels(first, again) >= 45


def test_what_a_format_does_not_hold_is_not_in_the_matrix_by_mistake() -> None:
    """A format that is said to hold no gray gives colour back; one that is said to hold no alpha refuses it."""
    from hueferry.errors import OutputError

    for one in FORMATS.values():
        if one.writes and not one.alpha and not one.scene_linear:
            with pytest.raises(OutputError, match="holds no alpha"):
                write(made(8, 4, "sRGB", 1), Path("nowhere") / f"a{one.suffixes[0]}")


def test_formats_without_gray_hold_it_as_three_equal_channels(tmp_path: Path) -> None:
    for one in FORMATS.values():
        if one.writes and not one.gray and not one.scene_linear:
            gray = attrs.evolve(made(8, 1, "gray", 1), encoding=encoding_of("sRGB"))
            again = read(write(gray, tmp_path / f"a{one.suffixes[0]}"))
            np.testing.assert_array_equal(again.pixels, np.repeat(gray.pixels, 3, axis=2))
