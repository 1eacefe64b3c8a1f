"""AVIF in and out, with Pillow's own copy of the decoder and the standards' numbers as oracles."""

from __future__ import annotations

import io
from pathlib import Path

import attrs
import imagecodecs
import numpy as np
import pytest
from PIL import Image, ImageCms

from hueferry.colour.encoding import BT2020, DISPLAY_P3, SRGB
from hueferry.colour.make_profile import gray_profile_of, profile_of
from hueferry.errors import HueferryError, OutputError, PictureError, RefusedError
from hueferry.files.avif import TURNS, write_avif
from hueferry.files.isobmff import Items, assemble, boxes, read_items
from hueferry.files.read import read
from hueferry.files.thumbnail import upright
from hueferry.files.write import write
from hueferry.picture import Metadata, Picture
from photographs import photograph

PROFILE = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()
XMP = b"<x:xmpmeta xmlns:x='adobe:ns:meta/'/>"


def exif(orientation: int = 1) -> bytes:
    block = Image.Exif()
    block[0x0131] = "made by hand"
    if orientation != 1:
        block[0x0112] = orientation
    return block.tobytes().removeprefix(b"Exif\0\0")


def stored(path: Path, data: bytes) -> Path:
    path.write_bytes(data)
    return path


def encoded(bits: int = 8, **options: object) -> bytes:
    pixels = photograph("china", step=8)
    deep = np.rint(pixels * ((2.0**bits - 1) / 255)).astype(np.uint8 if bits == 8 else np.uint16)
    return bytes(imagecodecs.avif_encode(deep, bitspersample=bits, speed=8, **options))


def changed(data: bytes, kind: bytes, payload: bytes) -> bytes:
    """Give the picture of a file one more property, or another one of a kind that it has."""
    items = read_items(data)
    brands = next(body for name, body, _ in boxes(data) if name == b"ftyp")
    bodies = {number: items.bytes_of(data, number) for number in items.items}
    kept = tuple(one if one[0] != kind else (kind, payload) for one in items.properties)
    if kind in [name for name, _ in items.properties]:
        return assemble(brands, Items(items.primary, items.items, kept, items.references), bodies)
    item = items.items[items.primary]
    more = {**items.items, items.primary: attrs.evolve(item, properties=(*item.properties, (len(kept), True)))}
    return assemble(brands, Items(items.primary, more, (*kept, (kind, payload)), items.references), bodies)


def test_what_another_encoder_wrote_is_read_whole(tmp_path: Path) -> None:
    stream = io.BytesIO()
    Image.fromarray(photograph("china", step=4)).save(
        stream, "avif", quality=90, icc_profile=PROFILE, exif=exif(), xmp=XMP
    )

    picture = read(stored(tmp_path / "a.avif", stream.getvalue()))

    with Image.open(stream) as image:
        np.testing.assert_allclose(picture.pixels.astype(int), np.asarray(image).astype(int), atol=1)
    assert picture.encoding.profile == PROFILE
    assert picture.metadata.exif == exif()
    assert picture.metadata.xmp == XMP
    assert not picture.metadata.container["lossless"]


@pytest.mark.parametrize("orientation", range(1, 9))
def test_turns_are_those_of_another_encoder(orientation: int, tmp_path: Path) -> None:
    """Pillow turns EXIF orientations into the file's own turn and mirror when it writes."""
    stream = io.BytesIO()
    Image.fromarray(photograph("china", step=16)).save(stream, "avif", quality=90, exif=exif(orientation))

    assert read(stored(tmp_path / "a.avif", stream.getvalue())).metadata.orientation == orientation


@pytest.mark.parametrize("orientation", range(1, 9))
def test_turns_do_what_exif_says(orientation: int) -> None:
    """ISO/IEC 23008-12, clauses 6.5.10 and 6.5.12: quarter turns against the clock, then the mirror."""
    pixels = np.arange(12, dtype=np.uint8).reshape(3, 4, 1)
    turn, mirror = TURNS[orientation]

    turned = np.rot90(pixels, turn or 0)
    shown = turned if mirror is None else (turned[::-1] if mirror == 0 else turned[:, ::-1])

    np.testing.assert_array_equal(shown, upright(pixels, orientation))


@pytest.mark.parametrize("orientation", [1, 3, 5, 6])
def test_another_decoder_finds_what_was_written(orientation: int, tmp_path: Path) -> None:
    metadata = Metadata(exif=exif(orientation), xmp=XMP, orientation=orientation)
    picture = Picture(photograph("china", step=8), attrs.evolve(SRGB, profile=PROFILE), metadata)

    path = write(picture, tmp_path / "a.avif")

    with Image.open(path) as image:
        np.testing.assert_array_equal(np.asarray(image), picture.pixels)
        assert image.info["icc_profile"] == PROFILE
        assert image.info["xmp"] == XMP
        assert image.getexif().get(0x0112, 1) == orientation
        assert image.getexif()[0x0131] == "made by hand"


@pytest.mark.parametrize("bits", [8, 10, 12])
@pytest.mark.parametrize("channels", [1, 2, 3, 4])
def test_every_depth_comes_back_to_the_bit(bits: int, channels: int, tmp_path: Path) -> None:
    rng = np.random.default_rng(bits + channels)
    pixels = rng.integers(0, 2**bits, (17, 23, channels)).astype(np.uint8 if bits == 8 else np.uint16)

    again = read(write(Picture(pixels, SRGB, bits=bits), tmp_path / "a.avif"))

    np.testing.assert_array_equal(again.pixels, pixels)
    assert again.bits == bits
    assert again.encoding.profile == (profile_of(SRGB) if channels > 2 else gray_profile_of(SRGB))


@pytest.mark.parametrize(
    ("primaries", "transfer", "expected"), [(1, 13, SRGB), (12, 13, DISPLAY_P3), (9, 1, BT2020), (9, 14, BT2020)]
)
def test_colours_stated_by_numbers_are_read_and_stated_again(
    primaries: int, transfer: int, expected: object, tmp_path: Path
) -> None:
    """ITU-T H.273, tables 2 and 3."""
    first = read(stored(tmp_path / "a.avif", encoded(primaries=primaries, transfer=transfer)))

    again = read(write(first, tmp_path / "b.avif"))

    assert first.encoding is expected
    assert again.encoding is expected
    assert first.notes == again.notes == ()
    np.testing.assert_array_equal(again.pixels, first.pixels)


def test_ten_bits_fill_the_sixteen_of_a_png(tmp_path: Path) -> None:
    first = read(stored(tmp_path / "a.avif", encoded(10)))

    again = read(write(first, tmp_path / "b.png"))

    np.testing.assert_array_equal(again.pixels, np.rint(first.pixels * (65535 / 1023)).astype(np.uint16))
    assert again.bits == 16


def test_a_lossy_source_is_written_no_coarser_than_45_decibels(tmp_path: Path) -> None:
    source = bytes(imagecodecs.avif_encode(photograph("china", step=1), level=80, pixelformat="420", speed=8))
    first = read(stored(tmp_path / "a.avif", source))

    again = read(write(first, tmp_path / "b.avif"))

    error = np.mean((first.pixels.astype(float) - again.pixels) ** 2)
    assert 45 < 10 * np.log10(255**2 / error) < 100


def test_a_quality_makes_it_smaller(tmp_path: Path) -> None:
    picture = Picture(photograph("china", step=4), SRGB)

    sizes = [write(picture, tmp_path / f"{q}.avif", quality=q).stat().st_size for q in (40, 80, 100)]

    assert sizes == sorted(sizes)
    assert sizes[0] < sizes[2] / 4


def test_sixteen_bits_are_refused(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match=r"12 bits and the picture is deeper; write PNG"):
        write(Picture(np.zeros((4, 4, 3), np.uint16), SRGB, bits=16), tmp_path / "a.avif")


def test_a_crop_that_the_file_only_states_goes_on_being_stated(tmp_path: Path) -> None:
    crop = b"".join(n.to_bytes(4, "big") for n in (40, 1, 30, 1, 0, 1, 0, 1))
    first = read(stored(tmp_path / "a.avif", changed(encoded(), b"clap", crop)))

    items = read_items(write(first, tmp_path / "b.avif").read_bytes())

    assert items.of(items.primary, b"clap") == [crop]


def film() -> bytes:
    stream = io.BytesIO()
    frames = [Image.fromarray(photograph("china", step=16)[::turn]) for turn in (1, -1)]
    frames[0].save(stream, "avif", save_all=True, append_images=frames[1:])
    return stream.getvalue()


def with_gain_map() -> bytes:
    items = read_items(encoded())
    gain = attrs.evolve(items.items[items.primary], kind=b"tmap")
    return assemble(
        b"avif\0\0\0\0mif1",
        Items(items.primary, {**items.items, 7: gain}, items.properties, ()),
        {n: items.bytes_of(encoded(), n) for n in items.items},
    )


@pytest.mark.parametrize(
    ("data", "kind", "complaint"),
    [
        (film(), RefusedError, "is a film"),
        (with_gain_map(), RefusedError, "gain map"),
        (changed(encoded(), b"auxC", bytes(4) + b"urn:mpeg:hevc:2015:auxid:2\0"), RefusedError, "depth map"),
        (encoded(primaries=9, transfer=16), RefusedError, "coded in PQ"),
        (encoded(primaries=9, transfer=18), RefusedError, "coded in HLG"),
        (encoded(primaries=22, transfer=13), RefusedError, "embed an ICC profile"),
        (changed(encoded(), b"ispe", bytes(4) + b"\0\1\0\0" * 2), RefusedError, "header promises"),
        (encoded()[:200], PictureError, "longer than the file|decoded|incomplete"),
        (encoded()[:32], PictureError, "lists no pictures"),
    ],
)
def test_what_cannot_be_read_is_said_in_a_sentence(
    data: bytes, kind: type[PictureError], complaint: str, tmp_path: Path
) -> None:
    with pytest.raises(kind, match=complaint):
        read(stored(tmp_path / "a.avif", data))


def test_one_frame_of_a_film_is_read_if_the_loss_is_accepted(tmp_path: Path) -> None:
    assert read(stored(tmp_path / "a.avif", film()), accept_loss=True).shape == photograph("china", step=16).shape[:2]


def test_mutated_files_are_pictures_or_typed_errors(tmp_path: Path) -> None:
    picture = Picture(photograph("china", step=16), SRGB, Metadata(exif=exif(6), xmp=XMP, orientation=6))
    seed = write_avif(picture, PROFILE, quality=60)
    rng = np.random.default_rng(9)
    read_well = 0
    for number in range(300):
        data = bytearray(seed)
        for _ in range(int(rng.integers(1, 6))):
            # Most of the file is coded pixels; the boxes stand in its first kilobyte.
            data[int(rng.integers(4, 900 if number % 3 else len(data)))] = int(rng.integers(0, 256))
        cut = len(data) if rng.random() < 0.7 else int(rng.integers(20, len(data)))
        try:
            read_well += read(stored(tmp_path / "mutant.avif", bytes(data[:cut]))).pixels.size > 0
        except HueferryError:
            continue
    assert read_well > 20
