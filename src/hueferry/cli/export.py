"""`hueferry export`: a map as a decision list that people can edit."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hueferry.cli import options
from hueferry.cli.terminal import show_json, show_lines


def export(
    map_file: Annotated[Path, typer.Argument(help="A map in the Common LUT Format.", metavar="MAP.clf")],
    out: Annotated[Path, typer.Option("--out", help="Where the decision list is saved, as .cc.")],
    over: Annotated[Path, typer.Option("--over", help="Picture whose colours the list must suit.", metavar="PICTURE")],
    *,
    json: options.Json = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Save the ASC decision list nearest to a map, and say how far it is from it."""
    from hueferry.jobs import export_decision_list

    saved = export_decision_list(map_file, out=out, over=over, overwrite=overwrite)
    if json:
        show_json(saved)
    else:
        show_lines(
            [f"saved as {out}: {saved['mean']:.2f} ΔE00 from the map on average, at most {saved['largest']:.2f}"]
        )
