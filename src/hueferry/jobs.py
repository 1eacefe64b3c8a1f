"""The whole jobs of the command line: runs on files and folders, and what they leave."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from datetime import datetime
from itertools import combinations
from pathlib import Path
from typing import Any

import attrs

from hueferry.api import as_reference, read, report
from hueferry.errors import InputError
from hueferry.measure.noise import NoiseFloor
from hueferry.palettes.palette import Palette
from hueferry.record.record import Record
from hueferry.series.match import MatchOrder, OnDone, OnPlan

SAMPLE_FOLDER = Path("sample_images")


def match_files(order: MatchOrder, *, on_plan: OnPlan | None = None, on_done: OnDone | None = None) -> Record:
    """Bring files and folders together; pictures, record and contact sheet are left in the folder of the order.

    Where an earlier run has finished just this, nothing is done.

    Raises:
        InputError: it cannot be done as asked; nothing was written.
    """
    from hueferry.record.record import NAME
    from hueferry.reports.contact_sheet import write_contact_sheet
    from hueferry.reports.page import write_report
    from hueferry.series.match import match_pictures, seal_run

    run = match_pictures(order, on_plan=on_plan, on_done=on_done)
    if run.done:
        glimpses = {one.entry.output.path: one.glimpse for one in run.done if one.entry.output is not None}
        sheet = write_contact_sheet(list(glimpses.values()), order.out)
        seal_run(order, run.schedule, [order.out / NAME, sheet, write_report(order.out, glimpses=glimpses)])
    return run.record


def cost_table(paths: Sequence[Path], *, out: Path | None = None) -> dict[str, Any]:
    """Compare pictures each with each: every figure of every pair, units, noise, and a map of three or more.

    A saved palette has no blocks to resample, so pairs with one have no noise floor: `noise` is None.

    Args:
        paths: two pictures or saved palettes or more.
        out: folder for a report page; None writes nothing.

    Returns:
        JSON values: `schema`, `pairs`, `units`, and `comparison` for three pictures or more.

    Raises:
        InputError: fewer than two pictures, or one that cannot be read.
    """
    from hueferry.measure.cost import SCHEMA, UNITS, measure
    from hueferry.measure.matrix import compare
    from hueferry.measure.noise import judge_as_dict

    names = distinct_names(paths)
    counted = [_palette_and_floor(path) for path in paths]
    palettes = [palette for palette, _ in counted]
    pairs = []
    for (i, (one, first)), (j, (other, second)) in combinations(enumerate(counted), 2):
        figures = measure(one, other)
        judged = judge_as_dict(figures.sliced_w2, first, second)
        pairs.append({"a": names[i], "b": names[j], **figures.as_dict(), **judged})
    table: dict[str, Any] = {"schema": SCHEMA, "pairs": pairs, "units": dict(UNITS)}
    if len(paths) > 2:
        table["comparison"] = compare(palettes, names).as_dict()
    if out is not None:
        from hueferry.reports.cost_page import write_cost_page

        write_cost_page(table, out)
    return table


def _palette_and_floor(path: Path) -> tuple[Palette, NoiseFloor | None]:
    """Return the palette of a file, and the noise floor if it is a picture."""
    from hueferry.measure.noise import noise_floor
    from hueferry.palettes.build import palette_of
    from hueferry.palettes.saved import is_palette, read_palette

    if is_palette(path):
        return read_palette(path), None
    picture = read(path)
    return palette_of(picture), noise_floor(picture)


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
    on_plan: Callable[[str], None] | None = None,
    on_done: Callable[[Any], None] | None = None,
) -> Record:
    """Bring slides and folders of slides together; slides, overlays and a record are left in `out`.

    What an earlier run has done there is taken over, if slides, settings, references and results are as they were.

    Args:
        slides: slides, and folders of slides.
        out: folder of the results.
        to: reference slides, or one saved house palette; none means what the slides have in common.
        choices: fields of `slides.settings.StainSettings`, in plain words; "auto" for the packing chooses.
        on_plan: called with a sentence on what an earlier run has done, if anything.
        on_done: called with each outcome.

    Raises:
        InputError: it cannot be done as asked.
    """
    from hueferry.record.record import NAME
    from hueferry.series.stain import StainOrder, seal_run, stain_slides
    from hueferry.slides.settings import settings_from_words

    order = StainOrder(inputs=slides, to=to, out=out, settings=settings_from_words(choices or {}))
    run = stain_slides(order, on_plan=on_plan, on_done=on_done)
    if run.record.entries and not run.unchanged:
        seal_run(order, run.schedule, [out / NAME, report(out)])
    return run.record


def check_folder(folder: Path, *, recreated: str | None = None) -> list[str]:
    """Compare every file of a run with its hash in the record; return a sentence for each that differs or is gone.

    Args:
        folder: of the run.
        recreated: name of a result to make again and compare too.

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
            if not path.exists():
                complaints.append(f"{kind} {path} is gone")
            elif fact["sha256"] and FileFact.of(path).sha256 != fact["sha256"]:
                complaints.append(f"{kind} {path} differs from the record")
    if recreated is not None and not complaints:
        from hueferry.series.recreate import recreate

        complaints += recreate(folder, recreated)
    return complaints


def palette_file(
    pictures: Sequence[Path], *, out: Path, merged: bool = False, overwrite: bool = False
) -> dict[str, Any]:
    """Save the palette of a picture, or one palette of several, and return what it is as JSON values.

    Args:
        pictures: pictures, and palettes saved before.
        out: where it is saved; the name says in which form.
        merged: count all pixels together; else find what the palettes have in common.
        overwrite: replace an earlier palette.

    Raises:
        InputError: a picture cannot be read, or the palette cannot be written as asked.
    """
    from hueferry.files.atomic import write_bytes
    from hueferry.fitting.reference import joint_palette
    from hueferry.palettes.saved import check_name, merge, palette_text

    check_name(out)
    references = [as_reference(path) for path in pictures]
    found = merge([one.palette for one in references]) if merged else joint_palette(references)
    write_bytes(out, palette_text(found, out).encode(), overwrite=overwrite)
    names = [path.as_posix() for path in pictures]
    return {"schema": "hueferry/palette-1", "palette": out.as_posix(), "colours": len(found), "pictures": names}


def house_palette_file(
    slides: Sequence[Path], *, out: Path, light: str = "encoded", overwrite: bool = False
) -> dict[str, Any]:
    """Save what slides have in common as a house palette, and return what it is as JSON values.

    Raises:
        InputError: no slide can be used, or the palette cannot be written as asked.
    """
    from hueferry.errors import OutputError
    from hueferry.files.atomic import write_bytes
    from hueferry.slides.gather import reference_from
    from hueferry.slides.house import SUFFIX, house_text
    from hueferry.slides.readers import find_slides
    from hueferry.slides.settings import settings_from_words

    if out.suffix.lower() != SUFFIX:
        raise OutputError(out, f"a house palette of slides is saved as JSON text; let its name end in {SUFFIX}")
    chosen = settings_from_words({"light": light}).light
    found = reference_from(find_slides(slides), light=chosen)
    write_bytes(out, house_text(found).encode("ascii"), overwrite=overwrite)
    return {
        "schema": "hueferry/palette-1",
        "palette": out.as_posix(),
        "colours": len(found.codes),
        "pictures": [path.as_posix() for path in slides],
        "shares": list(found.shares),
        "stain_vectors": None if found.stains is None else found.stains.vectors.tolist(),
    }
