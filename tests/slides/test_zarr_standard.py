"""OME-Zarr as others read it: the specification's schema, pixels, scales."""

from __future__ import annotations

import importlib
from pathlib import Path

import pytest
import zarr

from hueferry.colour.encoding import SRGB
from hueferry.slides.tiff_writer import SlideForm
from hueferry.slides.zarr_writer import write_zarr_slide
from slides.sections import PITCH, bands_of, rendered

pytest.importorskip("ome_zarr_models", reason="the validator of OME-Zarr is not installed")


@pytest.mark.parametrize("version", ["0.4", "0.5"])
@pytest.mark.parametrize("pitch", [PITCH, None], ids=str)
def test_a_validator_of_the_specification_accepts_what_is_written(
    version: str, pitch: tuple[float, float] | None, tmp_path: Path
) -> None:
    pixels = rendered(4, height=513, width=300)
    form = SlideForm(pixels.shape[:2], pixels.dtype, SRGB, pitch)
    path = write_zarr_slide(tmp_path / "a.ome.zarr", bands_of(pixels), form, version=version)

    group = zarr.open_group(str(path), mode="r")
    image = importlib.import_module("ome_zarr_models." + {"0.4": "v04", "0.5": "v05"}[version]).Image
    seen = image.from_zarr(group)

    scales = (seen.attributes if version == "0.4" else seen.attributes.ome).multiscales[0]
    assert [axis.name for axis in scales.axes] == ["c", "y", "x"]
    assert [axis.unit for axis in scales.axes[1:]] == (["micrometer"] * 2 if pitch else [None] * 2)
    steps = [data.coordinateTransformations[0].scale for data in scales.datasets]
    assert steps == [[1.0, (pitch or (1, 1))[1] * 2**level, (pitch or (1, 1))[0] * 2**level] for level in range(3)]
    assert [group[data.path].shape for data in scales.datasets] == [(3, 513, 300), (3, 257, 150), (3, 129, 75)]
