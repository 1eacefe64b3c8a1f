"""Runs made up for reports: a real one of two pictures, and ones of many or of hostile names."""

from __future__ import annotations

import copy
import json
from pathlib import Path
from typing import Any

from PIL import Image

from hueferry.fitting.settings import Settings
from hueferry.jobs import match_files
from hueferry.record.record import read_record
from hueferry.series.match import MatchOrder
from photographs import in_other_light, photograph

HOSTILE = [
    "<img src=x onerror=alert(1)>.png",
    "\"><script>alert('x')</script>.png",
    "';alert(String.fromCharCode(88))//.png",
    "{{ 7*7 }}.png",
    "&lt;b&gt;.png",
    "javascript:alert(1).png",
    "</style><h1 id=broken>.png",
    "\u202egpj.exe.png",
    "a\nb.png",
    "[red]x[/red].png",
]


def make_run(folder: Path) -> Path:
    """Match three pictures and return the folder of the run."""
    shoot = folder / "shoot"
    shoot.mkdir()
    for name, gains in (("warm", (1.25, 1.0, 0.75)), ("cool", (0.8, 1.0, 1.2)), ("dim", (0.7, 0.7, 0.7))):
        Image.fromarray(in_other_light(photograph("china"), gains=gains)).save(shoot / f"{name}.png")
    Image.fromarray(photograph("china")).save(folder / "hero.png")
    match_files(MatchOrder(inputs=[shoot], to=[folder / "hero.png"], out=folder / "out", settings=Settings()))
    return folder / "out"


def with_entries(run: Path, names: list[str]) -> dict[str, Any]:
    """Return the record of `run` with its first entry repeated under other names."""
    record = read_record(run)
    entry = record["entries"][0]
    entries = []
    for name in names:
        one = copy.deepcopy(entry)
        one["source"]["path"] = f"shoot/{name}"
        entries.append(one)
    record["entries"], record["overview"] = entries, {}
    return record


def store(record: dict[str, Any], run: Path) -> None:
    """Put a record into the folder of a run."""
    (run / "record.json").write_text(json.dumps(record), encoding="utf-8")
