"""`hueferry cost`: what separates palettes."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hueferry.cli import options
from hueferry.cli.terminal import show_json
from hueferry.errors import InputError


def cost(
    pictures: Annotated[
        list[Path], typer.Argument(help="Two pictures or saved palettes, or more.", metavar="A B [C ...]")
    ],
    *,
    out: Annotated[Path | None, typer.Option("--out", help="Folder for a report page of the comparison.")] = None,
    json: options.Json = False,
) -> None:
    """Print what separates the palettes of pictures: how far colour must move, and how distinguishable they are."""
    if len(pictures) < 2:
        raise InputError("cost compares two pictures or more; only one was given")

    from hueferry.cli.cost_tables import show_cost
    from hueferry.jobs import cost_table

    table = cost_table(pictures, out=out)
    if json:
        show_json(table)
    else:
        show_cost(table)
