"""ICC profiles of maps, read by LittleCMS and by a reader of the test's own."""

from __future__ import annotations

import hashlib
import io
import struct

import numpy as np
import pytest
from PIL import Image, ImageCms

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.encoding import DISPLAY_P3, SRGB
from hueferry.colour.make_profile import profile_of
from hueferry.colour.spaces import xyz_to_lab
from hueferry.tables.build import input_curves, sample_table
from hueferry.tables.icc import abstract_error, abstract_profile, device_link, link_error
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table


def bent(codes: np.ndarray) -> np.ndarray:
    """A smooth map that treats each channel in its own way and mixes them: no axis can be mistaken for another."""
    red, green, blue = codes.T
    return np.stack([0.9 * red**1.2 + 0.05 * green, 0.8 * green + 0.1 * blue**2, 0.95 * blue**0.8 * (1 - 0.1 * red)], 1)


@pytest.fixture(params=[None, 33], ids=["even", "curves"])
def table(request: pytest.FixtureRequest) -> Table:
    return sample_table(bent, size=33, curves=None if request.param is None else input_curves(SRGB, 33))


def through(codes: np.ndarray, link: bytes) -> np.ndarray:
    """Send (n, 3) codes through a device link in LittleCMS: followed by sRGB's profile to XYZ, and back from there."""
    import imagecodecs

    xyz = imagecodecs.cms_transform(
        codes[np.newaxis], link, profile_of(SRGB), colorspace="rgb", outcolorspace="xyz", outdtype="float64", flags=0x40
    )
    return SRGB.from_xyz(xyz[0])


def colours() -> np.ndarray:
    rng = np.random.default_rng(5)
    gray = np.repeat(np.linspace(0, 1, 256)[:, np.newaxis], 3, axis=1)
    corners = np.array([[r, g, b] for r in (0, 1) for g in (0, 1) for b in (0, 1)], float)
    return np.rint(np.concatenate([rng.random((200_000, 3)), gray, corners]) * 65535) / 65535


def test_littlecms_runs_the_device_link_as_we_run_the_table(table: Table) -> None:
    codes = colours()

    given = through(codes, device_link(table, name="bent"))

    assert np.abs(given - np.clip(look_up(table, codes), 0, 1)).max() <= 1 / 1023


def test_a_link_that_changes_nothing_keeps_grays_to_the_last_of_sixteen_bits() -> None:
    idle = sample_table(lambda codes: codes, size=33)
    gray = np.repeat(np.arange(0, 65536, 97)[:, np.newaxis] / 65535, 3, axis=1)

    given = through(gray, device_link(idle, name="idle"))

    # One for the nodes, and one for the matrix of the profile that follows, which has 16 bits after the point.
    assert np.abs(given - gray).max() * 65535 <= 2


@pytest.mark.parametrize("encoding", [SRGB, DISPLAY_P3], ids=["sRGB", "Display P3"])
def test_littlecms_runs_the_abstract_profile_within_its_stated_error(encoding: object) -> None:
    """Chained between the encoding's own profile and itself, by 8-bit pictures."""
    table = sample_table(bent, size=33)
    rng = np.random.default_rng(1)
    codes = rng.integers(0, 256, (64, 64, 3), dtype=np.uint8)
    own = ImageCms.ImageCmsProfile(io.BytesIO(profile_of(encoding)))
    abstract = ImageCms.ImageCmsProfile(io.BytesIO(abstract_profile(table, encoding, name="bent")))
    lab = ImageCms.createProfile("LAB")
    picture = Image.fromarray(codes)

    first = ImageCms.applyTransform(picture, ImageCms.buildTransform(own, lab, "RGB", "LAB"))
    moved = ImageCms.applyTransform(first, ImageCms.buildTransform(abstract, lab, "LAB", "LAB"))

    given = np.asarray(moved).astype(np.float64).reshape(-1, 3)
    given = np.stack([given[:, 0] / 2.55, *(np.where(v > 127, v - 256, v) for v in given[:, 1:].T)], axis=1)
    wanted = xyz_to_lab(encoding.to_xyz(np.clip(look_up(table, codes.reshape(-1, 3) / 255), 0, 1)))
    difference = delta_e_2000(given, wanted)
    stated = abstract_error(table, encoding)
    assert difference.mean() < stated.mean + 1.0  # Lab of 8 bits: steps of 1 in a* and b*
    assert np.percentile(difference, 99) < stated.largest + 2.5


def test_the_stated_errors_are_small_and_tell_what_is_clipped(table: Table) -> None:
    beyond = sample_table(lambda codes: codes * 1.2, size=17)

    assert link_error(table, SRGB).largest < 0.02
    assert abstract_error(table, SRGB).mean < 0.1
    assert link_error(table, SRGB).clipped == 0.0
    # Of 33 even codes a channel, the 27 up to 26/32 stay within 1/1.2.
    assert link_error(beyond, SRGB).clipped == pytest.approx(1 - (27 / 33) ** 3)


@pytest.mark.parametrize("kind", ["link", "abst"])
def test_the_profile_is_put_together_as_the_standard_says(kind: str, table: Table) -> None:
    """ICC.1:2022, 7.2 (header, ID), 7.3 (tag table), 10.12 (lutAToBType)."""
    make = {"link": lambda: device_link(table, name="x"), "abst": lambda: abstract_profile(table, SRGB, name="x")}
    data = make[kind]()

    size, version, found = struct.unpack_from(">I4xI4s", data)
    assert size == len(data)
    assert version == 0x04400000
    assert found == kind.encode()
    assert data[36:40] == b"acsp"
    blank = bytearray(data)
    blank[44:48] = blank[64:68] = bytes(4)
    blank[84:100] = bytes(16)
    assert data[84:100] == hashlib.md5(bytes(blank), usedforsecurity=False).digest()
    tags = {}
    for index in range(struct.unpack_from(">I", data, 128)[0]):
        name, start, length = struct.unpack_from(">4sII", data, 132 + 12 * index)
        assert start % 4 == 0
        assert start + length <= len(data)
        tags[name] = data[start : start + length]
    assert set(tags) >= {b"desc", b"cprt", b"A2B0"} | ({b"pseq"} if kind == "link" else set())
    lut = tags[b"A2B0"]
    b_part, matrix, m_part, clut, a_part = struct.unpack_from(">5I", lut, 12)
    assert lut[:4] == b"mAB "
    assert tuple(lut[8:10]) == (3, 3)
    assert (matrix, m_part) == (0, 0)
    assert b_part % 4 == clut % 4 == a_part % 4 == 0
    nodes = lut[clut]
    assert lut[clut + 16] == 2
    assert a_part - clut - 20 >= nodes**3 * 6


def test_general_purpose_software_opens_the_device_link() -> None:
    profile = ImageCms.ImageCmsProfile(io.BytesIO(device_link(sample_table(bent, size=9), name="bent by hand")))

    assert profile.profile.device_class == "link"
    assert ImageCms.getProfileDescription(profile).strip() == "bent by hand"
