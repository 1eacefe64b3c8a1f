"""EXIF travels into TIFF and out of it."""

from __future__ import annotations

import io
from pathlib import Path

import numpy as np
import pytest
import tifffile
from PIL import Image

from hueferry.files.read import read
from hueferry.files.tiff_exif import exif_of_tiff, with_exif
from hueferry.files.write import write

MAKER, TAKEN, EXPOSURE, GPS_LATITUDE, INTEROP = 0x010F, 0x9003, 0x829A, 2, 40965


def with_metadata(path: Path, *, order: str = "<") -> Path:
    """A JPEG with EXIF, GPS and interoperability tags, written by Pillow."""
    exif = Image.Exif()
    exif.endian = order
    exif[MAKER], exif[0x0112] = "Marrowfield", 6
    exif.get_ifd(0x8769).update({TAKEN: "2026:05:14 13:05:00", EXPOSURE: (1, 80), 0x927C: b"note" * 9})
    exif.get_ifd(0x8825).update({1: "N", GPS_LATITUDE: (51.0, 30.0, 12.5)})
    Image.fromarray(np.full((8, 12, 3), 90, np.uint8)).save(path, exif=exif)
    return path


def directories(path: Path) -> tuple[dict[int, object], dict[int, object]]:
    with Image.open(path) as image:
        exif = image.getexif()
        return dict(exif.get_ifd(0x8769)), dict(exif.get_ifd(0x8825))


@pytest.mark.parametrize("order", ["<", ">"])
def test_exif_goes_from_jpeg_to_tiff_and_back(order: str, tmp_path: Path) -> None:
    """Read by Pillow and by tifffile."""
    source = with_metadata(tmp_path / "a.jpg", order=order)

    write(read(source), tmp_path / "b.tif")
    write(read(tmp_path / "b.tif"), tmp_path / "c.jpg")
    write(read(tmp_path / "b.tif"), tmp_path / "d.tif")

    for name in ("b.tif", "c.jpg", "d.tif"):
        assert directories(tmp_path / name) == directories(source)
    with tifffile.TiffFile(tmp_path / "b.tif") as tiff:
        page = tiff.pages[0]
        assert page.tags["ExifTag"].value["DateTimeOriginal"] == "2026:05:14 13:05:00"
        assert page.tags["GPSTag"].value["GPSLatitude"] == (51, 1, 30, 1, 25, 2)
        assert page.tags["Make"].value == "Marrowfield"
        assert page.tags["Orientation"].value == 6
    with Image.open(tmp_path / "c.jpg") as image:
        assert image.getexif()[0x0112] == 6
    assert read(tmp_path / "d.tif").metadata.exif == read(tmp_path / "b.tif").metadata.exif


@pytest.mark.parametrize("byteorder", ["<", ">"])
@pytest.mark.parametrize("bigtiff", [False, True])
def test_exif_is_read_from_any_kind_of_tiff(byteorder: str, bigtiff: bool, tmp_path: Path) -> None:
    exif = read(with_metadata(tmp_path / "a.jpg")).metadata.exif
    plain = io.BytesIO()
    tifffile.imwrite(plain, np.zeros((4, 4, 3), np.uint8), byteorder=byteorder, bigtiff=bigtiff, metadata=None)
    (tmp_path / "t.tif").write_bytes(with_exif(plain.getvalue(), exif))

    write(read(tmp_path / "t.tif"), tmp_path / "back.jpg")

    assert directories(tmp_path / "back.jpg") == directories(tmp_path / "a.jpg")


def test_a_tiff_without_exif_gets_none(tmp_path: Path) -> None:
    tifffile.imwrite(tmp_path / "a.tif", np.zeros((4, 4, 3), np.uint8), photometric="rgb")

    picture = read(tmp_path / "a.tif")
    write(picture, tmp_path / "b.tif")

    assert picture.metadata.exif == b""
    with tifffile.TiffFile(tmp_path / "b.tif") as tiff:
        assert "ExifTag" not in tiff.pages[0].tags


def test_hostile_directories_end_in_nothing_or_a_block(tmp_path: Path) -> None:
    """Pointers into nowhere, to themselves, and huge counts: 2,000 mutations, no exception and no hang."""
    whole = write(read(with_metadata(tmp_path / "a.jpg")), tmp_path / "b.tif").read_bytes()
    rng = np.random.default_rng(4)

    for _ in range(2000):
        broken = bytearray(whole)
        for place in rng.integers(0, len(broken), 4):
            broken[place] = rng.integers(0, 256)
        block = exif_of_tiff(bytes(broken[: rng.integers(8, len(broken) + 1)]), 1)
        assert block == b"" or block[:2] in (b"II", b"MM")
        assert len(block) < 50_000
