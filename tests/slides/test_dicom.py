"""DICOM whole-slide images made by pydicom, read by ours."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pydicom
import pytest
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.encaps import encapsulate
from pydicom.uid import ExplicitVRLittleEndian, JPEGBaseline8Bit, generate_uid

from hueferry.colour.encoding import SRGB
from hueferry.colour.make_profile import profile_of
from hueferry.errors import PictureError, RefusedError
from hueferry.picture import Window
from hueferry.slides.codecs import CODECS, Packing
from hueferry.slides.gather import reference_from
from hueferry.slides.levels import tile_at
from hueferry.slides.readers import open_slide
from hueferry.slides.run import stain_slide
from hueferry.slides.settings import StainSettings
from slides.sections import rendered

SIDE = 128


def save(path: Path, pixels: np.ndarray, *, packed: bool = False, order: list[int] | None = None, **changes) -> Path:
    """Write the picture TILED_FULL, or TILED_SPARSE with frames in another order."""
    data = Dataset()
    data.SOPClassUID = "1.2.840.10008.5.1.4.1.1.77.1.6"
    data.SOPInstanceUID, data.Modality = generate_uid(), "SM"
    data.ImageType = ["ORIGINAL", "PRIMARY", "VOLUME", "NONE"]
    data.PatientName, data.PatientID = "PLANTED^NAME", "PLANTED-ID"
    data.Rows = data.Columns = SIDE
    data.TotalPixelMatrixRows, data.TotalPixelMatrixColumns = pixels.shape[:2]
    data.SamplesPerPixel, data.PlanarConfiguration = 3, 0
    data.PhotometricInterpretation = "YBR_FULL_422" if packed else "RGB"
    data.BitsAllocated = data.BitsStored = 8
    data.HighBit, data.PixelRepresentation = 7, 0
    measures, shared, light = Dataset(), Dataset(), Dataset()
    measures.PixelSpacing = [0.0005, 0.00025]
    shared.PixelMeasuresSequence = [measures]
    light.ICCProfile = profile_of(SRGB)
    data.SharedFunctionalGroupsSequence, data.OpticalPathSequence = [shared], [light]
    tiles = [
        tile_at(pixels[top : top + SIDE], left, SIDE)
        for top in range(0, pixels.shape[0], SIDE)
        for left in range(0, pixels.shape[1], SIDE)
    ]
    across = -(-pixels.shape[1] // SIDE)
    data.NumberOfFrames = len(tiles)
    data.DimensionOrganizationType = "TILED_FULL" if order is None else "TILED_SPARSE"
    if order is not None:
        data.PerFrameFunctionalGroupsSequence = [_group(number, across) for number in order]
        tiles = [tiles[number] for number in order]
    if packed:
        data.PixelData = encapsulate([CODECS[Packing.JPEG].encode(tile, 95) for tile in tiles])
        data["PixelData"].VR = "OB"
    else:
        data.PixelData = b"".join(tile.tobytes() for tile in tiles)
        data["PixelData"].VR = "OB"
    for name, value in changes.items():
        setattr(data, name, value)
    data.file_meta = FileMetaDataset()
    data.file_meta.TransferSyntaxUID = JPEGBaseline8Bit if packed else ExplicitVRLittleEndian
    data.file_meta.MediaStorageSOPClassUID = data.SOPClassUID
    data.file_meta.MediaStorageSOPInstanceUID = data.SOPInstanceUID
    pydicom.dcmwrite(path, data, enforce_file_format=True)
    return path


def _group(number: int, across: int) -> Dataset:
    place, group = Dataset(), Dataset()
    place.RowPositionInTotalImagePixelMatrix = number // across * SIDE + 1
    place.ColumnPositionInTotalImagePixelMatrix = number % across * SIDE + 1
    group.PlanePositionSlideSequence = [place]
    return group


PIXELS = rendered(2, height=300, width=410)


@pytest.mark.parametrize("order", [None, [11, 3, 0, 7, 5, 9, 1, 2, 10, 4, 8, 6]], ids=["full", "sparse"])
def test_frames_are_put_where_they_belong(tmp_path: Path, order: list[int] | None) -> None:
    slide = open_slide(save(tmp_path / "a.dcm", PIXELS, order=order))

    assert slide.shape == (300, 410)
    assert np.array_equal(slide.read(Window(0, 0, 300, 410)), PIXELS)
    assert np.array_equal(slide.read(Window(100, 50, 77, 201)), PIXELS[100:177, 50:251])
    slide.close()


def test_jpeg_frames_are_read(tmp_path: Path) -> None:
    slide = open_slide(save(tmp_path / "a.dcm", PIXELS, packed=True))

    assert np.abs(slide.read(Window(0, 0, 300, 410)).astype(int) - PIXELS).mean() < 2


def test_spacing_is_millimetres_between_rows_then_columns(tmp_path: Path) -> None:
    """PS3.3, 10.7.1.3: pixel spacing is row spacing, then column spacing, in mm."""
    slide = open_slide(save(tmp_path / "a.dcm", PIXELS))

    assert slide.facts.pitch == pytest.approx((0.25, 0.5))
    assert slide.encoding.profile == profile_of(SRGB)


def test_a_folder_of_instances_is_one_pyramid_without_its_label(tmp_path: Path) -> None:
    save(tmp_path / "small.dcm", np.ascontiguousarray(PIXELS[::2, ::2]))
    save(tmp_path / "large.dcm", PIXELS)
    save(tmp_path / "label.dcm", PIXELS[:50], ImageType=["ORIGINAL", "PRIMARY", "LABEL", "NONE"])

    assert open_slide(tmp_path).levels == [(300, 410), (150, 205)]


def test_a_corrected_slide_does_not_name_the_patient(tmp_path: Path) -> None:
    source = save(tmp_path / "a.dcm", PIXELS)
    out = tmp_path / "out"
    out.mkdir()

    done = stain_slide(source, reference_from([source]), out, settings=StainSettings(packing=Packing.DEFLATE))

    assert b"PLANTED" not in done.output.read_bytes()


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        ({"PhotometricInterpretation": "MONOCHROME2"}, "bright-field slide has red"),
        ({"NumberOfOpticalPaths": 2}, "optical paths"),
        ({"BitsAllocated": 16}, "not supported"),
    ],
)
def test_other_than_bright_field_is_refused(tmp_path: Path, change: dict, reason: str) -> None:
    path = save(tmp_path / "a.dcm", PIXELS, **change)

    with pytest.raises(RefusedError, match=reason):
        open_slide(path)


def test_dicom_of_something_else_is_named(tmp_path: Path) -> None:
    path = save(tmp_path / "a.dcm", PIXELS, ImageType=["ORIGINAL", "PRIMARY", "LABEL", "NONE"])

    with pytest.raises(PictureError, match="no whole-slide picture"):
        open_slide(path)
