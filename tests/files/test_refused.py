"""What is recognised and not read: by its bytes, never by its name, with a reason and a way round."""

from __future__ import annotations

import io
import struct
from pathlib import Path

import numpy as np
import pytest
import tifffile
from PIL import Image

from hueferry.errors import PictureError, RefusedError
from hueferry.files.formats import FORMATS, REFUSED, refusal, sniff
from hueferry.files.read import read


def pillow(kind: str) -> bytes:
    stream = io.BytesIO()
    Image.new("RGB", (9, 9), "red").save(stream, kind)
    return stream.getvalue()


def negative(*tags: tuple[int, int, int, object, bool], **options: object) -> bytes:
    stream = io.BytesIO()
    pixels = np.zeros((9, 9, 3), np.uint8)
    tifffile.imwrite(stream, pixels, photometric="rgb", extratags=list(tags), metadata=None, **options)
    return stream.getvalue()


DNG_VERSION = (50706, 1, 4, b"\1\4\0\0", True)
MAKE = (271, 2, 0, "a maker", True)


def directory(*entries: tuple[int, int, int, int]) -> bytes:
    """A TIFF of one directory: tag, type, count and value of each entry."""
    body = b"".join(struct.pack("<HHII", *entry) for entry in sorted(entries))
    return b"II*\0" + struct.pack("<IH", 8, len(entries)) + body + bytes(64)


PREVIEW, CAMERA, FURTHER = (254, 4, 1, 1), (271, 2, 4, 0), (330, 4, 1, 8)

REFUSALS = {
    "GIF": (pillow("gif"), "save it as PNG"),
    "BMP": (pillow("bmp"), "save it as PNG"),
    "JPEG 2000": (pillow("jpeg2000"), "save it as TIFF"),
    "a bare stream of JPEG 2000": (b"\xff\x4f\xff\x51" + bytes(40), "save it as TIFF"),
    "a negative in TIFF": (negative(DNG_VERSION), "develop it"),
    "a negative in TIFF of the other order": (negative(DNG_VERSION, byteorder=">"), "develop it"),
    "a preview in TIFF": (directory(PREVIEW, CAMERA, FURTHER), "develop it"),
    "sensor data with a head of their own": (b"........CCD-RAW 0201" + bytes(40), "develop it"),
    "sensor data in ISO base media": (b"\0\0\0\x18ftypcrx \0\0\0\1crx isom" + bytes(40), "develop it"),
    "sensor data marked at byte eight": (b"II*\0\x10\0\0\0CR\2\0" + bytes(40), "develop it"),
    "layers": (b"8BPS\0\1" + bytes(40), "flatten a copy"),
    "PDF": (pillow("pdf"), "export the picture"),
    "PDF behind other bytes": (b"\n\n junk \n%PDF-1.7\n", "export the picture"),
    "SVG": (b"<svg xmlns='http://www.w3.org/2000/svg'/>", "export it as PNG"),
    "SVG behind a prologue": (b"\xef\xbb\xbf<?xml version='1.0'?>\n<!-- drawn -->\n<svg/>", "export it as PNG"),
}


@pytest.mark.parametrize("what", REFUSALS)
@pytest.mark.parametrize("name", ["a.png", "a.tif", "nameless"])
def test_a_refusal_names_the_reason_and_the_way_round(what: str, name: str, tmp_path: Path) -> None:
    data, way_round = REFUSALS[what]
    (tmp_path / name).write_bytes(data)

    with pytest.raises(RefusedError, match=f"which is not read: .*{way_round}"):
        read(tmp_path / name)


def test_every_refusal_of_the_list_is_tried() -> None:
    tried = {next(one.title for one in REFUSED if one.announced(data)) for data, _ in REFUSALS.values()}

    assert tried == {one.title for one in REFUSED}


@pytest.mark.parametrize(
    "data",
    [b"BMW is a car" + bytes(30), b"<?xml version='1.0'?><html/>", b"RIFF....WAVE", b"\0\0\0\x18ftypisom" + bytes(99)],
)
def test_what_is_nothing_of_the_kind_is_not_taken_for_it(data: bytes, tmp_path: Path) -> None:
    (tmp_path / "a.bmp").write_bytes(data)

    assert (sniff(data), refusal(data)) == ("", "")
    with pytest.raises(PictureError, match=r"this is not a JPEG, PNG.* file, whatever its name says"):
        read(tmp_path / "a.bmp")


def test_an_ordinary_tiff_of_a_camera_is_no_negative() -> None:
    assert sniff(negative(MAKE)) == sniff(directory(CAMERA, FURTHER)) == sniff(directory(PREVIEW, CAMERA)) == "tiff"


def test_no_file_announces_two_formats() -> None:
    heads = [data for data, _ in REFUSALS.values()]
    for head in heads:
        claims = [one for one in (*FORMATS.values(), *REFUSED) if one.announced(head)]
        assert len(claims) == 1
