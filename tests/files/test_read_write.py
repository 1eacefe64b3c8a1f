"""Pictures in and out: nothing lost, nothing overwritten, nothing believed."""

from __future__ import annotations

import io
import os
import struct
import tracemalloc
import zlib
from pathlib import Path

import cv2
import numpy as np
import pytest
import tifffile
from PIL import Image, ImageCms, ImageOps

from hueferry.colour.encoding import DISPLAY_P3, SRGB
from hueferry.colour.make_profile import profile_of
from hueferry.colour.scene import REC_709, scene_linear
from hueferry.errors import HueferryError, OutputError, PictureError, RefusedError
from hueferry.files.formats import FORMATS, sniff
from hueferry.files.read import read
from hueferry.files.thumbnail import thumbnail, upright
from hueferry.files.walk import find_pictures
from hueferry.files.write import write
from hueferry.picture import Metadata, Picture
from photographs import photograph

PROFILE = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()


def exif(orientation: int = 6) -> bytes:
    block = Image.Exif()
    block[0x0112], block[0x0131] = orientation, "made by hand"
    return block.tobytes()


def save(path: Path, **options: object) -> Path:
    Image.fromarray(photograph("china", step=4)).save(path, **options)
    return path


LOSSLESS = {
    "png8.png": lambda p: save(p, icc_profile=PROFILE, exif=exif()),
    "rgba.png": lambda p: Image.fromarray(
        np.dstack([photograph("china", step=8), np.full((54, 80), 77, np.uint8)])
    ).save(p),
    "gray.png": lambda p: Image.fromarray(photograph("china", step=8)[:, :, 1]).save(p),
    "deep.png": lambda p: cv2.imwrite(str(p), photograph("china", step=8).astype(np.uint16) * 257 + 3),
    "plain.tif": lambda p: save(p, icc_profile=PROFILE),
    "deep.tif": lambda p: tifffile.imwrite(p, photograph("china", step=8).astype(np.uint16) * 250, photometric="rgb"),
    "float.tif": lambda p: tifffile.imwrite(p, photograph("china", step=8).astype(np.float32) / 200, photometric="rgb"),
    "tiled.tif": lambda p: tifffile.imwrite(
        p, photograph("china", step=4), photometric="rgb", tile=(64, 64), compression="zlib", predictor=True
    ),
    "planar.tif": lambda p: tifffile.imwrite(
        p, np.moveaxis(photograph("china", step=8), -1, 0), photometric="rgb", planarconfig="separate"
    ),
    "big.tif": lambda p: tifffile.imwrite(
        p, photograph("china", step=8), photometric="rgb", bigtiff=True, byteorder=">", compression="lzw"
    ),
    "lossless.webp": lambda p: save(p, lossless=True, icc_profile=PROFILE, exif=exif()),
}


@pytest.mark.parametrize("name", LOSSLESS)
def test_lossless_formats_come_back_to_the_bit(name: str, tmp_path: Path) -> None:
    LOSSLESS[name](tmp_path / name)
    first = read(tmp_path / name)

    again = read(write(first, tmp_path / f"again-{name}"))

    assert again.pixels.dtype == first.pixels.dtype
    np.testing.assert_array_equal(again.pixels, first.pixels)
    assert again.metadata.exif == first.metadata.exif
    assert again.metadata.orientation == first.metadata.orientation
    if first.encoding.profile is not None:
        assert again.encoding.profile == first.encoding.profile


@pytest.mark.parametrize("sampling", ["4:4:4", "4:2:2", "4:2:0"])
@pytest.mark.parametrize("quality", [75, 92])
def test_a_jpeg_is_written_no_coarser_than_it_came(sampling: str, quality: int, tmp_path: Path) -> None:
    path = save(
        tmp_path / "a.jpg", quality=quality, subsampling=sampling, icc_profile=PROFILE, exif=exif(), dpi=(300, 300)
    )

    first = read(path)
    written = write(first, tmp_path / "b.jpg")
    again = read(written)

    with Image.open(path) as before, Image.open(written) as after:
        for number, table in before.quantization.items():
            assert all(new <= old for new, old in zip(after.quantization[number], table, strict=True))
        assert after.info["icc_profile"] == PROFILE
        assert after.info["exif"] == before.info["exif"]
        assert after.info["dpi"] == before.info["dpi"]
    assert again.metadata.container["sampling"] == first.metadata.container["sampling"] == sampling.replace(":", "")
    error = np.mean((first.pixels.astype(float) - again.pixels) ** 2)
    assert 10 * np.log10(255**2 / max(error, 1e-9)) > 40


def test_a_profile_longer_than_a_segment_travels_whole(tmp_path: Path) -> None:
    long = PROFILE + bytes(150_000)
    long = struct.pack(">I", len(long)) + long[4:]
    first = read(save(tmp_path / "a.png", icc_profile=long))

    again = read(write(first, tmp_path / "b.jpg"))

    assert again.encoding.profile == long


def test_untagged_is_srgb_and_said_once(tmp_path: Path) -> None:
    """Common practice, no source."""
    assert read(save(tmp_path / "a.png")).notes == ("no profile: taken as sRGB",)
    assert read(save(tmp_path / "b.png", icc_profile=PROFILE)).notes == ()


def test_the_bytes_decide_and_a_wrong_name_is_noted(tmp_path: Path) -> None:
    save(tmp_path / "a.png").rename(tmp_path / "a.jpg")

    picture = read(tmp_path / "a.jpg")

    assert picture.metadata.format == "png"
    assert any("but it is PNG" in note for note in picture.notes)


@pytest.mark.parametrize(
    ("make", "kind", "complaint"),
    [
        (lambda _: None, PictureError, "no such file"),
        (lambda p: p.touch(), PictureError, "is empty"),
        (lambda p: p.mkdir(), PictureError, "is a folder"),
        (lambda p: p.write_text("hello"), PictureError, "whatever its name says"),
        (lambda p: Image.new("CMYK", (9, 9)).save(p, "jpeg"), RefusedError, "CMYK"),
        (lambda p: p.write_bytes(save(p.with_suffix(".jpg")).read_bytes()[:-900]), PictureError, "ends early"),
        (lambda p: p.write_bytes(save(p.with_suffix(".png")).read_bytes()[:-900]), PictureError, "ends early|longer"),
        (lambda p: tifffile.imwrite(p, np.zeros((2, 9, 9, 3), np.uint8), photometric="rgb"), RefusedError, "pages"),
    ],
)
def test_what_cannot_be_read_is_said_in_a_sentence(make: object, kind: type, complaint: str, tmp_path: Path) -> None:
    path = tmp_path / "x.dat"
    make(path)

    with pytest.raises(kind, match=complaint):
        read(path)


def bomb(kind: str) -> bytes:
    if kind == "png":
        head = struct.pack(">IIBBBBB", 60_000, 60_000, 8, 2, 0, 0, 0)
        chunk = b"IHDR" + head
        tail = b"IDAT" + zlib.compress(bytes(1000))
        parts = [struct.pack(">I", len(c) - 4) + c + struct.pack(">I", zlib.crc32(c)) for c in (chunk, tail, b"IEND")]
        return b"\x89PNG\r\n\x1a\n" + b"".join(parts)
    if kind == "jpg":
        stream = io.BytesIO()
        Image.new("RGB", (16, 16)).save(stream, "jpeg")
        data = bytearray(stream.getvalue())
        frame = data.index(b"\xff\xc0")
        data[frame + 5 : frame + 9] = struct.pack(">HH", 60_000, 60_000)
        return bytes(data)
    entries = [(256, 4, 1, 60_000), (257, 4, 1, 60_000), (258, 3, 1, 8), (259, 3, 1, 1), (262, 3, 1, 1), (273, 4, 1, 8)]
    entries += [(277, 3, 1, 1), (278, 4, 1, 60_000), (279, 4, 1, 100)]
    body = b"".join(struct.pack("<HHII", *entry) for entry in entries)
    return b"II*\0" + struct.pack("<IH", 8, len(entries)) + body + bytes(200)


@pytest.mark.parametrize("kind", ["png", "jpg", "tif"])
def test_a_header_that_promises_too_much_is_refused_before_decoding(kind: str, tmp_path: Path) -> None:
    (tmp_path / f"bomb.{kind}").write_bytes(bomb(kind))
    tracemalloc.start()

    with pytest.raises(RefusedError, match="header promises"):
        read(tmp_path / f"bomb.{kind}")

    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 100e6


def test_mutated_files_are_pictures_or_typed_errors(tmp_path: Path) -> None:
    """Five hundred files with flipped bytes and cut ends; warnings are errors here, so none escapes either."""
    rng = np.random.default_rng(5)
    small = photograph("china", step=16)
    seeds = []
    for name, options in (
        ("a.jpg", {"quality": 90, "exif": exif()}),
        ("a.png", {"icc_profile": PROFILE}),
        ("a.webp", {}),
    ):
        Image.fromarray(small).save(tmp_path / name, **options)
        seeds.append((tmp_path / name).read_bytes())
    tifffile.imwrite(tmp_path / "a.tif", small, photometric="rgb", compression="zlib", tile=(16, 16))
    seeds.append((tmp_path / "a.tif").read_bytes())
    target = tmp_path / "mutant.bin"
    read_well = 0
    for number in range(500):
        data = bytearray(seeds[number % len(seeds)])
        for _ in range(int(rng.integers(1, 6))):
            data[int(rng.integers(0, len(data)))] = int(rng.integers(0, 256))
        cut = len(data) if rng.random() < 0.6 else int(rng.integers(1, len(data)))
        target.write_bytes(bytes(data[:cut]))
        try:
            picture = read(target)
        except HueferryError:
            continue
        read_well += 1
        assert picture.pixels.size > 0
    assert read_well > 20


def test_originals_are_never_overwritten(tmp_path: Path) -> None:
    path = save(tmp_path / "a.png")
    os.link(path, tmp_path / "hard.png")
    (tmp_path / "soft.png").symlink_to(path)
    picture = read(path)

    for name in ("a.png", "hard.png", "soft.png"):
        with pytest.raises(OutputError, match="original"):
            write(picture, tmp_path / name, overwrite=True)


def test_a_taken_name_is_kept_unless_overwriting_is_allowed(tmp_path: Path) -> None:
    picture = read(save(tmp_path / "a.png"))
    (tmp_path / "b.png").write_bytes(b"mine")

    with pytest.raises(OutputError, match="exists already"):
        write(picture, tmp_path / "b.png")
    assert (tmp_path / "b.png").read_bytes() == b"mine"
    write(picture, tmp_path / "b.png", overwrite=True)
    assert sorted(p.name for p in tmp_path.iterdir()) == ["a.png", "b.png"]


@pytest.mark.parametrize(
    ("source", "name", "complaint"),
    [
        ("deep.tif", "x.jpg", "deeper"),
        ("rgba.png", "x.jpg", "no alpha"),
        ("float.tif", "x.png", "float"),
        ("plain.tif", "x.xyz", "no format"),
        ("plain.tif", "missing/x.png", "nothing can be written"),
    ],
)
def test_what_a_format_cannot_hold_is_refused(source: str, name: str, complaint: str, tmp_path: Path) -> None:
    LOSSLESS[source](tmp_path / source)

    with pytest.raises(OutputError, match=complaint):
        write(read(tmp_path / source), tmp_path / name)
    assert [p.name for p in tmp_path.iterdir()] == [source]


@pytest.mark.parametrize("orientation", range(1, 9))
def test_thumbnails_stand_upright(orientation: int, tmp_path: Path) -> None:
    """Pillow's own transposition is the oracle."""
    stored = photograph("china", step=16)
    with Image.open(save(tmp_path / "a.png", exif=exif(orientation))) as image:
        expected = np.asarray(ImageOps.exif_transpose(image))

    small = thumbnail(read(tmp_path / "a.png"), 1000)

    np.testing.assert_allclose(small.pixels.astype(int), expected, atol=1)
    assert upright(stored, orientation).shape[:2] == (stored.shape[:2] if orientation < 5 else stored.shape[1::-1])


def test_thumbnails_average_light_and_not_codes(tmp_path: Path) -> None:
    """A checkerboard of 0 and 255 is half the light: code 188 (IEC 61966-2-1: 0.5 encodes to 187.5)."""
    board = np.kron([[0, 255] * 8, [255, 0] * 8] * 8, np.ones((1, 1))).astype(np.uint8)
    Image.fromarray(np.repeat(board[:, :, None], 3, axis=2)).save(tmp_path / "a.png")

    assert (thumbnail(read(tmp_path / "a.png"), 8).pixels == 188).all()


def test_folders_are_walked_in_order_without_hidden_names(tmp_path: Path) -> None:
    for name in ("b.jpg", "a.PNG", ".hidden.jpg", "note.txt", "deep/c.tif", ".git/d.png"):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).touch()
    (tmp_path / "loop").symlink_to(tmp_path)

    found = [path.relative_to(tmp_path).as_posix() for path in find_pictures([tmp_path])]

    assert found == ["a.PNG", "b.jpg", "deep/c.tif"]


def test_every_format_is_recognised_by_its_first_bytes(tmp_path: Path) -> None:
    plain = Picture(photograph("china", step=16), SRGB)
    light = Picture(photograph("china", step=16) / np.float32(255), scene_linear(REC_709), bits=32)
    for name, one in FORMATS.items():
        if one.writes:
            path = write(light if one.scene_linear else plain, tmp_path / f"a{one.suffixes[0]}")
            assert sniff(path.read_bytes()[:64]) == name


@pytest.mark.parametrize("name", ["a.jpg", "a.png", "a.webp", "a.tif", "a.avif", "a.jxl"])
@pytest.mark.parametrize("block", [b"", exif(1)[6:], "without"])
def test_a_turn_that_exif_does_not_state_is_kept_in_every_format(name: str, block: object, tmp_path: Path) -> None:
    """As from a TIFF or an AVIF, which state it in a field of their own; Pillow's transposition is the oracle."""
    bare = Image.Exif()
    bare[0x0131] = "made by hand"
    metadata = Metadata("tiff", exif=bare.tobytes()[6:] if block == "without" else block, orientation=6)
    stored = np.full((8, 16, 3), 40, np.uint8)
    stored[:4, :8] = 200

    path = write(Picture(stored, SRGB, metadata), tmp_path / name)

    again = read(path)
    shown = upright(again.pixels, again.metadata.orientation)
    assert np.abs(shown.astype(int) - upright(stored, 6)).max() < 12
    if path.suffix != ".jxl":
        with Image.open(path) as image:
            np.testing.assert_allclose(np.asarray(ImageOps.exif_transpose(image)), upright(stored, 6), atol=12)


@pytest.mark.parametrize("name", ["a.jpg", "a.png", "a.tif", "a.avif", "a.jxl"])
def test_gray_without_a_profile_gets_one_of_gray(name: str, tmp_path: Path) -> None:
    """ICC.1:2022, clause 8.4.3: its curve is that of the encoding, and a gray is as bright as it was."""
    grays = np.arange(256, dtype=np.uint8).reshape(16, 16, 1)

    again = read(write(Picture(grays, SRGB), tmp_path / name))

    assert again.encoding.profile[16:20] == b"GRAY"
    codes = np.repeat(np.linspace(0, 1, 9)[:, None], 3, axis=1)
    np.testing.assert_allclose(again.encoding.to_xyz(codes), SRGB.to_xyz(codes), atol=2e-5)
    if name in ("a.png", "a.jpg"):
        with Image.open(tmp_path / name) as image:
            profile = ImageCms.ImageCmsProfile(io.BytesIO(image.info["icc_profile"]))
            assert profile.profile.xcolor_space.strip() == "GRAY"


def stated_by_numbers(path: Path, *numbers: int) -> Path:
    """Put a cICP chunk behind the header of a PNG."""
    data = save(path).read_bytes()
    body = b"cICP" + bytes(numbers)
    path.write_bytes(data[:33] + struct.pack(">I", 4) + body + struct.pack(">I", zlib.crc32(body)) + data[33:])
    return path


def test_a_png_that_states_its_colours_by_numbers_is_taken_at_its_word(tmp_path: Path) -> None:
    """PNG, third edition, clause 11.3.2.6, with the numbers of ITU-T H.273: 12 is Display P3, 13 the curve of sRGB."""
    first = read(stated_by_numbers(tmp_path / "a.png", 12, 13, 0, 1))

    again = read(write(first, tmp_path / "b.png"))

    assert first.encoding is again.encoding is DISPLAY_P3
    assert first.notes == ()
    assert b"cICP\x0c\x0d\x00\x01" in (tmp_path / "b.png").read_bytes()
    assert read(write(first, tmp_path / "b.jpg")).encoding.profile == profile_of(DISPLAY_P3)


def test_a_png_in_pq_is_refused(tmp_path: Path) -> None:
    with pytest.raises(RefusedError, match="coded in PQ"):
        read(stated_by_numbers(tmp_path / "a.png", 9, 16, 0, 1))
