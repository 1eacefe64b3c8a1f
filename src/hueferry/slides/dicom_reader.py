"""DICOM whole-slide images, read frame by frame; pydicom is an optional library.

Sources: DICOM PS3.3, A.32.8 (VL whole slide microscopy image), C.7.6.17.3 (dimension organisation).
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

import attrs
import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.picture import Window
from hueferry.slides.file_slide import FileSlide, Opened
from hueferry.slides.profiles import encoding_of
from hueferry.slides.source import SlideFacts

_WHOLE_SLIDE = "1.2.840.10008.5.1.4.1.1.77.1.6"
_JPEG = ("1.2.840.10008.1.2.4.50", "1.2.840.10008.1.2.4.51")
_JPEG2000 = ("1.2.840.10008.1.2.4.90", "1.2.840.10008.1.2.4.91")
_NATIVE = ("1.2.840.10008.1.2", "1.2.840.10008.1.2.1")
_TEXTS = ("PatientName", "PatientID", "AccessionNumber", "StudyDate", "ContainerIdentifier", "DeviceSerialNumber")
_SPREADS: Mapping[str, bool] = MappingProxyType({"RGB": False, "YBR_FULL_422": True, "YBR_ICT": True, "YBR_RCT": True})


@attrs.frozen(eq=False)
class _Level:
    file: Path
    start: int
    data: Any
    height: int
    width: int
    rows: int
    columns: int
    places: Mapping[tuple[int, int], int]


class DicomSlide(FileSlide):
    """The full-size picture of a DICOM whole-slide series and its reductions. Labels and overviews are left out."""

    def __init__(self, path: Path) -> None:
        """Open one instance, or all instances in a folder.

        Raises:
            PictureError: this is no DICOM whole-slide image.
            RefusedError: several focal planes or optical paths, or pydicom is not installed.
        """
        try:
            import pydicom
        except ImportError as error:
            raise RefusedError(path, "DICOM needs pydicom: pip install 'hueferry[slides]'") from error
        files = sorted(path.glob("*.dcm")) if path.is_dir() else [path]
        found = []
        for file in files:
            try:
                with file.open("rb") as stream:
                    data = pydicom.dcmread(stream, stop_before_pixels=True)
                    start = stream.tell()
            except (pydicom.errors.InvalidDicomError, OSError, ValueError, KeyError, EOFError) as error:
                raise PictureError(file, f"this is not DICOM: {error}") from error
            if data.get("SOPClassUID") == _WHOLE_SLIDE and "VOLUME" in tuple(data.get("ImageType", ())):
                found.append((file, start, data))
        if not found:
            raise PictureError(path, "there is no whole-slide picture (SOP class VL whole slide microscopy, VOLUME)")
        self._path = path
        self._levels = sorted((_level(*one) for one in found), key=lambda level: -level.width)
        first = self._levels[0].data
        texts = {name: str(first.get(name)) for name in _TEXTS if first.get(name)}
        self._opened = Opened(
            [(level.height, level.width) for level in self._levels],
            encoding_of(path, _profile(first)),
            8,
            SlideFacts("dicom", _pitch(first), None, texts),
        )

    def read_level(self, level: int, window: Window) -> Pixels:
        """Return a window of a level; frames that were not scanned are white.

        Raises:
            PictureError: a frame is broken.
        """
        chosen = self._levels[level]
        result = np.full((window.height, window.width, 3), 255, np.uint8)
        for row in range(window.top // chosen.rows, (window.top + window.height - 1) // chosen.rows + 1):
            for column in range(window.left // chosen.columns, (window.left + window.width - 1) // chosen.columns + 1):
                frame = chosen.places.get((row, column))
                if frame is None:
                    continue
                tile = self._frame(chosen, frame)
                top, left = row * chosen.rows - window.top, column * chosen.columns - window.left
                rows = slice(max(top, 0), min(top + chosen.rows, window.height))
                columns = slice(max(left, 0), min(left + chosen.columns, window.width))
                result[rows, columns] = tile[
                    rows.start - top : rows.stop - top, columns.start - left : columns.stop - left
                ]
        return result

    def _frame(self, level: _Level, frame: int) -> Pixels:
        from pydicom.encaps import get_frame

        data, syntax = level.data, str(level.data.file_meta.TransferSyntaxUID)
        try:
            with level.file.open("rb") as stream:
                if syntax in _NATIVE:
                    size = level.rows * level.columns * 3
                    stream.seek(level.start + frame * size)
                    packed = stream.read(size)
                else:
                    stream.seek(level.start)
                    packed = get_frame(stream, frame, number_of_frames=int(data.get("NumberOfFrames", 1)))
            return _unpack(packed, syntax, level)
        except (ValueError, RuntimeError, IndexError, OSError) as error:
            raise PictureError(self._path, f"frame {frame + 1} is broken: {error}") from error

    def close(self) -> None:
        """Let go of the frames."""
        self._levels = []


def _unpack(packed: bytes, syntax: str, level: _Level) -> Pixels:
    import imagecodecs

    spread = _SPREADS[str(level.data.PhotometricInterpretation)]
    if syntax in _NATIVE:
        return np.frombuffer(packed, np.uint8).reshape(level.rows, level.columns, 3)
    if syntax in _JPEG:
        return np.asarray(
            imagecodecs.jpeg8_decode(packed, colorspace="YCbCr" if spread else "RGB", outcolorspace="RGB")
        )
    return np.asarray(imagecodecs.jpeg2k_decode(packed))


def _level(path: Path, start: int, data: Any) -> _Level:  # noqa: ANN401 - a pydicom data set has no type
    syntax = str(data.file_meta.TransferSyntaxUID)
    if syntax not in (*_JPEG, *_JPEG2000, *_NATIVE) or data.get("BitsAllocated") != 8:
        raise RefusedError(
            path, f"its frames are packed as {syntax} with {data.get('BitsAllocated')} bits; not supported"
        )
    if str(data.PhotometricInterpretation) not in _SPREADS or data.SamplesPerPixel != 3:
        raise RefusedError(
            path, f"it is {data.PhotometricInterpretation}; a bright-field slide has red, green and blue"
        )
    if int(data.get("TotalPixelMatrixFocalPlanes", 1)) > 1 or int(data.get("NumberOfOpticalPaths", 1)) > 1:
        raise RefusedError(path, "it holds several focal planes or optical paths, not one bright-field picture")
    rows, columns = int(data.Rows), int(data.Columns)
    height, width = int(data.TotalPixelMatrixRows), int(data.TotalPixelMatrixColumns)
    # The header of the pixel data: tag, VR, two reserved bytes and a length; without VR where it is implicit.
    start += 8 if syntax == _NATIVE[0] else 12
    return _Level(path, start, data, height, width, rows, columns, _places(data, -(-width // columns)))


def _places(data: Any, across: int) -> dict[tuple[int, int], int]:  # noqa: ANN401 - see above
    """Return which frame lies at each (row, column) of the grid: stated for each frame, or along rows when full."""
    count = int(data.get("NumberOfFrames", 1))
    if data.get("DimensionOrganizationType") == "TILED_FULL" or "PerFrameFunctionalGroupsSequence" not in data:
        return {divmod(frame, across): frame for frame in range(count)}
    found = {}
    for frame, group in enumerate(data.PerFrameFunctionalGroupsSequence):
        place = group.PlanePositionSlideSequence[0]
        top, left = int(place.RowPositionInTotalImagePixelMatrix), int(place.ColumnPositionInTotalImagePixelMatrix)
        found[(top - 1) // int(data.Rows), (left - 1) // int(data.Columns)] = frame
    return found


def _profile(data: Any) -> bytes | None:  # noqa: ANN401 - see above
    paths = data.get("OpticalPathSequence")
    profile = paths[0].get("ICCProfile") if paths else None
    return bytes(profile) if profile else None


def _pitch(data: Any) -> tuple[float, float] | None:  # noqa: ANN401 - see above
    """Return micrometres a pixel; DICOM states millimetres between rows, then between columns."""
    try:
        measures = data.SharedFunctionalGroupsSequence[0].PixelMeasuresSequence[0]
        down, across = (1000 * float(value) for value in measures.PixelSpacing)
    except (AttributeError, IndexError, ValueError, TypeError):
        return None
    return (across, down) if across > 0 and down > 0 else None
