"""`hueferry fit`, `apply` and `check`: maps that are saved, used again and verified."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import attrs
import typer

from hueferry.cli import options
from hueferry.cli.terminal import remark, show_json, show_lines
from hueferry.fitting.settings import Aim, Settings

DIFFERS = 1
NOTHING_WRITTEN = 2

MapFile = Annotated[
    Path,
    typer.Argument(help="A map: Common LUT Format (.clf) or a decision list (.cc, .ccc, .cdl).", metavar="MAP.clf"),
]
Correction = Annotated[
    str | None, typer.Option("--correction", help="Id of the correction in a file with several.", metavar="ID")
]


def fit(
    picture: Annotated[Path, typer.Argument(help="Picture to correct.")],
    to: Annotated[list[Path], typer.Option("--to", help="What it is brought towards; may be given again.")],
    out: Annotated[Path, typer.Option("--out", help="Where the map is saved, as .clf.")],
    *,
    aim: options.AimOption = Aim.AGREE,
    method: options.MethodOption = "auto",
    strength: options.Strength = 1.0,
    only: options.OnlyOption = None,
    keep_neutrals: options.KeepNeutrals = False,
    max_gain: options.MaxGain = None,
    seed: options.Seed = 0,
    json: options.Json = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Find the map that brings PICTURE towards its references, and save it; no picture is written."""
    chosen = options.parse_method(method)

    from hueferry.map_jobs import fit_file

    settings = Settings(
        aim=aim,
        method=chosen,
        strength=strength,
        only=only,
        keep_neutrals=keep_neutrals,
        max_gain=max_gain,
        seed=seed,
    )
    fitted = fit_file(picture, to=to, out=out, settings=settings, overwrite=overwrite)
    if json:
        show_json({"schema": "hueferry/fit-1", "map": out.as_posix(), **fitted.as_dict()})
    else:
        show_lines([*fitted.sentences, *fitted.certificate.sentences(), f"saved as {out}"])


def apply(
    map_file: MapFile,
    pictures: options.Pictures,
    out: options.Out,
    *,
    then: Annotated[
        list[Path] | None, typer.Option("--then", help="A map that comes after; may be given again.", metavar="MAP")
    ] = None,
    undo: Annotated[bool, typer.Option("--undo", help="Run the map backwards; maps that fold cannot be.")] = False,
    correction: Correction = None,
    stain: Annotated[bool, typer.Option("--stain", help="They are slides: read and write them by windows.")] = False,
    layout: options.Layout = "ome",
    packing: options.Packing = "auto",
    json: options.Json = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Send pictures, or with --stain slides, through a saved map; nothing is measured or fitted."""
    from hueferry.map_jobs import apply_file, apply_to_slides, open_maps

    saved = open_maps([map_file, *(then or [])], correction=correction, undo=undo)
    for sentence in saved.sentences:
        remark(sentence)
    if stain:
        choices = {"layout": layout, "packing": packing, "overwrite": overwrite}
        written, failures = apply_to_slides(saved, pictures, out=out, choices=choices)
    else:
        written, failures = apply_file(saved, pictures, out=out, overwrite=overwrite)
    if json:
        show_json(
            {
                "schema": "hueferry/apply-1",
                "misfit": None if saved.misfit is None else attrs.asdict(saved.misfit),
                "written": [path.as_posix() for path in written],
                "failures": [{"path": failure.path, "reason": failure.reason} for failure in failures],
            }
        )
    else:
        show_lines([str(path) for path in written])
    for failure in failures:
        remark(f"failed: {failure.reason}")
    if failures:
        raise typer.Exit(DIFFERS if written else NOTHING_WRITTEN)


def check(
    target: Annotated[Path, typer.Argument(help="A map, or the folder of a run.", metavar="MAP.clf|DIR")],
    *,
    preview: Annotated[
        Path | None, typer.Option("--preview", help="Draw what the map does, as .png.", metavar="FILE.png")
    ] = None,
    over: Annotated[
        Path | None,
        typer.Option("--over", help="Picture or saved palette whose colours the preview shows.", metavar="PICTURE"),
    ] = None,
    correction: Correction = None,
    recreate: Annotated[
        str | None,
        typer.Option("--recreate", help="Make this result of the run again and compare its bytes.", metavar="NAME"),
    ] = None,
    json: options.Json = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Certify a map from its file alone, or verify every file of a run against its record."""
    if over is not None and preview is None:
        raise typer.BadParameter("--over chooses what a preview shows; say where with --preview")
    if target.is_dir():
        if preview is not None:
            raise typer.BadParameter("--preview is for a map")
        from hueferry.jobs import check_folder

        complaints = check_folder(target, recreated=recreate)
        if json:
            show_json({"schema": "hueferry/check-1", "differences": complaints})
        else:
            show_lines(complaints or [_all_well(recreate)])
        if complaints:
            raise typer.Exit(DIFFERS)
        return
    if recreate is not None:
        raise typer.BadParameter("--recreate is for the folder of a run")
    from hueferry.map_jobs import check_map, preview_map

    checked = check_map(target, correction=correction)
    if preview is not None:
        preview_map(checked, out=preview, title=target.name, over=over, overwrite=overwrite)
    if json:
        show_json({"schema": "hueferry/check-1", **checked.as_dict()})
    else:
        show_lines(checked.sentences)
    if checked.certificate.folds:
        raise typer.Exit(DIFFERS)


def _all_well(recreated: str | None) -> str:
    if recreated is None:
        return "every file is as the record says"
    return f"every file is as the record says, and {recreated} came out the same when it was made again"
