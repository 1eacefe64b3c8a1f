"""The verbs a script needs: read, palette, cost, fit, apply, match, write; and the whole jobs of the command line."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping, Sequence
from datetime import datetime
from enum import StrEnum
from itertools import combinations
from pathlib import Path
from typing import Any, TypeAlias, TypedDict, TypeVar, Unpack, cast

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.errors import HueferryError, InputError
from hueferry.fitting.fit import Fit, fit_picture
from hueferry.fitting.reference import Reference, joint_palette
from hueferry.fitting.settings import Aim, Only, Settings
from hueferry.maps.method import Method
from hueferry.measure.cost import Cost
from hueferry.palettes.palette import Palette
from hueferry.picture import Picture
from hueferry.record.record import Failure, Record
from hueferry.series.match import MatchOrder, OnDone
from hueferry.tables.certificate import Certificate
from hueferry.tables.table import Table

SAMPLE_FOLDER = Path("sample_images")

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


def apply(fitted: Fit | Table, picture: PictureLike) -> Picture:
    """Apply a fit, or its table alone, to a picture; the file's depth, encoding and metadata stay."""
    from hueferry.applying.engine import apply_table

    table = fitted.table if isinstance(fitted, Fit) else fitted
    return apply_table(table, picture if isinstance(picture, Picture) else read(picture))


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
    return Reference.of_picture(value if isinstance(value, Picture) else read(value))


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


def match_files(order: MatchOrder, *, on_done: OnDone | None = None) -> Record:
    """Bring files and folders together; pictures, record and contact sheet are left in the folder of the order.

    Raises:
        InputError: it cannot be done as asked; nothing was written.
    """
    from hueferry.reports.contact_sheet import write_contact_sheet
    from hueferry.series.match import match_pictures

    run = match_pictures(order, on_done=on_done)
    if run.thumbnails:
        write_contact_sheet(run.thumbnails, order.out)
        report(order.out)
    return run.record


def report(folder: PathLike) -> Path:
    """Rebuild the report page of a run from its record, and return its path.

    Raises:
        InputError: there is no record in the folder.
    """
    from hueferry.reports.page import write_report

    return write_report(Path(folder))


def cost_table(paths: Sequence[Path], *, out: Path | None = None) -> dict[str, Any]:
    """Compare pictures each with each: every figure of every pair, units, noise, and a map of three or more.

    Args:
        paths: two pictures or more.
        out: folder for a report page; None writes nothing.

    Returns:
        JSON values: `schema`, `pairs`, `units`, and `comparison` for three pictures or more.

    Raises:
        InputError: fewer than two pictures, or one that cannot be read.
    """
    from hueferry.measure.cost import SCHEMA, UNITS, measure
    from hueferry.measure.matrix import compare
    from hueferry.measure.noise import judge, noise_floor
    from hueferry.palettes.build import palette_of

    pictures = [read(path) for path in paths]
    names = distinct_names(paths)
    palettes = [palette_of(picture) for picture in pictures]
    floors = [noise_floor(picture) for picture in pictures]
    pairs = []
    for i, j in combinations(range(len(paths)), 2):
        figures = measure(palettes[i], palettes[j])
        judgement = judge(figures.sliced_w2, floors[i], floors[j])
        noise = {"sampling": judgement.sampling, "within": judgement.within}
        pairs.append({"a": names[i], "b": names[j], **figures.as_dict(), "noise": noise, "verdict": judgement.sentence})
    table: dict[str, Any] = {"schema": SCHEMA, "pairs": pairs, "units": dict(UNITS)}
    if len(paths) > 2:
        table["comparison"] = compare(palettes, names).as_dict()
    if out is not None:
        from hueferry.reports.cost_page import write_cost_page

        write_cost_page(table, out)
    return table


def distinct_names(paths: Sequence[Path]) -> list[str]:
    """Return short names for files: the last part of each path, or the whole path where that is not enough."""
    short = [path.name for path in paths]
    return [name if short.count(name) == 1 else path.as_posix() for name, path in zip(short, paths, strict=True)]


@attrs.frozen
class Samples:
    """The sample series: the hero frame and the frames to bring to it."""

    hero: Path
    frames: tuple[Path, ...]


def demo_samples(out: Path) -> Samples:
    """Find the sample pictures in `sample_images/`, or render them into `out` where there is no such folder."""
    folder = SAMPLE_FOLDER
    if not (folder / "hero.jpg").is_file():
        from hueferry.samples.photographs import render_samples

        folder = out / SAMPLE_FOLDER
        if not (folder / "hero.jpg").is_file():
            render_samples(folder)
    return Samples(folder / "hero.jpg", tuple(sorted(folder.glob("bench-*"))))


def drift_add(log: Path, picture: Path, *, to: Path, device: str = "", when: datetime | None = None) -> dict[str, Any]:
    """Measure a control frame against its reference, append the reading to a log, and return it as JSON values.

    Raises:
        InputError: a picture cannot be read, or the file is not a drift log.
    """
    from hueferry.drift.log import add_reading
    from hueferry.drift.reading import Labels

    labels = Labels(device=device, picture=picture.name, reference=to.name, when=when)
    reading = add_reading(log, read(picture), as_reference(to).palette, labels)
    return attrs.asdict(reading) | {"schema": "hueferry/drift-1", "when": reading.when.isoformat()}


def drift_chart(
    log: Path, *, device: str | None = None, out: Path | None = None, overwrite: bool = False
) -> dict[str, Any]:
    """Chart one device of a drift log, write the chart if asked, and return what it says as JSON values.

    Args:
        log: the drift log.
        device: whose; None takes the only one.
        out: where to write: `.svg` the chart, `.csv` its table.
        overwrite: replace an earlier chart.

    Raises:
        InputError: there is no such log or device, several devices and none named, or a suffix that names no form.
    """
    from hueferry.drift.chart import chart
    from hueferry.drift.drawing import as_svg
    from hueferry.drift.log import list_devices, list_readings
    from hueferry.drift.table import as_csv
    from hueferry.files.atomic import write_bytes

    devices = list_devices(log)
    if device is None and len(devices) > 1:
        raise InputError(f"{log} holds several devices; choose one with --device: " + ", ".join(devices))
    found = chart(list_readings(log, device=device))
    if out is not None:
        forms = {".svg": as_svg, ".csv": as_csv}
        if out.suffix.lower() not in forms:
            raise InputError(f"{out}: the suffix names no form of a chart; use .svg or .csv")
        write_bytes(out, forms[out.suffix.lower()](found).encode("utf-8"), overwrite=overwrite)
    drift = None if found.drift is None else attrs.asdict(found.drift)
    return {
        "schema": "hueferry/drift-1",
        "device": found.device,
        "state": found.state.value,
        "sentence": found.sentence,
        "readings": len(found.readings),
        "drift": drift,
    }


def stain_files(
    slides: Sequence[Path],
    *,
    out: Path,
    to: Sequence[Path] = (),
    choices: Mapping[str, Any] | None = None,
    on_done: Callable[[Any], None] | None = None,
) -> Record:
    """Bring slides and folders of slides together; slides, overlays and a record are left in `out`.

    Args:
        slides: slides, and folders of slides.
        out: folder of the results.
        to: reference slides; none means what the slides have in common.
        choices: fields of `slides.run.StainSettings`, in plain words; "auto" for the packing chooses.
        on_done: called with each outcome.

    Raises:
        InputError: it cannot be done as asked.
    """
    from hueferry.files.atomic import write_bytes
    from hueferry.record.record import NAME, to_json
    from hueferry.slides.record import record_of, settings_from_words
    from hueferry.slides.run import stain

    words = dict(choices or {})
    settings = settings_from_words(words)
    if (out / NAME).exists() and not settings.overwrite:
        raise InputError(f"{out / NAME} exists already; choose another folder, or add --overwrite")
    results = stain(slides, to=to, out=out, settings=settings, on_done=on_done)
    record = record_of(results, to=to, out=out, words=words)
    if record.entries:
        write_bytes(out / NAME, to_json(record).encode(), overwrite=True)
    return record


def fit_file(picture: Path, *, to: Sequence[Path], out: Path, settings: Settings, overwrite: bool = False) -> Fit:
    """Find the map that brings a picture towards its references and save it as CLF.

    Raises:
        InputError: a picture cannot be read, or the map cannot be written.
    """
    from hueferry.files.atomic import write_bytes
    from hueferry.tables.clf import clf_text

    if out.suffix.lower() != ".clf":
        raise InputError(f"{out}: a map is saved as .clf")
    source = read(picture)
    fitted = fit_picture(source, [as_reference(path) for path in to], settings)
    facts = {
        "picture": picture.name,
        "reference": ", ".join(path.name for path in to),
        "aim": settings.aim.value,
        "certificate": "; ".join(fitted.certificate.sentences()),
        "evidence": fitted.evidence.decision,
    }
    text = clf_text(fitted.table, encoding=source.encoding.name, facts=facts)
    write_bytes(out, text.encode("utf-8"), overwrite=overwrite)
    return fitted


def apply_file(
    map_file: Path, pictures: Sequence[Path], *, out: Path, overwrite: bool = False
) -> tuple[list[Path], list[Failure]]:
    """Send pictures and folders of pictures through a saved map; what cannot be done is a `Failure`.

    Raises:
        MapFileError: the map cannot be used.
        InputError: there is no picture.
    """
    from hueferry.files.walk import find_pictures
    from hueferry.series.plan import plan_errands
    from hueferry.tables.clf import read_clf

    table = read_clf(map_file)
    written, failures = [], []
    for errand in plan_errands(pictures, out, find=find_pictures):
        try:
            result = apply(table, errand.source)
            errand.output.parent.mkdir(parents=True, exist_ok=True)
            written.append(write(result, errand.output, overwrite=overwrite))
        except HueferryError as error:
            failures.append(Failure(errand.source.as_posix(), str(error)))
    return written, failures


def check_map(map_file: Path) -> Certificate:
    """Return the certificate of a saved map from its file alone: every cell counts as occupied, codes as sRGB.

    Raises:
        MapFileError: the map cannot be used.
    """
    from hueferry.colour.encoding import SRGB
    from hueferry.tables.cells import Occupied
    from hueferry.tables.certificate import certify
    from hueferry.tables.clf import read_clf

    grid = np.stack(np.meshgrid(*[np.linspace(0.0, 1.0, 33)] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
    everywhere = Occupied(grid, np.full(len(grid), 1 / len(grid)))
    return certify(read_clf(map_file), occupied=everywhere, encoding=SRGB)


def check_folder(folder: Path) -> list[str]:
    """Compare every file of a run with its hash in the record; return a sentence for each that differs or is gone.

    Raises:
        InputError: there is no record in the folder.
    """
    from hueferry.record.record import FileFact, read_record

    record = read_record(folder)
    outputs = [(folder / entry["output"]["path"], entry["output"]) for entry in record["entries"] if entry["output"]]
    inputs = [(Path(fact["path"]), fact) for fact in record["references"]]
    inputs += [(Path(entry["source"]["path"]), entry["source"]) for entry in record["entries"]]
    complaints = []
    for kind, facts in (("output", outputs), ("input", inputs)):
        for path, fact in facts:
            if not path.is_file():
                complaints.append(f"{kind} {path} is gone")
            elif fact["sha256"] and FileFact.of(path).sha256 != fact["sha256"]:
                complaints.append(f"{kind} {path} differs from the record")
    return complaints
