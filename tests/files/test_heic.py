"""HEIC as it is read: files whose samples are known, since they were made by hand."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.colour.encoding import DISPLAY_P3, SRGB
from hueferry.colour.make_profile import profile_of
from hueferry.errors import HueferryError, OutputError, PictureError, RefusedError
from hueferry.files import formats
from hueferry.files.avif import TURNS
from hueferry.files.read import read
from hueferry.files.thumbnail import upright
from hueferry.files.write import write
from hueferry.picture import Picture
from hueferry.series.plan import plan_errands
from photographs import photograph

from .hevc import heic

SMALL = photograph("china", step=16)


def exif(orientation: int) -> bytes:
    block = Image.Exif()
    block[0x0112] = orientation
    return block.tobytes().removeprefix(b"Exif\0\0")


def stored(path: Path, data: bytes) -> Path:
    path.write_bytes(data)
    return path


@pytest.mark.parametrize("bits", [8, 10, 12])
def test_samples_are_read_to_the_bit(bits: int, tmp_path: Path) -> None:
    codes = SMALL if bits == 8 else (SMALL.astype(np.uint16) << (bits - 8)) + 3

    picture = read(stored(tmp_path / "a.heic", heic(codes, bits)))

    np.testing.assert_array_equal(picture.pixels, codes)
    assert (picture.bits, picture.encoding, picture.notes) == (bits, SRGB, ())


def test_the_profile_is_its_colour(tmp_path: Path) -> None:
    profile = profile_of(DISPLAY_P3)

    assert read(stored(tmp_path / "a.heic", heic(SMALL, colour=b"prof" + profile))).encoding.profile == profile


@pytest.mark.parametrize("orientation", range(1, 9))
def test_a_turn_is_made_once(orientation: int, tmp_path: Path) -> None:
    turn, mirror = TURNS[orientation]
    ways = [(b"irot", turn), (b"imir", mirror)]
    more = tuple((kind, bytes([way]), True) for kind, way in ways if way is not None)

    picture = read(stored(tmp_path / "a.heic", heic(SMALL, more=more, exif=exif(orientation))))

    # Colours of a profile go through a matrix in the decoder, and those of numbers too.
    np.testing.assert_allclose(picture.pixels.astype(int), upright(SMALL, orientation).astype(int), atol=1)
    assert picture.metadata.orientation == 1
    assert picture.metadata.exif == exif(1)


def test_results_go_into_the_format_that_is_built_alike(tmp_path: Path) -> None:
    source = stored(tmp_path / "a.HEIC", heic(SMALL, exif=exif(1)))

    errand = plan_errands([source], tmp_path / "out", find=list)[0]
    errand.output.parent.mkdir()
    again = read(write(read(source), errand.output))

    assert errand.output.name == "a.avif"
    error = np.mean((again.pixels.astype(float) - SMALL) ** 2)
    assert 10 * np.log10(255**2 / error) > 45
    assert (again.metadata.exif, again.encoding) == (exif(1), SRGB)


def test_it_is_not_written_and_the_message_says_what_instead(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match=r"HEIC is not written \(.*write AVIF"):
        write(Picture(SMALL, SRGB), tmp_path / "a.heic")


def test_without_the_package_the_message_names_it(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(formats.importlib.util, "find_spec", lambda _: None)

    with pytest.raises(RefusedError, match=r"needs the optional package pi_heif; install hueferry\[heic\]"):
        read(stored(tmp_path / "a.heic", heic(SMALL)))


@pytest.mark.parametrize(
    ("data", "kind", "complaint"),
    [
        (heic(SMALL, colour=b"nclx\0\x09\0\x10\0\0\x80"), RefusedError, "coded in PQ"),
        (heic(SMALL, more=((b"auxC", bytes(4) + b"urn:of:somebody:aux:hdrgainmap\0", False),)), RefusedError, "lost"),
        (heic(SMALL)[:-40], PictureError, "ends early|decoded"),
        (heic(SMALL).replace(b"hvc1", b"hvcX"), PictureError, "decoded"),
    ],
)
def test_what_cannot_be_read_is_said_in_a_sentence(
    data: bytes, kind: type[PictureError], complaint: str, tmp_path: Path
) -> None:
    with pytest.raises(kind, match=complaint):
        read(stored(tmp_path / "a.heic", data))


def test_mutated_files_are_pictures_or_typed_errors(tmp_path: Path) -> None:
    seed = heic(SMALL, exif=exif(1))
    rng = np.random.default_rng(6)
    read_well = 0
    for number in range(200):
        data = bytearray(seed)
        for _ in range(int(rng.integers(1, 4))):
            data[int(rng.integers(24, 700 if number % 2 else len(data)))] = int(rng.integers(0, 256))
        cut = len(data) if rng.random() < 0.8 else int(rng.integers(20, len(data)))
        try:
            read_well += read(stored(tmp_path / "mutant.heic", bytes(data[:cut]))).pixels.size > 0
        except HueferryError:
            continue
    assert read_well > 20
