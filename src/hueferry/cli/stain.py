"""`hueferry stain`: bring stained sections together."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from hueferry.cli import options
from hueferry.cli.terminal import remark, show_json, show_table
from hueferry.fitting.settings import Aim

if TYPE_CHECKING:
    from hueferry.record.record import Record
    from hueferry.slides.run import SlideFailure, SlideOutcome

SOME_FAILED = 1
NOTHING_DONE = 2


def stain(
    slides: Annotated[list[Path], typer.Argument(help="Slides and folders of slides.", metavar="SLIDE|FOLDER...")],
    out: options.Out,
    *,
    to: options.To = None,
    aim: Annotated[Aim, typer.Option("--aim", help="agree: stains and light only. adopt: all densities.")] = Aim.AGREE,
    strength: options.Strength = 1.0,
    layout: options.Layout = "ome",
    packing: options.Packing = "auto",
    quality: Annotated[int, typer.Option("--quality", help="Of JPEG tiles.", min=1, max=100)] = 90,
    light: Annotated[str, typer.Option("--light", help="Optical density of encoded or linear values.")] = "encoded",
    max_gain: options.MaxGain = None,
    measure_only: Annotated[bool, typer.Option("--measure-only", help="Write no slide.")] = False,
    correct_measured: Annotated[
        bool, typer.Option("--correct-measured", help="Correct also where a stain's amount is the measurement (DAB).")
    ] = False,
    keep_texts: Annotated[bool, typer.Option("--keep-texts", help="Carry free text and identifiers over.")] = False,
    workers: Annotated[int, typer.Option("--workers", help="Windows at the same time.", min=1)] = 2,
    json: options.Json = False,
    quiet: options.Quiet = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Bring stained bright-field sections together, in optical density. Research use only."""
    from hueferry.jobs import stain_files
    from hueferry.slides.cautions import CAUTIONS

    choices = {
        "aim": aim.value,
        "strength": strength,
        "layout": layout,
        "packing": packing,
        "quality": quality,
        "light": light,
        "max_gain": max_gain,
        "measure_only": measure_only,
        "correct_measured": correct_measured,
        "keep_texts": keep_texts,
        "threads": workers,
        "overwrite": overwrite,
    }
    for caution in CAUTIONS:
        remark(f"Caution: {caution}")
    on_plan, on_done = (None, None) if quiet else (remark, _say)
    record = stain_files(slides, to=to or (), out=out, choices=choices, on_plan=on_plan, on_done=on_done)
    if json:
        show_json(record.as_dict())
    else:
        _show(record)
    if record.failures:
        raise typer.Exit(SOME_FAILED if record.entries else NOTHING_DONE)


def _say(result: SlideOutcome | SlideFailure) -> None:
    from hueferry.slides.run import SlideFailure

    if isinstance(result, SlideFailure):
        remark(f"failed: {result.reason}")
        return
    remark(f"{result.source.name}: {'; '.join(result.sentences)}")


def _show(record: Record) -> None:
    rows = []
    for entry in record.entries:
        numbers = entry.numbers
        rows.append(
            (
                entry.source.path.rsplit("/", 1)[-1],
                *(_figure(numbers, f"cost_delta_e_{when}", ".2f") for when in ("before", "after")),
                *(_figure(numbers, f"cost_density_{when}", ".3f") for when in ("before", "after")),
                "measured" if entry.output is None else "written",
            )
        )
    if rows:
        heads = ("slide", "ΔE*ab before", "after", "OD before", "after", "")
        show_table("Transport cost to the reference, tissue only (root mean square)", heads, rows)


def _figure(numbers: Mapping[str, Any], name: str, form: str) -> str:
    return format(numbers[name], form) if name in numbers else "-"
