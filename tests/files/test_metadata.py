"""Metadata: compressed, oversized, cut into pieces, in other formats' places, and what is said where it is lost."""

from __future__ import annotations

import io
import struct
import zlib
from pathlib import Path

import numpy as np
import pytest
import tifffile
from PIL import Image, IptcImagePlugin

from hueferry.applying.engine import apply_table
from hueferry.colour.encoding import SRGB
from hueferry.errors import PictureError, RefusedError
from hueferry.files.exif import without_thumbnail
from hueferry.files.iptc import as_resources, iptc_of
from hueferry.files.read import read
from hueferry.files.write import lost_in, write
from hueferry.picture import Metadata, Picture
from hueferry.tables.table import Table
from photographs import photograph

XMP = b'<x:xmpmeta xmlns:x="adobe:ns:meta/"><rdf:RDF/></x:xmpmeta>'
IIM = b"\x1c\x02\x78\x00\x0cA quiet lake" + b"\x1c\x02\x19\x00\x04lake"
SMALL = photograph("china", step=16)
DARKER = Table(np.stack(np.meshgrid(*[np.linspace(0, 0.9, 9)] * 3, indexing="ij"), axis=-1))


def png(*chunks: tuple[bytes, bytes]) -> bytes:
    """Make a PNG with further chunks behind its header."""
    stream = io.BytesIO()
    Image.fromarray(SMALL).save(stream, "png")
    data = stream.getvalue()
    extra = b"".join(struct.pack(">I", len(b)) + k + b + struct.pack(">I", zlib.crc32(k + b)) for k, b in chunks)
    return data[:33] + extra + data[33:]


def jpeg(*segments: tuple[int, bytes], behind: bytes = b"", **options: object) -> bytes:
    """Make a JPEG with further segments before all others."""
    stream = io.BytesIO()
    Image.fromarray(SMALL).save(stream, "jpeg", quality=90, **options)
    data = stream.getvalue()
    extra = b"".join(bytes([0xFF, marker]) + struct.pack(">H", len(body) + 2) + body for marker, body in segments)
    return data[:20] + extra + data[20:] + behind


def put(path: Path, data: bytes) -> Path:
    path.write_bytes(data)
    return path


@pytest.mark.parametrize(
    "chunk",
    [
        (b"iTXt", b"XML:com.adobe.xmp\0\0\0en\0\0" + XMP),
        (b"iTXt", b"XML:com.adobe.xmp\0\1\0\0\0" + zlib.compress(XMP)),
        (b"zTXt", b"Raw profile type xmp\0\0" + zlib.compress(b"\nxmp\n%8d\n%s\n" % (len(XMP), XMP.hex().encode()))),
        (b"tEXt", b"Raw profile type xmp\0\nxmp\n%8d\n%s\n" % (len(XMP), XMP.hex().encode())),
    ],
)
def test_xmp_in_png_is_read_compressed_or_not(chunk: tuple[bytes, bytes], tmp_path: Path) -> None:
    """PNG, third edition, clause 11.3.3."""
    picture = read(put(tmp_path / "a.png", png(chunk)))

    assert picture.metadata.xmp == XMP
    assert read(write(picture, tmp_path / "b.jpg")).metadata.xmp == XMP
    assert read(write(picture, tmp_path / "c.png")).metadata.xmp == XMP


def test_a_text_that_unpacks_to_too_much_is_refused(tmp_path: Path) -> None:
    bomb = zlib.compress(bytes(80 << 20), 9)

    with pytest.raises(PictureError, match="larger than 64 MB"):
        read(put(tmp_path / "a.png", png((b"iTXt", b"XML:com.adobe.xmp\0\1\0\0\0" + bomb))))
    with pytest.raises(PictureError, match="larger than 64 MB"):
        read(put(tmp_path / "b.png", png((b"iCCP", b"icc\0\0" + bomb))))


def test_iptc_travels_between_jpeg_and_tiff_in_the_place_of_each(tmp_path: Path) -> None:
    """Pillow and tifffile are the oracles: JPEG keeps a list of resources, TIFF the block alone."""
    first = read(put(tmp_path / "a.jpg", jpeg((0xED, b"Photoshop 3.0\0" + as_resources(IIM)))))
    assert first.metadata.iptc == IIM

    tiff = write(first, tmp_path / "b.tif")
    again = write(read(tiff), tmp_path / "c.jpg")

    with tifffile.TiffFile(tiff) as file:
        assert bytes(file.pages[0].tags[33723].value)[: len(IIM)] == IIM
    with Image.open(again) as image:
        assert IptcImagePlugin.getiptcinfo(image)[(2, 120)] == b"A quiet lake"


def test_iptc_is_found_behind_other_resources() -> None:
    other = b"8BIM\x04\x25\x03odd\0\0\0\x03abc\0"

    assert iptc_of(other[:6] + b"\x03odd" + b"\0\0\0\x03abc\0" + as_resources(IIM)) == IIM
    assert iptc_of(b"8BIM\x04\x04\0\0\0\0\xff\xffshort") == b""


@pytest.mark.parametrize("name", ["a.png", "a.webp"])
def test_what_has_no_place_is_said(name: str) -> None:
    metadata = Metadata("jpeg", iptc=IIM, xmp=XMP)

    (note,) = lost_in(Picture(SMALL, SRGB, metadata), Path(name))

    assert "IPTC (26 bytes)" in note
    assert "XMP" not in note


@pytest.mark.parametrize("size", [65_503, 65_504, 65_600, 200_000])
def test_xmp_beyond_a_segment_is_cut_and_joined(size: int, tmp_path: Path) -> None:
    """XMP specification, part 3: a first packet points to pieces by the MD5 of what they make."""
    xmp = XMP[:-1] + b" " * (size - len(XMP)) + b">"
    picture = Picture(SMALL, SRGB, Metadata("png", xmp=xmp))

    again = read(write(picture, tmp_path / "a.jpg"))

    assert again.metadata.xmp == xmp
    assert read(write(again, tmp_path / "b.jpg")).metadata.xmp == xmp
    assert read(write(again, tmp_path / "c.png")).metadata.xmp == xmp


def test_iptc_beyond_a_segment_is_cut_and_joined(tmp_path: Path) -> None:
    picture = Picture(SMALL, SRGB, Metadata("tiff", iptc=IIM * 4000))

    assert read(write(picture, tmp_path / "a.jpg")).metadata.iptc == IIM * 4000


def test_exif_that_no_jpeg_can_hold_is_said(tmp_path: Path) -> None:
    block = b"MM\0*\0\0\0\x08\0\0" + bytes(70_000)
    picture = Picture(SMALL, SRGB, Metadata("png", exif=block))

    (note,) = lost_in(picture, tmp_path / "a.jpg")

    assert "70,010 bytes" in note
    assert read(write(picture, tmp_path / "a.jpg")).metadata.exif == b""


def test_a_profile_with_a_missing_piece_is_no_profile(tmp_path: Path) -> None:
    piece = b"ICC_PROFILE\0" + bytes([1, 2]) + bytes(200)

    with pytest.raises(PictureError, match="piece of its colour profile is missing"):
        read(put(tmp_path / "a.jpg", jpeg((0xE2, piece))))


@pytest.mark.parametrize(
    ("segments", "behind"),
    [
        ([(0xE2, b"MPF\0" + bytes(20))], b""),
        ([(0xE2, b"urn:iso:std:iso:ts:21496:-1\0" + bytes(4))], b""),
        ([(0xE1, b"http://ns.adobe.com/xap/1.0/\0" + b'<a xmlns:h="http://ns.adobe.com/hdr-gain-map/1.0/"/>')], b""),
        ([], b"\xff\xd8\xff\xe0" + bytes(40)),
        ([], b"\0\0\0\x18ftypmp42" + bytes(40)),
    ],
)
def test_what_would_be_lost_stops_or_is_noted(segments: list[tuple[int, bytes]], behind: bytes, tmp_path: Path) -> None:
    path = put(tmp_path / "a.jpg", jpeg(*segments, behind=behind))

    with pytest.raises(RefusedError, match="gain map or further pictures"):
        read(path)
    picture = read(path, accept_loss=True)

    assert any("loss was accepted" in note for note in picture.notes)
    written = write(picture, tmp_path / "b.jpg").read_bytes()
    assert b"MPF\0" not in written
    assert b"21496" not in written


def test_bytes_behind_a_picture_are_noted(tmp_path: Path) -> None:
    assert any("25 bytes behind" in note for note in read(put(tmp_path / "a.jpg", jpeg(behind=b"maker" * 5))).notes)
    assert len(read(put(tmp_path / "b.jpg", jpeg(behind=bytes(7)))).notes) == 1


def exif_with_thumbnail() -> tuple[bytes, bytes]:
    """Return a little-endian EXIF block with an orientation and a small JPEG, and that JPEG."""
    stream = io.BytesIO()
    Image.fromarray(SMALL).save(stream, "jpeg")
    small = stream.getvalue()
    one = struct.pack("<HHII", 0x0112, 3, 1, 6)
    two = struct.pack("<HHII", 0x0201, 4, 1, 56) + struct.pack("<HHII", 0x0202, 4, 1, len(small))
    block = b"II*\0" + struct.pack("<IH", 8, 1) + one + struct.pack("<IH", 26, 2) + two + bytes(4)
    return block + small, small


@pytest.mark.parametrize("name", ["a.jpg", "a.png", "a.webp"])
def test_the_small_picture_of_uncorrected_colours_goes_with_the_correction(name: str, tmp_path: Path) -> None:
    """Every other byte of EXIF stays; Pillow finds no second directory afterwards."""
    block, small = exif_with_thumbnail()
    first = read(write(Picture(SMALL, SRGB, Metadata("", exif=block, orientation=6)), tmp_path / name))
    assert first.metadata.exif == block

    again = read(write(apply_table(DARKER, first), tmp_path / f"b-{name}"))

    assert len(again.metadata.exif) == len(block)
    assert small[-60:] not in (tmp_path / f"b-{name}").read_bytes()
    assert again.metadata.orientation == 6
    with Image.open(tmp_path / f"b-{name}") as image:
        assert not dict(image.getexif().get_ifd(1))


@pytest.mark.parametrize("seed", range(40))
def test_broken_exif_is_left_alone_or_keeps_its_length(seed: int) -> None:
    rng = np.random.default_rng(seed)
    block = bytearray(exif_with_thumbnail()[0])
    for _ in range(4):
        block[int(rng.integers(0, 60))] = int(rng.integers(0, 256))

    assert len(without_thumbnail(bytes(block))) == len(block)


def chrm(*values: float) -> tuple[bytes, bytes]:
    return b"cHRM", struct.pack(">8I", *(round(100_000 * value) for value in values))


REC_709 = (0.3127, 0.3290, 0.64, 0.33, 0.30, 0.60, 0.15, 0.06)


@pytest.mark.parametrize(
    ("chunks", "noted"),
    [
        ([(b"sRGB", b"\0"), (b"gAMA", struct.pack(">I", 100_000))], False),
        ([(b"gAMA", struct.pack(">I", 45_455))], True),
        ([(b"gAMA", struct.pack(">I", 45_455)), chrm(*REC_709)], True),
    ],
)
def test_what_stands_for_srgb_is_srgb(chunks: list[tuple[bytes, bytes]], noted: bool, tmp_path: Path) -> None:
    """PNG, third edition, clause 4.3: sRGB goes before gAMA and cHRM."""
    picture = read(put(tmp_path / "a.png", png(*chunks)))

    assert picture.encoding is SRGB
    assert bool(picture.notes) is noted


def test_gamma_and_primaries_of_a_png_are_honoured(tmp_path: Path) -> None:
    """Gamma 1.8 with the primaries of Rec. 709 by hand: code c has the light c ** 1.8, and white is D50's."""
    path = put(tmp_path / "a.png", png((b"gAMA", struct.pack(">I", 55_556)), chrm(*REC_709)))

    picture = read(path)

    codes = np.repeat(np.linspace(0, 1, 9)[:, None], 3, axis=1)
    xyz = picture.encoding.to_xyz(codes)
    np.testing.assert_allclose(xyz[:, 1], codes[:, 0] ** 1.8, atol=1e-4)
    np.testing.assert_allclose(xyz[-1], (0.9642, 1.0, 0.8249), atol=2e-4)
    assert "gamma 1.80" in picture.notes[0]
    again = read(write(picture, tmp_path / "b.png"))
    np.testing.assert_allclose(again.encoding.to_xyz(codes), xyz, atol=2e-4)


def test_wide_primaries_of_a_png_are_honoured(tmp_path: Path) -> None:
    """Pure green at 0.21, 0.71 of D65 (as in a well-known wide space) lies outside of sRGB: its red is below zero."""
    points = (0.3127, 0.3290, 0.64, 0.33, 0.21, 0.71, 0.15, 0.06)
    picture = read(put(tmp_path / "a.png", png((b"gAMA", struct.pack(">I", 45_455)), chrm(*points))))

    assert SRGB.from_xyz(picture.encoding.to_xyz(np.array([[0.0, 1.0, 0.0]])))[0, 0] < 0


@pytest.mark.parametrize("points", [(0.0,) * 8, (0.3, 0.3) * 4, (2.0,) * 8])
def test_primaries_that_make_no_sense_are_not_used(points: tuple[float, ...], tmp_path: Path) -> None:
    picture = read(put(tmp_path / "a.png", png(chrm(*points))))

    assert picture.encoding is SRGB
    assert any("makes no sense" in note for note in picture.notes)


def test_measured_bits_and_unknown_chunks_are_noted(tmp_path: Path) -> None:
    picture = read(put(tmp_path / "a.png", png((b"sBIT", b"\5\6\5"), (b"abCd", b"\x1b[31m"))))

    assert any("6 of 8 bits" in note for note in picture.notes)
    assert any("abCd" in note for note in picture.notes)
    assert b"sBIT" not in write(picture, tmp_path / "b.png").read_bytes()
