"""OpenEXR and Radiance in and out, with their own library and others as oracles."""

from __future__ import annotations

import io
import struct
from pathlib import Path

import attrs
import cv2
import imagecodecs
import numpy as np
import OpenEXR
import pytest
import tifffile

from hueferry.applying.engine import apply_table
from hueferry.colour.encoding import SRGB
from hueferry.colour.scene import REC_709, SceneLinear, scene_linear, to_codes, to_light
from hueferry.errors import HueferryError, OutputError, PictureError, RefusedError
from hueferry.files.exr import read_head, spliced
from hueferry.files.hdr import to_shared_exponents
from hueferry.files.light import light_of
from hueferry.files.read import read
from hueferry.files.write import write
from hueferry.fitting.fit import fit_picture
from hueferry.fitting.reference import Reference
from hueferry.fitting.settings import Settings
from hueferry.picture import Picture
from hueferry.tables.build import build_table
from photographs import photograph

P3 = (0.680, 0.320, 0.265, 0.690, 0.150, 0.060, 0.3127, 0.3290)


def scene(step: int = 8) -> np.ndarray:
    """A photograph as light, its highlights carried on to about forty times diffuse white."""
    light = (photograph("china", step=step).astype(np.float64) / 255) ** 2.2
    return (light * (1 + 40 * np.maximum(light.min(axis=2, keepdims=True) - 0.6, 0))).astype(np.float32)


def exr(path: Path, light: np.ndarray, names: str = "RGB", **header: object) -> Path:
    channels = {name: np.ascontiguousarray(light[:, :, place]) for place, name in enumerate(names)}
    facts = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage, **header}
    with OpenEXR.File(facts, channels) as file:
        file.write(str(path))
    return path


def planes(path: Path) -> tuple[dict[str, object], dict[str, np.ndarray]]:
    with OpenEXR.File(str(path), separate_channels=True) as file:
        return {**file.header()}, {name: channel.pixels.copy() for name, channel in file.channels().items()}


def identity(picture: Picture) -> Picture:
    return apply_table(build_table(lambda colours: colours, picture.encoding), picture)


def wild(shape: tuple[int, ...], dtype: type) -> np.ndarray:
    """Light over thirty stops with negatives, and what is no number."""
    rng = np.random.default_rng(3)
    values = np.exp2(rng.uniform(-20, 12, shape)) * rng.choice([1, 1, 1, -1], shape)
    values[0, 0] = 0.0
    values[0, 1, 0], values[0, 2, 0] = np.nan, np.inf
    return values.astype(dtype)


@pytest.mark.parametrize("names", ["RGB", "RGBA", "Y", "YA"])
@pytest.mark.parametrize("dtype", [np.float16, np.float32])
def test_openexr_comes_back_to_the_bit_through_an_identity_table(names: str, dtype: type, tmp_path: Path) -> None:
    light = wild((17, 23, len(names)), dtype)
    if names[-1] == "A":
        light[:, :, -1] = np.linspace(0, 1, 17)[:, None].astype(dtype)
    first = read(exr(tmp_path / "a.exr", light, names))

    header, channels = planes(write(identity(first), tmp_path / "b.exr"))

    assert str(header["compression"]) == "Compression.ZIP_COMPRESSION"
    for place, name in enumerate(names):
        assert channels[name].dtype == dtype
        np.testing.assert_array_equal(channels[name], light[:, :, place])


def test_attributes_and_windows_come_back_as_they_were(tmp_path: Path) -> None:
    window = (np.array([3, -4], np.int32), np.array([15, 12], np.int32))
    screen = (np.array([0, 0], np.int32), np.array([31, 31], np.int32))
    facts = {"owner": "nobody", "whiteLuminance": 120.0, "chromaticities": P3, "timeCode": OpenEXR.TimeCode()}
    path = exr(tmp_path / "a.exr", scene()[:17, :13], dataWindow=window, displayWindow=screen, **facts)
    first = read(path)

    written = write(identity(first), tmp_path / "b.exr")

    before, after = (read_head(one.read_bytes()).attributes for one in (path, written))
    assert before == after
    assert isinstance(first.encoding, SceneLinear)
    np.testing.assert_allclose(first.encoding.chromaticities, P3, rtol=1e-6)
    np.testing.assert_array_equal(planes(written)[1]["G"], planes(path)[1]["G"])


@pytest.mark.parametrize("packing", ["NO", "RLE", "ZIPS", "ZIP", "PIZ"])
@pytest.mark.parametrize("kind", ["scanlineimage", "tiledimage"])
def test_strips_and_tiles_of_every_lossless_packing_are_read(packing: str, kind: str, tmp_path: Path) -> None:
    facts = {"tiles": OpenEXR.TileDescription()} if kind == "tiledimage" else {}
    path = exr(tmp_path / "a.exr", scene(4), compression=getattr(OpenEXR, f"{packing}_COMPRESSION"),
               type=getattr(OpenEXR, kind), **facts)  # fmt: skip

    header, channels = planes(write(read(path), tmp_path / "b.exr"))

    assert str(header["compression"]) == f"Compression.{packing}_COMPRESSION"
    np.testing.assert_array_equal(np.dstack([channels[name] for name in "RGB"]), scene(4))


def test_lossy_packings_become_lossless_ones(tmp_path: Path) -> None:
    first = read(exr(tmp_path / "a.exr", scene().astype(np.float16), compression=OpenEXR.DWAA_COMPRESSION))

    header, channels = planes(write(first, tmp_path / "b.exr"))

    assert str(header["compression"]) == "Compression.ZIP_COMPRESSION"
    np.testing.assert_array_equal(channels["R"], light_of(first, associated=True)[:, :, 0])


def test_half_transparent_colours_are_judged_without_their_alpha(tmp_path: Path) -> None:
    """OpenEXR holds colours multiplied by alpha: 0.25 under an alpha of one half is a light of one half."""
    light = np.full((4, 4, 4), 0.25, np.float32)
    light[:, :, 3] = 0.5
    picture = read(exr(tmp_path / "a.exr", light, "RGBA"))

    doubled = attrs.evolve(picture, pixels=np.dstack([to_codes(np.full((4, 4, 3), 1.0)), light[:, :, 3]]).astype("f4"))

    np.testing.assert_allclose(picture.pixels[:, :, :3], to_codes(np.array(0.5)), rtol=1e-6)
    np.testing.assert_allclose(planes(write(doubled, tmp_path / "b.exr"))[1]["R"], 0.5, rtol=1e-6)


def test_what_is_too_bright_for_half_is_its_brightest(tmp_path: Path) -> None:
    picture = read(exr(tmp_path / "a.exr", scene().astype(np.float16)))
    bright = attrs.evolve(picture, pixels=np.full(picture.pixels.shape, to_codes(np.array(1e6)), np.float32))

    assert planes(write(bright, tmp_path / "b.exr"))[1]["R"].max() == 65504


def test_radiance_comes_back_to_the_bit_through_an_identity_table(tmp_path: Path) -> None:
    stored = imagecodecs.rgbe_encode(np.abs(np.nan_to_num(wild((40, 50, 3), np.float32), posinf=9.0)))
    head = b"#?RADIANCE\n# made by hand\nEXPOSURE=2.5\nFORMAT=32-bit_rle_rgbe\n\n-Y 40 +X 50\n"
    data = head + stored[stored.index(b"+X 50\n") + 6 :]
    (tmp_path / "a.hdr").write_bytes(data)

    written = write(identity(read(tmp_path / "a.hdr")), tmp_path / "b.hdr")

    again = written.read_bytes()
    assert again.startswith(head)
    np.testing.assert_array_equal(imagecodecs.rgbe_decode(again), imagecodecs.rgbe_decode(data))


def test_radiance_is_what_another_library_reads(tmp_path: Path) -> None:
    light = scene()
    picture = Picture(to_codes(light).astype(np.float32), scene_linear(P3), bits=32)

    path = write(picture, tmp_path / "a.hdr")

    seen = cv2.imread(str(path), cv2.IMREAD_UNCHANGED)[:, :, ::-1]
    # Eight bits of mantissa under the largest channel: half a step is 1/256 of it at most.
    assert (np.abs(seen - light) <= light.max(axis=2, keepdims=True) / 255).all()
    assert b"PRIMARIES=0.6800 0.3200 0.2650 0.6900 0.1500 0.0600 0.3127 0.3290\n" in path.read_bytes()[:200]
    np.testing.assert_allclose(read(path).encoding.chromaticities, P3)


def test_shared_exponents_are_rounded_and_never_cut() -> None:
    light = np.array([[[0.999, 0.5, 0.0], [255.9, 1.2, 0.3], [1e-45, 0, 0], [-1, np.nan, np.inf]]], np.float32)

    rounded = to_shared_exponents(light)

    np.testing.assert_array_equal(rounded[0, 0], [1.0, 0.5, 0.0])
    np.testing.assert_array_equal(rounded[0, 1], [256.0, 2.0, 0.0])
    np.testing.assert_array_equal(rounded[0, 2], [0, 0, 0])
    assert (rounded[0, 3, :2] == 0).all()
    np.testing.assert_array_equal(imagecodecs.rgbe_decode(imagecodecs.rgbe_encode(rounded)), rounded)


@pytest.mark.parametrize(("aim", "name"), [("agree", "b.exr"), ("agree", "b.hdr"), ("adopt", "b.exr")])
def test_an_exposure_and_a_cast_are_taken_back_and_highlights_with_them(aim: str, name: str, tmp_path: Path) -> None:
    wanted = scene(4 if aim == "agree" else 12)
    gains = np.array([0.62, 0.70, 0.55], np.float32)
    target, source = (
        read(write(Picture(to_codes(light).astype(np.float32), scene_linear(REC_709), bits=32), tmp_path / f"{n}.exr"))
        for n, light in (("wanted", wanted), ("given", wanted * gains))
    )

    fit = fit_picture(source, [Reference.of_picture(target, "wanted")], Settings(aim=aim, table_size=33))
    path = write(fit.apply(source), tmp_path / name)

    got = light_of(read(path), associated=True)
    bright = wanted.min(axis=2) > 2.0
    assert bright.mean() > 0.02
    assert got.max() > 0.9 * wanted.max() > 10
    ratio = got[bright] / wanted[bright]
    assert np.abs(np.log2(ratio)).mean() < 0.1  # stops; it was 0.68 of them away on average
    middle = (wanted.min(axis=2) > 0.05) & (wanted.max(axis=2) < 1.0)
    assert np.abs(np.log2(got[middle] / wanted[middle])).mean() < 0.1


def test_light_leaves_as_light_with_a_profile(tmp_path: Path) -> None:
    picture = read(exr(tmp_path / "a.exr", scene(), chromaticities=P3))

    again = read(write(picture, tmp_path / "b.tif"))

    np.testing.assert_array_equal(again.pixels, scene())
    five = np.full((1, 3), 5.0)
    np.testing.assert_allclose(again.encoding.to_xyz(five), picture.encoding.light.to_xyz(five), atol=2e-4)


@pytest.mark.parametrize("name", ["a.exr", "a.hdr"])
def test_what_is_coded_for_displays_is_not_written_as_light(name: str, tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="holds scene-linear light and the picture is coded in sRGB; write JPEG"):
        write(Picture(photograph("china", step=16), SRGB), tmp_path / name)


def two_parts(path: Path) -> None:
    facts = {"type": OpenEXR.scanlineimage}
    parts = [OpenEXR.Part({**facts, "name": name}, {"RGB": scene(32)}) for name in ("left", "right")]
    with OpenEXR.File(parts) as file:
        file.write(str(path))


def bomb(path: Path) -> None:
    data = bytearray(exr(path, scene(32)).read_bytes())
    place = data.index(b"dataWindow\0box2i\0") + 17 + 4
    data[place + 8 : place + 16] = struct.pack("<ii", 59_999, 59_999)
    path.write_bytes(bytes(data))


def wrong_primaries(path: Path) -> None:
    data = exr(path, scene(32)).read_bytes()
    path.write_bytes(spliced(data, {b"chromaticities": (b"chromaticities", bytes(32))}))


@pytest.mark.parametrize(
    ("make", "kind", "complaint"),
    [
        (two_parts, RefusedError, "all parts of this OpenEXR but the first"),
        (lambda p: exr(p, scene(32)[:, :, :1].repeat(4, 2), "RGBZ"), RefusedError, "channels Z would be lost"),
        (lambda p: exr(p, scene(32)[:, :, :1], "Z"), RefusedError, "channels Z are not R, G, B or Y"),
        (lambda p: exr(p, scene(32).astype(np.uint32)), RefusedError, "whole numbers"),
        (bomb, RefusedError, "header promises"),
        (wrong_primaries, PictureError, "span no gamut"),
        (lambda p: p.write_bytes(exr(p, scene(32)).read_bytes()[:-40]), PictureError, "decoded"),
        (lambda p: p.write_bytes(exr(p, scene(32)).read_bytes()[:60]), PictureError, "ends early|longer"),
        (lambda p: p.write_bytes(b"#?RADIANCE\n\n+Y 4 +X 4\n" + bytes(64)), RefusedError, "not stored from the top"),
        (lambda p: p.write_bytes(b"#?RADIANCE\nFORMAT=32-bit_rle_xyze\n\n-Y 1 +X 1\n1234"), RefusedError, "holds XYZ"),
        (lambda p: p.write_bytes(b"#?RADIANCE\n\n-Y 60000 +X 60000\n"), RefusedError, "header promises"),
        (lambda p: p.write_bytes(b"#?RADIANCE\n\n-Y 40 +X 50\n123"), PictureError, "broken"),
        (lambda p: p.write_bytes(b"#?RADIANCE\nPRIMARIES=a b\n\n-Y 1 +X 1\n1234"), PictureError, "broken"),
        (lambda p: p.write_bytes(b"#?RADIANCE\n"), PictureError, "states no size"),
    ],
)
def test_what_cannot_be_read_is_said_in_a_sentence(make: object, kind: type, complaint: str, tmp_path: Path) -> None:
    make(tmp_path / "x.exr")

    with pytest.raises(kind, match=complaint):
        read(tmp_path / "x.exr")


def test_the_first_part_and_its_colours_are_read_if_the_loss_is_accepted(tmp_path: Path) -> None:
    two_parts(tmp_path / "a.exr")
    exr(tmp_path / "b.exr", scene(32)[:, :, [0, 1, 2, 0]], "RGBZ")

    for name in ("a.exr", "b.exr"):
        picture = read(tmp_path / name, accept_loss=True)
        np.testing.assert_array_equal(light_of(picture, associated=True), scene(32))


def test_broken_chunks_are_said_once_and_not_on_standard_output(
    tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    data = bytearray(exr(tmp_path / "a.exr", scene(4)).read_bytes())
    data[len(data) // 2 : len(data) // 2 + 50] = bytes(50)
    (tmp_path / "a.exr").write_bytes(bytes(data))

    with pytest.raises(PictureError, match="cannot be decoded"):
        read(tmp_path / "a.exr")

    assert capfd.readouterr().out == ""


@pytest.mark.parametrize("name", ["a.exr", "a.hdr"])
def test_mutated_files_are_pictures_or_typed_errors(name: str, tmp_path: Path) -> None:
    picture = Picture(to_codes(scene(32)).astype(np.float32), scene_linear(REC_709), bits=32)
    seed = write(picture, tmp_path / name).read_bytes()
    rng = np.random.default_rng(4)
    read_well = 0
    for _ in range(150):
        data = bytearray(seed)
        for _ in range(int(rng.integers(1, 4))):
            data[int(rng.integers(12, len(data)))] = int(rng.integers(0, 256))
        (tmp_path / "mutant").write_bytes(
            bytes(data[: len(data) if rng.random() < 0.7 else int(rng.integers(20, len(data)))])
        )
        try:
            read_well += read(tmp_path / "mutant").pixels.size > 0
        except HueferryError:
            continue
    assert read_well > 0


def test_floats_are_no_wider_than_their_file_says(tmp_path: Path) -> None:
    """TIFF of straight light, as it was read from OpenEXR, by tifffile."""
    write(read(exr(tmp_path / "a.exr", scene(16))), tmp_path / "b.tif")
    np.testing.assert_array_equal(tifffile.imread(io.BytesIO((tmp_path / "b.tif").read_bytes())), scene(16))
    assert to_light(np.array(2.0)) > 1e6
