"""Which reader opens a slide: its bytes decide, and only for scanner formats its name."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from pathlib import Path

from hueferry.errors import InputError, PictureError
from hueferry.slides.source import SlideSource

SCANNER = (".svs", ".ndpi", ".scn", ".bif", ".mrxs", ".vms", ".vmu", ".svslide", ".czi")
SUFFIXES = (*SCANNER, ".tif", ".tiff", ".btf", ".png", ".jpg", ".jpeg", ".webp", ".dcm")

_TIFF = (b"II*\0", b"MM\0*", b"II+\0", b"MM\0+")


def open_slide(path: Path) -> SlideSource:
    """Open a slide for reading by windows.

    Args:
        path: a file, an OME-Zarr folder, or a folder that holds one DICOM whole-slide series.

    Raises:
        PictureError: it is missing or broken.
        RefusedError: it is something else than a colour bright-field slide, or an optional library is missing.
    """
    return _reader(path)(path)


def _reader(path: Path) -> Callable[[Path], SlideSource]:
    from hueferry.slides.dicom_reader import DicomSlide
    from hueferry.slides.plain import PlainSlide
    from hueferry.slides.scanner import ScannerSlide
    from hueferry.slides.tiff_reader import TiffSlide
    from hueferry.slides.zarr_reader import ZarrSlide

    if path.is_dir():
        return ZarrSlide if is_zarr(path) else DicomSlide
    try:
        with path.open("rb") as stream:
            head = stream.read(132)
    except OSError as error:
        raise PictureError(path, f"the file cannot be read: {error.strerror or error}") from error
    if not head:
        raise PictureError(path, "the file is empty")
    if path.suffix.lower() in SCANNER:
        return ScannerSlide
    if head[128:] == b"DICM":
        return DicomSlide
    return TiffSlide if head[:4] in _TIFF else PlainSlide


def is_zarr(path: Path) -> bool:
    """Tell whether a folder is a Zarr group."""
    return (path / "zarr.json").is_file() or (path / ".zgroup").is_file()


def find_slides(paths: Sequence[Path]) -> list[Path]:
    """Return the slides among files and folders, sorted within each folder, each once.

    Raises:
        InputError: nothing was found.
    """
    found = list(dict.fromkeys(slide for path in paths for slide in _within(path)))
    if not found:
        raise InputError("no slide was found; name slides, or folders that hold them")
    return found


def _within(path: Path) -> Iterator[Path]:
    if not path.is_dir() or is_zarr(path):
        yield path
        return
    if any(child.suffix.lower() == ".dcm" for child in path.iterdir()):
        yield path
        return
    for child in sorted(path.iterdir()):
        if child.name.startswith("."):
            continue
        if child.is_dir():
            yield from _within(child)
        elif child.suffix.lower() in SUFFIXES:
            yield child
