"""JPEG XL in and out, with another binding of the library as oracle."""

from __future__ import annotations

import io
from pathlib import Path

import attrs
import imagecodecs
import numpy as np
import pytest
from PIL import Image

from hueferry.colour.encoding import DISPLAY_P3, SRGB
from hueferry.colour.make_profile import profile_of
from hueferry.errors import HueferryError, OutputError, PictureError, RefusedError
from hueferry.files import formats
from hueferry.files.exif import orientation_of, with_orientation
from hueferry.files.jxl import distance_of, read_head
from hueferry.files.read import read
from hueferry.files.thumbnail import upright
from hueferry.files.write import write
from hueferry.picture import Metadata, Picture
from photographs import photograph

XMP = b"<x:xmpmeta xmlns:x='adobe:ns:meta/'/>"
P3 = attrs.evolve(DISPLAY_P3, profile=profile_of(DISPLAY_P3))


def exif(orientation: int) -> bytes:
    block = Image.Exif()
    block[0x0112], block[0x0131] = orientation, "made by hand"
    return block.tobytes().removeprefix(b"Exif\0\0")


def stored(path: Path, data: bytes) -> Path:
    path.write_bytes(data)
    return path


def noise(dtype: type, channels: int) -> np.ndarray:
    values = np.random.default_rng(channels).random((19, 31, channels))
    return (values * (1.0 if dtype is np.float32 else np.iinfo(dtype).max)).astype(dtype)


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16, np.float32])
@pytest.mark.parametrize("channels", [1, 2, 3, 4])
def test_every_depth_comes_back_to_the_bit_in_either_decoder(dtype: type, channels: int, tmp_path: Path) -> None:
    pixels = noise(dtype, channels)
    picture = Picture(pixels, P3, Metadata(exif=exif(1), xmp=XMP), bits=8 * np.dtype(dtype).itemsize)

    path = write(picture, tmp_path / "a.jxl")
    again = read(path)

    np.testing.assert_array_equal(again.pixels, pixels)
    np.testing.assert_array_equal(np.atleast_3d(imagecodecs.jpegxl_decode(path.read_bytes())), pixels)
    assert again.encoding.profile == P3.profile
    assert (again.metadata.exif, again.metadata.xmp) == (exif(1), XMP)


@pytest.mark.parametrize("orientation", range(1, 9))
def test_a_turned_picture_is_written_upright(orientation: int, tmp_path: Path) -> None:
    metadata = Metadata(format="jpeg", exif=exif(orientation), orientation=orientation)
    picture = Picture(photograph("china", step=16), P3, metadata)

    again = read(write(picture, tmp_path / "a.jxl"))

    np.testing.assert_array_equal(again.pixels, upright(picture.pixels, orientation))
    assert again.metadata.orientation == orientation_of(again.metadata.exif) == 1
    assert again.metadata.exif == exif(1)


def test_a_turn_in_the_stream_is_made_once(tmp_path: Path) -> None:
    """The library's own repacking of a JPEG puts EXIF's turn into the stream."""
    stream = io.BytesIO()
    Image.fromarray(photograph("china", step=8)).save(stream, "jpeg", exif=b"Exif\0\0" + exif(6), quality=95)
    packed = bytes(imagecodecs.jpegxl_encode_jpeg(stream.getvalue(), usecontainer=True))

    picture = read(stored(tmp_path / "a.jxl", packed))

    with Image.open(stream) as image:
        expected = upright(np.asarray(image), 6)
    # The two decoders round their transforms apart.
    assert np.abs(picture.pixels.astype(int) - expected).mean() < 1.0
    assert picture.metadata.orientation == 1
    assert picture.metadata.exif == exif(1)


def test_an_orientation_is_put_where_there_is_room_for_it() -> None:
    plain = exif(1).replace(b"\x01\x12\x00\x03", b"\x01\x13\x00\x03")
    assert with_orientation(plain, 1) == plain
    assert with_orientation(plain, 6) is None
    assert with_orientation(b"", 1) == b""
    assert with_orientation(exif(7), 1) == exif(1)
    alone = Image.Exif()
    alone.load(with_orientation(b"", 6))
    assert dict(alone) == {0x0112: 6}


@pytest.mark.parametrize(("height", "width"), [(8, 8), (256, 256), (40, 60), (7, 9), (513, 3), (2000, 1000), (9000, 1)])
@pytest.mark.parametrize("frames", [1, 2])
def test_size_and_film_stand_in_the_first_bits(height: int, width: int, frames: int) -> None:
    pixels = np.zeros((frames, height, width, 3), np.uint8)

    head = read_head(bytes(imagecodecs.jpegxl_encode(pixels if frames > 1 else pixels[0], level=101, effort=1)))

    assert head.shape == (height, width)
    assert (head.film, head.floating) == (frames > 1, False)


@pytest.mark.parametrize("dtype", [np.float16, np.float32])
@pytest.mark.parametrize("frames", [1, 2])
def test_half_and_float_beyond_white_are_not_cut(dtype: type, frames: int, tmp_path: Path) -> None:
    light = (np.random.default_rng(0).random((frames, 9, 13, 3)) * 5).astype(dtype)
    data = bytes(imagecodecs.jpegxl_encode(light if frames > 1 else light[0], level=101))

    picture = read(stored(tmp_path / "a.jxl", data), accept_loss=True)

    np.testing.assert_array_equal(picture.pixels, light[-1].astype(np.float32))
    assert picture.bits == 32


def test_a_quality_makes_it_smaller_and_nothing_is_lost_without(tmp_path: Path) -> None:
    picture = Picture(photograph("china", step=4), P3)

    sizes = [write(picture, tmp_path / f"{q}.jxl", quality=q).stat().st_size for q in (30, 90, 99, 100)]
    error = np.mean((read(tmp_path / "99.jxl").pixels.astype(float) - picture.pixels) ** 2)

    assert sizes == sorted(sizes)
    assert 35 < 10 * np.log10(255**2 / error) < 60
    assert [distance_of(q) for q in (90, 1)] == pytest.approx([1.0, 9.01])


def test_what_cannot_be_read_is_said_in_a_sentence(tmp_path: Path) -> None:
    whole = bytes(imagecodecs.jpegxl_encode(photograph("china", step=16), level=101, usecontainer=True))
    film = bytes(imagecodecs.jpegxl_encode(np.stack([photograph("china", step=16)] * 2), level=101))

    for data, kind, complaint in (
        (film, RefusedError, "is a film"),
        (whole + b"\0\0\0\x0cjhgmabcd", RefusedError, "gain map"),
        (whole[:32], PictureError, "holds no picture"),
        (whole[:-50], PictureError, "ends early"),
        (b"\xff\x0a" + bytes(40), PictureError, "cannot be decoded"),
        (b"\xff\x0a" + ((3 | 0x3FFFFFFF << 2 | 1 << 32) << 1).to_bytes(9, "little"), RefusedError, "header promises"),
    ):
        with pytest.raises(kind, match=complaint):
            read(stored(tmp_path / "a.jxl", data))
    assert read(stored(tmp_path / "a.jxl", film), accept_loss=True).shape == photograph("china", step=16).shape[:2]


def test_without_the_package_the_message_names_it(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = write(Picture(photograph("china", step=32), SRGB), tmp_path / "a.jxl")
    monkeypatch.setattr(formats.importlib.util, "find_spec", lambda _: None)

    with pytest.raises(RefusedError, match=r"needs the optional package pyjpegxl; install hueferry\[jxl\]"):
        read(path)
    with pytest.raises(OutputError, match="pyjpegxl"):
        write(Picture(photograph("china", step=32), SRGB), tmp_path / "b.jxl")


def test_mutated_files_are_pictures_or_typed_errors(tmp_path: Path) -> None:
    picture = Picture(photograph("china", step=16), P3, Metadata(exif=exif(1), xmp=XMP))
    seeds = [write(picture, tmp_path / f"{q}.jxl", quality=q).read_bytes() for q in (60, 100)]
    rng = np.random.default_rng(2)
    read_well = 0
    for number in range(200):
        data = bytearray(seeds[number % 2])
        for _ in range(int(rng.integers(1, 4))):
            data[int(rng.integers(12, len(data)))] = int(rng.integers(0, 256))
        cut = len(data) if rng.random() < 0.7 else int(rng.integers(20, len(data)))
        try:
            read_well += read(stored(tmp_path / "mutant.jxl", bytes(data[:cut]))).pixels.size > 0
        except HueferryError:
            continue
    assert read_well > 10
