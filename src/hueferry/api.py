"""The verbs a script needs: read, palette, cost, fit, apply, match, write, report."""

from __future__ import annotations

import os
from collections.abc import Sequence
from enum import StrEnum
from pathlib import Path
from typing import Any, TypeAlias, TypedDict, TypeVar, Unpack, cast

import numpy as np
from numpy.typing import NDArray

from hueferry.errors import InputError
from hueferry.fitting.fit import Fit, fit_picture
from hueferry.fitting.reference import Reference, joint_palette
from hueferry.fitting.settings import Aim, Only, Settings
from hueferry.maps.method import Method
from hueferry.measure.cost import Cost
from hueferry.palettes.palette import Palette
from hueferry.picture import Picture
from hueferry.tables.table import Table

PathLike: TypeAlias = str | os.PathLike[str]
PictureLike: TypeAlias = PathLike | Picture
ReferenceLike: TypeAlias = PathLike | Picture | Palette | Reference
_Array = TypeVar("_Array", bound=NDArray[Any])
_Word = TypeVar("_Word", bound=StrEnum)


def read(path: PathLike) -> Picture:
    """Read a picture with its encoding, depth and metadata.

    Raises:
        PictureError: the file could not be read as a picture.
        RefusedError: reading it would lose or endanger something; the message says the way round.
    """
    from hueferry.files.read import read as read_file

    return read_file(Path(path))


def write(picture: Picture, path: PathLike, *, overwrite: bool = False) -> Path:
    """Write a picture in the format of `path`, verified before it gets its name; originals are never overwritten.

    Raises:
        OutputError: the file exists, is an original, or cannot be written.
    """
    from hueferry.files.write import write as write_file

    return write_file(picture, Path(path), overwrite=overwrite)


def palette(*pictures: PictureLike) -> Palette:
    """Return the palette of a picture, or the common palette of several.

    Raises:
        InputError: no picture was given.
    """
    return joint_palette([as_reference(picture) for picture in pictures])


def cost(first: ReferenceLike, second: ReferenceLike) -> Cost:
    """Return what separates two palettes, or the palettes of two pictures: every figure of the cost table."""
    from hueferry.measure.cost import measure

    return measure(as_reference(first).palette, as_reference(second).palette)


class Choices(TypedDict, total=False):
    """What may be chosen for a fit, in plain words; see `fitting.settings.Settings` for each."""

    aim: str
    method: str
    only: str | None
    strength: float
    keep_neutrals: bool
    max_gain: float | None
    table_size: int | None
    seed: int


def fit(picture: PictureLike, to: ReferenceLike | Sequence[ReferenceLike], **choices: Unpack[Choices]) -> Fit:
    """Find the certified table that brings a picture towards its reference.

    Args:
        picture: the picture, or its path.
        to: the reference, or several.
        choices: `aim` "agree" (the default: remove differences of light and camera only) or "adopt" (take on the
            reference's palette fully); `method` "auto", "gaussian", "sliced", "entropic", "exact", "channels" or
            "mixture"; `only` "tone" or "chroma"; `strength` 0 … 1; `keep_neutrals`; `max_gain`; `table_size`; `seed`.

    Raises:
        InputError: a choice is unknown or out of range.
    """
    references = [to] if isinstance(to, str | os.PathLike | Picture | Palette | Reference) else list(to)
    source = picture if isinstance(picture, Picture) else read(picture)
    return fit_picture(source, [as_reference(one) for one in references], settings_from(choices))


def apply(fitted: Fit | Table | PathLike, picture: PictureLike) -> Picture:
    """Apply a fit, its table alone or a saved map to a picture; the file's depth, encoding and metadata stay.

    Raises:
        MapFileError: the saved map cannot be used.
    """
    from hueferry.applying.engine import apply_table

    table = fitted if isinstance(fitted, Table) else fitted.table if isinstance(fitted, Fit) else _saved(fitted)
    return apply_table(table, picture if isinstance(picture, Picture) else read(picture))


def _saved(path: PathLike) -> Table:
    from hueferry.tables.saved_map import read_map

    return read_map(Path(path)).table


def match(pixels: _Array, reference: NDArray[Any], **choices: Unpack[Choices]) -> _Array:
    """Bring an array of sRGB pixels towards another: array in, array out, same shape and dtype.

    Args:
        pixels: (height, width) or (height, width, 1 … 4), uint8, uint16, float32 or float64 (0 … 1).
        reference: the same for the reference; shape and dtype may differ.
        choices: as for `fit`.

    Raises:
        InputError: an array is not a picture.
    """
    source = picture_from_array(pixels)
    matched = fit(source, picture_from_array(reference), **choices).apply(source)
    return cast("_Array", matched.pixels.reshape(pixels.shape).astype(pixels.dtype))


def picture_from_array(pixels: NDArray[Any]) -> Picture:
    """Wrap an array of sRGB pixels as a picture; float64 is taken as float32.

    Raises:
        InputError: shape or dtype is not that of a picture.
    """
    from hueferry.colour.encoding import SRGB

    array = np.asarray(pixels)
    if array.dtype == np.float64:
        array = array.astype(np.float32)
    if array.ndim == 2:
        array = array[:, :, None]
    return Picture(array, SRGB, bits=16 if array.dtype == np.uint16 else 8 if array.dtype == np.uint8 else 32)


def as_reference(value: ReferenceLike) -> Reference:
    """Return a reference for a path, a picture or a palette."""
    if isinstance(value, Reference):
        return value
    if isinstance(value, Palette):
        return Reference("palette", value)
    if isinstance(value, Picture):
        return Reference.of_picture(value)
    return Reference.of_file(Path(value))


def settings_from(choices: Choices) -> Settings:
    """Make settings from plain words.

    Raises:
        InputError: a word or a value is not one of the choices.
    """
    method, only = choices.get("method", "auto"), choices.get("only")
    try:
        return Settings(
            aim=_choice(Aim, choices.get("aim", Aim.AGREE), "aim"),
            method=None if method == "auto" else _choice(Method, method, "method"),
            only=None if only is None else _choice(Only, only, "part"),
            strength=choices.get("strength", 1.0),
            keep_neutrals=choices.get("keep_neutrals", False),
            max_gain=choices.get("max_gain"),
            table_size=choices.get("table_size"),
            seed=choices.get("seed", 0),
        )
    except (TypeError, ValueError) as error:
        raise InputError(str(error)) from error


def _choice(kind: type[_Word], value: str, name: str) -> _Word:
    try:
        return kind(value)
    except ValueError as error:
        words = ", ".join(member.value for member in kind)
        raise InputError(f"there is no {name} {value!r}; choose one of {words}") from error


def report(folder: PathLike) -> Path:
    """Rebuild the report page of a run from its record, and return its path.

    Raises:
        InputError: there is no record in the folder.
    """
    from hueferry.record.record import read_record
    from hueferry.reports.page import write_report
    from hueferry.reports.slide_page import write_slide_page

    record = read_record(Path(folder))
    return write_slide_page(record, Path(folder)) if record["command"] == "stain" else write_report(Path(folder))
