"""OME-Zarr 0.4 and 0.5: one writer a chunk, every level made while the full size streams by."""

from __future__ import annotations

import os
import shutil
import tempfile
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

from hueferry.arrays import Pixels
from hueferry.errors import InputError, OutputError, PictureError
from hueferry.picture import Window
from hueferry.slides.levels import Cascade, Halving, level_shapes
from hueferry.slides.tiff_writer import TILE, Bands, SlideForm

_VERSIONS = ("0.4", "0.5")
"""OME-Zarr versions that are written, as Zarr 2 and Zarr 3."""


def write_zarr_slide(
    path: Path, bands: Bands, form: SlideForm, *, version: str = "0.5", threads: int = 2, overwrite: bool = False
) -> Path:
    """Write a slide as an OME-Zarr folder; it gets its name once every level has been read back.

    A band holds whole rows of chunks, and each chunk is written once by one thread, so no chunk has two writers.

    Args:
        path: the folder to make, usually with the suffix .zarr.
        bands: the pixels, in bands of `TILE` rows.
        form: what they are.
        version: "0.4" or "0.5".
        threads: chunks written at the same time; the bytes do not depend on it.
        overwrite: replace an OME-Zarr folder of that name.

    Raises:
        InputError: the version is unknown.
        OutputError: nothing can be written there.
    """
    if version not in _VERSIONS:
        raise InputError(f"OME-Zarr {version} is not written here; choose 0.4 or 0.5")
    if path.exists() and not overwrite:
        raise OutputError(path, "this exists already; choose another name, or allow overwriting")
    try:
        made = Path(tempfile.mkdtemp(prefix=".hueferry-", dir=path.parent))
    except OSError as error:
        raise OutputError(path, f"nothing can be written here: {error.strerror or error}") from error
    try:
        _store(made, bands, form, version, threads)
        _verify(made, path, form, version)
        made.chmod(0o755)
        _publish(made, path)
    except OSError as error:
        raise OutputError(path, f"writing failed: {error.strerror or error}") from error
    finally:
        shutil.rmtree(made, ignore_errors=True)
    return path


def _store(made: Path, bands: Bands, form: SlideForm, version: str, threads: int) -> None:
    import zarr

    shapes = level_shapes(form.shape, smallest=TILE)
    group: Any = zarr.open_group(str(made), mode="w", zarr_format=2 if version == "0.4" else 3)
    arrays = [
        group.create_array(
            str(level),
            shape=(3, *shape),
            chunks=(3, TILE, TILE),
            dtype=form.dtype,
            dimension_names=None if version == "0.4" else ["c", "y", "x"],  # Zarr 2 has no place for them
            config={"write_empty_chunks": True},  # a chunk that is missing is then one that was not written
            chunk_key_encoding={"name": "v2" if version == "0.4" else "default", "separator": "/"},
        )
        for level, shape in enumerate(shapes)
    ]
    group.attrs.update(_attributes(form, version, len(shapes)))
    if form.encoding.profile:
        (made / "profile.icc").write_bytes(form.encoding.profile)
    with ThreadPoolExecutor(max(1, threads)) as pool:

        def keep(level: int, top: int, band: Pixels) -> None:
            def put(left: int) -> None:
                part = band[:, left : left + TILE].transpose(2, 0, 1)
                arrays[level][:, top : top + part.shape[1], left : left + part.shape[2]] = part

            list(pool.map(put, range(0, band.shape[1], TILE)))

        cascade = Cascade(shapes, TILE, Halving(form.encoding, form.dtype), keep)
        top = 0
        for band in bands:
            keep(0, top, band)
            cascade.add(band)
            top += band.shape[0]
    if top != form.shape[0]:
        raise InputError(f"{top} rows came where the slide has {form.shape[0]}")


def _verify(made: Path, path: Path, form: SlideForm, version: str) -> None:
    """Read the finished folder back: every level there, every chunk in its place, the corners decoded."""
    from hueferry.slides.zarr_reader import ZarrSlide

    shapes = level_shapes(form.shape, smallest=TILE)
    try:
        slide = ZarrSlide(made)
        if list(slide.levels) != shapes:
            raise OutputError(path, f"the levels read back as {list(slide.levels)} instead of {shapes}")
        for level, (height, width) in enumerate(shapes):
            chunks = made / str(level) / ("0" if version == "0.4" else "c/0")
            for row in range(-(-height // TILE)):
                if len(list((chunks / str(row)).iterdir())) != -(-width // TILE):
                    raise OutputError(path, f"chunks of row {row} of level {level} are missing")
            slide.read_level(level, Window(0, 0, 1, 1))
            slide.read_level(level, Window(height - 1, width - 1, 1, 1))
    except PictureError as error:
        raise OutputError(path, f"what was written does not read back: {error.reason}") from error


def _attributes(form: SlideForm, version: str, levels: int) -> dict[str, Any]:
    """Return the metadata of the specification: axes, one scale a level, colours of the channels."""
    unit = {} if form.pitch is None else {"unit": "micrometer"}
    x, y = form.pitch or (1.0, 1.0)
    axes = [{"name": "c", "type": "channel"}, *({"name": name, "type": "space", **unit} for name in "yx")]
    datasets = [
        {
            "path": str(level),
            "coordinateTransformations": [{"type": "scale", "scale": [1.0, y * 2**level, x * 2**level]}],
        }
        for level in range(levels)
    ]
    scales: dict[str, Any] = {"name": "slide", "axes": axes, "datasets": datasets}
    top = 1.0 if form.dtype.kind == "f" else float(2 ** (8 * form.dtype.itemsize) - 1)
    window = {"min": 0.0, "max": top, "start": 0.0, "end": top}
    names = {"red": "FF0000", "green": "00FF00", "blue": "0000FF"}
    channels = [{"label": label, "color": code, "active": True, "window": window} for label, code in names.items()]
    omero = {"channels": channels}
    if version == "0.4":
        return {"multiscales": [{"version": "0.4", **scales}], "omero": omero}
    return {"ome": {"version": "0.5", "multiscales": [scales], "omero": omero}}


def _publish(made: Path, path: Path) -> None:
    """Give the folder its name; what had the name before is removed only once the new one stands."""
    if not path.exists():
        made.rename(path)
        return
    old = Path(tempfile.mkdtemp(prefix=".hueferry-", dir=path.parent))
    os.replace(path, old / "old")  # noqa: PTH105 - a folder onto a new name
    made.rename(path)
    shutil.rmtree(old, ignore_errors=True)
