"""`hueferry export`: a map in another open standard."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hueferry.cli import options
from hueferry.cli.terminal import show_json, show_lines


def export(
    map_file: Annotated[Path, typer.Argument(help="A saved map.", metavar="MAP")],
    out: Annotated[
        Path,
        typer.Option("--out", help="Where it is saved: .icc profile, .cc decision list, .clf.", metavar="FILE"),
    ],
    *,
    over: Annotated[
        Path | None,
        typer.Option("--over", help="Picture that the map is for: its encoding, its colours.", metavar="PICTURE"),
    ] = None,
    abstract: Annotated[
        bool, typer.Option("--abstract", help="Make the profile an abstract one, Lab to Lab; else a device link.")
    ] = False,
    size: Annotated[int | None, typer.Option("--size", help="Nodes along an axis of a CLF.", min=2, max=129)] = None,
    json: options.Json = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Save a map as an ICC profile, an ASC decision list or CLF, and say how far that is from it."""
    from hueferry.map_jobs import export_map

    saved = export_map(map_file, out=out, over=over, abstract=abstract, size=size, overwrite=overwrite)
    if json:
        show_json(saved)
        return
    distance = f"{saved['mean']:.2f} ΔE00 from the map on average, at most {saved['largest']:.2f}"
    lines = [f"saved as {out}, {saved['kind']}: {distance}"]
    if saved.get("clipped"):
        lines.append(f"{100 * saved['clipped']:.1f} % of all codes come out beyond the range and are clipped there")
    show_lines(lines)
