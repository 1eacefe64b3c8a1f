"""`hueferry report`: rebuild the report page of a run."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hueferry.cli.terminal import show_lines


def report(
    folder: Annotated[Path, typer.Argument(help="Output folder of a run.", metavar="DIR")],
) -> None:
    """Rebuild the report page of a run from its record."""
    from hueferry import api

    show_lines([str(api.report(folder))])
