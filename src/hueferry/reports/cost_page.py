"""A cost table as one self-contained page."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from hueferry.reports import charts
from hueferry.reports.page import asset, content_hash

NAME = "cost.html"

Json = Mapping[str, Any]


def write_cost_page(table: Json, folder: Path) -> Path:
    """Write the page of a cost table (`api.cost_table`) into a folder and return its path.

    Raises:
        OutputError: nothing can be written there.
    """
    from hueferry.files.atomic import write_bytes

    folder.mkdir(parents=True, exist_ok=True)
    return write_bytes(folder / NAME, render_cost_page(table).encode("utf-8"), overwrite=True)


def render_cost_page(table: Json) -> str:
    """Return the page as HTML; every value is escaped."""
    from jinja2 import Environment, select_autoescape

    style = asset("report.css")
    environment = Environment(autoescape=select_autoescape(default=True, default_for_string=True))
    pairs, comparison = table["pairs"], table.get("comparison")
    count = 2 if comparison is None else len(comparison["names"])
    return environment.from_string(asset("cost.html.j2")).render(
        title=f"What separates {count} pictures",
        lead=pairs[0]["verdict"] if len(pairs) == 1 else "Every figure of every pair, and all pictures on one map.",
        charts=[] if comparison is None else _charts(comparison),
        outliers="" if comparison is None else _outliers(comparison),
        pairs=[_pair(pair, table["units"]) for pair in pairs],
        style=style,
        style_hash=content_hash(style),
    )


def _pair(pair: Json, units: Json) -> dict[str, Any]:
    rows = [
        {"name": key.replace("_", " "), "value": _number(pair[key]), "unit": unit}
        for key, unit in units.items()
        if key in pair
    ]
    return {"a": pair["a"], "b": pair["b"], "verdict": pair["verdict"], "rows": rows}


def _number(value: float | None) -> str:
    return "∞" if value is None else f"{value:.3f}"


def _outliers(comparison: Json) -> str:
    apart = ", ".join(comparison["names"][index] for index in comparison["outliers"])
    return f"Standing apart: {apart or 'none'}."


def _charts(comparison: Json) -> list[dict[str, Any]]:
    names = comparison["names"]
    order = comparison["order"]
    sorted_names = [names[index] for index in order]
    distances = np.array(comparison["distances"])[np.ix_(order, order)]
    positions = np.array(comparison["positions"])[order]
    return [
        {
            "svg": charts.matrix(sorted_names, distances, "How far the pictures are from each other"),
            "caption": "Sliced W2, ΔE*ab; most alike next to each other, stronger is farther",
            "columns": ("Picture", *(str(index + 1) for index in range(len(names)))),
            "rows": [
                (name, *(f"{value:.1f}" for value in row)) for name, row in zip(sorted_names, distances, strict=True)
            ],
        },
        {
            "svg": charts.series_map(sorted_names, positions, positions, "Map of the pictures"),
            "caption": f"Map of the pictures; it shows {100 * comparison['shown']:.0f} % of the distances",
            "columns": ("Picture", "across", "up"),
            "rows": [(name, f"{x:.1f}", f"{y:.1f}") for name, (x, y) in zip(sorted_names, positions, strict=True)],
        },
    ]
