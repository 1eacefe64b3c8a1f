"""`hueferry demo`: the whole job on the sample pictures."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hueferry.cli import options
from hueferry.cli.match import show_costs
from hueferry.cli.progress import Progress
from hueferry.cli.terminal import remark, show_json
from hueferry.fitting.settings import Settings

DEMO_FOLDER = Path("hueferry-demo")


def demo(
    *,
    out: Annotated[Path, typer.Option("--out", help="Folder for the results.")] = DEMO_FOLDER,
    json: options.Json = False,
    quiet: options.Quiet = False,
) -> None:
    """Do the whole job on the sample series of Marrowfield Tileworks: bring every frame to the hero frame."""
    from hueferry.jobs import demo_samples, match_files
    from hueferry.series.match import MatchOrder

    samples = demo_samples(out)
    order = MatchOrder(inputs=samples.frames, to=[samples.hero], out=out, settings=Settings(), overwrite=True)
    progress = Progress()
    record = match_files(order, on_plan=None if quiet else progress.begin, on_done=None if quiet else progress.step)
    if json:
        show_json(record.as_dict())
        return
    show_costs(record)
    if not quiet:
        remark(f"look at {out / 'contact_sheet.jpg'}: before above after")
