"""Profiles: our arithmetic against LittleCMS, and every way a profile can be broken."""

from __future__ import annotations

import io

import imagecodecs
import numpy as np
import pytest
from PIL import ImageCms

from hueferry.colour.curves import Parametric, Sampled
from hueferry.colour.encoding import BT2020, DISPLAY_P3, ROMM, SRGB, MatrixEncoding
from hueferry.colour.make_profile import assemble, matrix_profile, profile_of
from hueferry.colour.profile import read_profile
from hueferry.colour.spaces import oklab_to_lab, xyz_to_oklab
from hueferry.errors import InputError

CODES = np.random.default_rng(5).uniform(0, 1, (400, 3))


def by_littlecms(profile: bytes, codes: np.ndarray) -> np.ndarray:
    """Media-relative XYZ (D50) as LittleCMS computes it in floating point."""
    target = imagecodecs.cms_profile("xyz")
    return imagecodecs.cms_transform(
        codes[None], profile, target, colorspace="rgb", outcolorspace="xyz", outdtype="f8", intent=1
    )[0]


@pytest.mark.parametrize("encoding", [SRGB, DISPLAY_P3, BT2020, ROMM], ids=lambda e: e.name)
def test_a_profile_of_ours_means_the_same_to_littlecms(encoding: MatrixEncoding) -> None:
    """Within the rounding of s15Fixed16, 1.5e-5."""
    profile = matrix_profile(encoding)

    np.testing.assert_allclose(by_littlecms(profile, CODES), encoding.to_xyz(CODES), atol=3e-5)
    np.testing.assert_allclose(read_profile(profile).to_xyz(CODES), encoding.to_xyz(CODES), atol=3e-5)


def test_a_profile_of_ours_opens_in_pillow() -> None:
    opened = ImageCms.ImageCmsProfile(io.BytesIO(matrix_profile(SRGB)))

    assert ImageCms.getProfileDescription(opened).strip() == "sRGB"


def test_the_profile_travels_byte_for_byte() -> None:
    profile = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()

    assert profile_of(read_profile(profile)) == profile


def test_littlecms_own_srgb_is_srgb() -> None:
    profile = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()

    np.testing.assert_allclose(read_profile(profile).to_xyz(CODES), SRGB.to_xyz(CODES), atol=2e-5)


@pytest.mark.parametrize("encoding", [SRGB, DISPLAY_P3, BT2020, ROMM], ids=lambda e: e.name)
def test_codes_come_back_also_beyond_the_range(encoding: MatrixEncoding) -> None:
    codes = np.random.default_rng(6).uniform(-0.2, 1.4, (500, 3))

    np.testing.assert_allclose(encoding.from_xyz(encoding.to_xyz(codes)), codes, atol=1e-7)


def test_a_profile_that_swaps_channels_is_honoured() -> None:
    swapped = MatrixEncoding("swapped", SRGB.curves, SRGB.matrix[:, [2, 1, 0]])

    read = read_profile(matrix_profile(swapped))

    np.testing.assert_allclose(read.to_xyz(CODES), SRGB.to_xyz(CODES[:, ::-1]), atol=3e-5)


def lut_profile() -> bytes:
    """A table-based RGB profile: LittleCMS turns Display P3 → sRGB into one through Pillow's proofing tables."""
    size = 9
    grid = np.stack(np.meshgrid(*[np.linspace(0, 1, size)] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
    lab = oklab_to_lab(xyz_to_oklab(DISPLAY_P3.to_xyz(grid)))
    # lut16Type has the legacy encoding of Lab, also in version 4 (ICC.1:2022, clause 10.10).
    coded = np.clip(
        np.rint(np.stack([lab[:, 0] * 652.8, (lab[:, 1] + 128) * 256, (lab[:, 2] + 128) * 256], 1)), 0, 65535
    )
    identity = np.rint(np.eye(3).ravel() * 65536).astype(">i4").tobytes()
    ramp = np.array([0, 65535], ">u2").tobytes() * 3
    head = b"mft2\0\0\0\0" + bytes([3, 3, size, 0]) + identity + np.array([2, 2], ">u2").tobytes()
    table = head + ramp + coded.astype(">u2").tobytes() + ramp
    text = (
        b"mluc\0\0\0\0"
        + np.array([1, 12], ">u4").tobytes()
        + b"enUS"
        + np.array([6, 28], ">u4").tobytes()
        + "LUT".encode("utf-16-be")
    )
    white = b"XYZ \0\0\0\0" + np.rint(np.array([0.9642, 1.0, 0.8249]) * 65536).astype(">i4").tobytes()
    return assemble(
        {b"desc": text, b"cprt": text, b"wtpt": white, b"A2B0": table}, kind=b"scnr", space=b"RGB ", connection=b"Lab "
    )


def test_a_table_based_profile_is_read_as_its_table_says() -> None:
    """At the nodes of its grid the table is exact but for 16-bit rounding."""
    encoding = read_profile(lut_profile())
    nodes = np.random.default_rng(7).integers(0, 9, (60, 3)) / 8

    difference = oklab_to_lab(xyz_to_oklab(encoding.to_xyz(nodes))) - oklab_to_lab(
        xyz_to_oklab(DISPLAY_P3.to_xyz(nodes))
    )

    assert encoding.name == "LUT"
    assert np.abs(difference).max() < 0.05


def test_a_table_based_profile_is_inverted_where_it_can_be() -> None:
    encoding = read_profile(lut_profile())
    codes = np.random.default_rng(8).uniform(0.05, 0.95, (200, 3))

    back = encoding.from_xyz(encoding.to_xyz(codes))

    assert np.quantile(np.abs(back - codes), 0.99) < 1e-3


def test_gray_profiles_mean_gray() -> None:
    text = b"mluc\0\0\0\0" + np.array([1, 12], ">u4").tobytes() + b"enUS" + np.array([2, 28], ">u4").tobytes() + b"\0g"
    curve = b"curv\0\0\0\0" + np.array([1], ">u4").tobytes() + np.array([round(2.2 * 256)], ">u2").tobytes()
    data = assemble({b"desc": text, b"cprt": text, b"kTRC": curve}, kind=b"mntr", space=b"GRAY", connection=b"XYZ ")

    xyz = read_profile(data).to_xyz(np.full((1, 3), 0.5))[0]

    np.testing.assert_allclose(xyz, 0.5 ** (round(2.2 * 256) / 256) * np.array([0.9642, 1, 0.8249]), atol=1e-9)


def test_cmyk_profiles_are_refused_by_name() -> None:
    data = bytearray(matrix_profile(SRGB))
    data[16:20] = b"CMYK"

    with pytest.raises(InputError, match="for CMYK pictures"):
        read_profile(bytes(data))


@pytest.mark.parametrize(
    ("damage", "complaint"),
    [
        (lambda d: d[:100], "no valid header"),
        (lambda d: d[:36] + b"nope" + d[40:], "no valid header"),
        (lambda d: d[:128] + b"\xff\xff\xff\xff" + d[132:], "do not fit"),
        (lambda d: d[:136] + b"\xff\xff\xff\x00" + d[140:], "lies outside"),
        (lambda d: d.replace(b"gXYZ", b"none", 1), "lacks gXYZ"),
    ],
)
def test_a_broken_profile_is_the_callers_fault(damage: object, complaint: str) -> None:
    with pytest.raises(InputError, match=complaint):
        read_profile(damage(matrix_profile(SRGB)))


def test_mutated_profiles_give_an_encoding_or_a_clear_error() -> None:
    rng = np.random.default_rng(9)
    whole = [matrix_profile(SRGB), lut_profile()]
    for number in range(400):
        data = bytearray(whole[number % 2])
        for _ in range(int(rng.integers(1, 8))):
            data[int(rng.integers(0, min(len(data), 600)))] = int(rng.integers(0, 256))
        try:
            xyz = read_profile(bytes(data[: int(rng.integers(60, len(data) + 1))])).to_xyz(CODES[:4])
        except InputError:
            continue
        assert xyz.shape == (4, 3)


def test_sampled_and_parametric_curves_agree() -> None:
    smooth = Parametric(2.2)
    sampled = Sampled(np.linspace(0, 1, 4096) ** 2.2)
    codes = np.linspace(0, 1, 777)

    np.testing.assert_allclose(sampled.decode(codes), smooth.decode(codes), atol=1e-7)
    np.testing.assert_allclose(sampled.encode(smooth.decode(codes)), codes, atol=1e-3)


def test_a_curve_that_falls_is_refused() -> None:
    with pytest.raises(InputError, match="must rise"):
        Sampled(np.array([1.0, 0.5, 0.2]))
    with pytest.raises(InputError, match="must rise"):
        Parametric(-1.0)


@pytest.mark.parametrize(("transfer", "refused"), [(13, False), (16, True), (18, True)])
def test_profiles_of_light_that_is_not_relative_are_refused(transfer: int, refused: bool) -> None:
    """ICC.1:2022, clause 9.2.17: a profile may state ITU-T H.273 numbers beside its curves."""
    plain = matrix_profile(SRGB)
    tags = {}
    for index in range(int.from_bytes(plain[128:132], "big")):
        name, start, size = (plain[132 + 12 * index + 4 * part :][:4] for part in range(3))
        tags[name] = plain[int.from_bytes(start, "big") :][: int.from_bytes(size, "big")]
    tags[b"cicp"] = b"cicp\0\0\0\0" + bytes([9, transfer, 0, 1])
    profile = assemble(tags, kind=b"mntr", space=b"RGB ", connection=b"XYZ ")

    if refused:
        with pytest.raises(InputError, match="PQ or HLG"):
            read_profile(profile)
    else:
        assert read_profile(profile).profile == profile
