"""`hueferry drift`: watch a scanner, a camera or a staining run."""

from __future__ import annotations

from datetime import datetime
from pathlib import Path
from typing import Annotated

import typer

from hueferry.cli import options
from hueferry.cli.terminal import show_json, show_lines

app = typer.Typer(help="Control charts of a scanner, a camera or a staining run.", no_args_is_help=True)

Log = Annotated[Path, typer.Argument(help="The drift log, a SQLite file; made by the first reading.", metavar="LOG")]


@app.command("add")
def add(
    log: Log,
    picture: Annotated[Path, typer.Argument(help="Today's picture of the control slide or chart.")],
    to: Annotated[Path, typer.Option("--to", help="Picture of the same frame that it is compared with.")],
    *,
    device: Annotated[str, typer.Option("--device", help="What took the picture.")] = "",
    when: Annotated[datetime | None, typer.Option("--when", help="When it was taken; now if not given.")] = None,
    json: options.Json = False,
) -> None:
    """Measure a control frame against its reference and append the reading to LOG."""
    from hueferry.jobs import drift_add

    reading = drift_add(log, picture, to=to, device=device, when=when)
    if json:
        show_json(reading)
        return
    shifts = f"L* {reading['l']:+.2f}, a* {reading['a']:+.2f}, b* {reading['b']:+.2f}"
    show_lines([f"{picture.name}: {shifts}; W2 {reading['w2']:.2f} ΔE*ab to {to.name}"])


@app.command("chart")
def chart(
    log: Log,
    *,
    device: Annotated[str | None, typer.Option("--device", help="Which device; needed if LOG has several.")] = None,
    out: Annotated[
        Path | None, typer.Option("--out", help="Write the chart here: .svg, or .csv for its table.")
    ] = None,
    json: options.Json = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Say since when, in which direction and how much a device has drifted."""
    from hueferry.jobs import drift_chart

    found = drift_chart(log, device=device, out=out, overwrite=overwrite)
    if json:
        show_json(found)
    else:
        show_lines([found["sentence"]])
