"""`hueferry palette`: save a palette as a reference."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hueferry.cli import options
from hueferry.cli.terminal import show_json, show_lines


def palette(
    pictures: Annotated[list[Path], typer.Argument(help="Pictures, or palettes saved before.", metavar="PICTURE...")],
    out: Annotated[
        Path, typer.Option("--out", help="Where the palette is saved: .txt or .cgats for CGATS text, or .json.")
    ],
    *,
    merge: Annotated[
        bool, typer.Option("--merge", help="Count all pixels together, instead of finding what they have in common.")
    ] = False,
    stain: Annotated[bool, typer.Option("--stain", help="They are slides: save their house palette.")] = False,
    light: Annotated[
        str, typer.Option("--light", help="Of slides: optical density of encoded or linear values.")
    ] = "encoded",
    json: options.Json = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Save the palette of a picture, or the common palette of several, for use with --to.

    With --stain, the palette is that of slides, for `stain --to`.
    """
    from hueferry.jobs import house_palette_file, palette_file

    if stain:
        saved = house_palette_file(pictures, out=out, light=light, overwrite=overwrite)
    else:
        saved = palette_file(pictures, out=out, merged=merge, overwrite=overwrite)
    if json:
        show_json(saved)
    else:
        show_lines([f"{saved['colours']} colours saved as {out}"])
