"""The report of a run: one self-contained page, rebuilt at any time from its record."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Mapping, Sequence
from importlib.resources import files
from pathlib import Path
from typing import Any

import numpy as np

from hueferry.record.record import read_record
from hueferry.reports import charts
from hueferry.reports.pictures import glimpse_again, template_values
from hueferry.reports.words import (
    CAUTIONS,
    METHODS,
    REMAINS,
    SOURCES,
    evidence_facts,
    plain_verdict,
    said,
    setting_facts,
    summary,
)
from hueferry.series.glimpse import Glimpse

NAME = "report.html"

_DRAWN_UP_TO = 100
"""Pictures up to which each has its charts; beyond, the record has their numbers and the page stays quick to open."""

Json = Mapping[str, Any]


def write_report(folder: Path, *, glimpses: Mapping[str, Glimpse] | None = None) -> Path:
    """Write the page of the run in `folder` and return its path.

    Args:
        folder: of the run.
        glimpses: of results by their names in the record; what is not there is looked at again.

    Raises:
        InputError: there is no record in the folder.
    """
    from hueferry.files.atomic import write_bytes

    record = read_record(folder)
    shown = [_glimpse_of(entry, folder, glimpses or {}, len(record["entries"])) for entry in record["entries"]]
    return write_bytes(folder / NAME, render_page(record, shown).encode("utf-8"), overwrite=True)


def _glimpse_of(entry: Json, folder: Path, glimpses: Mapping[str, Glimpse], count: int) -> Glimpse | None:
    output = entry["output"]
    known = None if output is None else glimpses.get(output["path"])
    return known if known is not None else glimpse_again(folder, entry, count=count)


def render_page(record: Json, glimpses: Sequence[Glimpse | None]) -> str:
    """Return the page as HTML; every value of the record is escaped.

    Args:
        record: the JSON values of a record.
        glimpses: the pictures of each entry, or None where they are no longer at hand.
    """
    from jinja2 import Environment, select_autoescape

    style, script = asset("report.css"), asset("report.js")
    environment = Environment(autoescape=select_autoescape(default=True, default_for_string=True))
    template = environment.from_string(asset("report.html.j2"))
    entries = record["entries"]
    return template.render(
        title=_title(record),
        lead=summary(record),
        cautions=CAUTIONS.get(record["command"], ()),
        overview=_overview(entries),
        series=_series(record.get("overview", {})),
        outliers=_outliers(record.get("overview", {})),
        series_said=" ".join(record["sentences"][1:]),
        failures=record["failures"],
        pictures=[
            _picture(entry, glimpse, drawn=len(entries) <= _DRAWN_UP_TO)
            for entry, glimpse in zip(entries, glimpses, strict=True)
        ],
        remains=REMAINS[record["settings"]["aim"]],
        methods=METHODS[record["settings"]["aim"]],
        sources=SOURCES[record["settings"]["aim"]],
        settings=setting_facts(record["settings"]),
        versions=sorted(record["versions"].items()),
        files=record_files(record),
        version=record["versions"].get("hueferry", ""),
        style=style,
        script=script,
        style_hash=content_hash(style),
        script_hash=content_hash(script),
    )


def asset(name: str) -> str:
    """Return a template, style sheet or script that ships with the package."""
    return files("hueferry.reports").joinpath("templates", name).read_text(encoding="utf-8")


def content_hash(text: str) -> str:
    """Return the source expression of a content policy that allows exactly this text."""
    return "sha256-" + base64.b64encode(hashlib.sha256(text.encode("utf-8")).digest()).decode("ascii")


def _title(record: Json) -> str:
    count = len(record["entries"])
    return f"{count} picture{'' if count == 1 else 's'} brought together"


def _overview(entries: Sequence[Json]) -> dict[str, Any]:
    names = [name_of(entry) for entry in entries]
    before = [entry["numbers"]["cost_before"]["w2"] for entry in entries]
    after = [entry["numbers"]["cost_after"]["w2"] for entry in entries]
    rows = [
        {
            "name": name,
            "before": f"{one:.2f}",
            "after": f"{two:.2f}",
            "moved": f"{entry['numbers']['moved']:.2f}",
            "basis": entry["numbers"]["evidence"]["basis"],
            "verdict": plain_verdict(entry["numbers"]["certificate"]),
        }
        for name, one, two, entry in zip(names, before, after, entries, strict=True)
    ]
    chart = charts.costs(names, before, after, floor=None) if names else ""
    return {"names": names, "chart": chart, "rows": rows}


def _outliers(overview: Json) -> str:
    if not overview:
        return ""
    before, after = (", ".join(overview[f"outliers_{when}"]) or "none" for when in ("before", "after"))
    return f"Standing apart before: {before}; after: {after}."


def name_of(entry: Json) -> str:
    """Return what people call the picture of an entry: the last part of its path."""
    return str(entry["source"]["path"]).rsplit("/", 1)[-1]


def _picture(entry: Json, glimpse: Glimpse | None, *, drawn: bool) -> dict[str, Any]:
    numbers = entry["numbers"]
    certificate = numbers["certificate"]
    picture: dict[str, Any] = {
        "name": name_of(entry),
        "said": " ".join(entry["sentences"]),
        "charts": _charts(numbers["view"]) if drawn and "view" in numbers else [],
        "safe": certificate["safe"],
        "verdict": plain_verdict(certificate),
        "certificate": said(certificate),
        "evidence": evidence_facts(numbers["evidence"]),
    }
    return picture | ({} if glimpse is None else template_values(glimpse))


def _charts(view: Json) -> list[dict[str, Any]]:
    before, after, reference = view["before"], view["after"], view["reference"]
    reach = _reach([*before, *after, *reference])
    plan = np.array(view["plan"], dtype=np.float64)
    strips = "".join(
        charts.swatches([one["colour"] for one in groups], [one["weight"] for one in groups], title)
        for groups, title in ((before, "Palette before"), (after, "Palette after"), (reference, "Reference's palette"))
    )
    return [
        {
            "svg": strips,
            "caption": "Palettes by weight: before, after, reference",
            "columns": ("Palette", "Colour", "L*", "a*", "b*", "Share"),
            "rows": _palette_rows({"before": before, "after": after, "reference": reference}),
        },
        _cloud("before", before, reach),
        _cloud("after", after, reach),
        _cloud("reference", reference, reach),
        {
            "svg": charts.flows(
                plan, [one["colour"] for one in before], [one["colour"] for one in after], "Where each group went"
            ),
            "caption": "Where colour went: groups before (left), after (right)",
            "columns": ("From", "To", "Share of the picture"),
            "rows": [
                (before[i]["colour"], after[j]["colour"], f"{100 * plan[i, j]:.1f} %")
                for i, j in np.argwhere(plan > 0.002)
            ],
        },
        _curve(view["tone"], "Tone: lightness of grays, L*", (0.0, 100.0), ("L* in", "L* out")),
        _curve(view["chroma"], "Chroma: mean over hues at L* 60, C*ab", (0.0, 50.0), ("C* in", "C* out")),
    ]


def _series(overview: Json) -> list[dict[str, Any]]:
    """Return the charts of the series as a whole; none where the record has no overview."""
    if not overview:
        return []
    names = overview["names"]
    numbers = [f"{index} {name}" for index, name in enumerate(names, 1)]
    drawn: list[dict[str, Any]] = []
    for when in ("before", "after"):
        if not overview[f"distances_{when}"]:
            continue
        distances = np.array(overview[f"distances_{when}"])
        drawn.append(
            {
                "svg": charts.matrix(names, distances, f"How far the pictures are from each other {when}"),
                "caption": f"Sliced W2 between the pictures {when}, ΔE*ab; stronger is farther",
                "columns": ("Picture", *(str(index) for index in range(1, len(names) + 1))),
                "rows": [
                    (one, *(f"{value:.1f}" for value in row)) for one, row in zip(numbers, distances, strict=True)
                ],
            }
        )
    before, after = np.array(overview["map_before"]), np.array(overview["map_after"])
    share = f"{100 * overview['shown']:.0f} %"
    drawn.append(
        {
            "svg": charts.series_map(names, before, after, "Map of the series"),
            "caption": f"Map of the series, ring before, dot after; it shows {share} of the distances",
            "columns": ("Picture", "before, across", "before, up", "after, across", "after, up"),
            "rows": [
                (one, *(f"{value:.1f}" for value in (*a, *b))) for one, a, b in zip(numbers, before, after, strict=True)
            ],
        }
    )
    for key, label in (("lightness", "mean L*"), ("chroma", "mean C*ab")):
        a, b = (overview["traces"][when][key] for when in ("before", "after"))
        drawn.append(
            {
                "svg": charts.traces(a, b, f"{label} over the series", label=label),
                "caption": f"{label} over the series, rings before, dots after",
                "columns": ("Picture", "before", "after"),
                "rows": [(one, f"{x:.1f}", f"{y:.1f}") for one, x, y in zip(numbers, a, b, strict=True)],
            }
        )
    return drawn


def _reach(groups: Sequence[Json]) -> float:
    return float(max(10.0, max(max(abs(one["lab"][1]), abs(one["lab"][2])) for one in groups) * 1.15))


def _palette_rows(palettes: Mapping[str, Sequence[Json]]) -> list[tuple[str, ...]]:
    return [
        (name, one["colour"], *(f"{value:.1f}" for value in one["lab"]), f"{100 * one['weight']:.1f} %")
        for name, groups in palettes.items()
        for one in groups
    ]


def _cloud(name: str, groups: Sequence[Json], reach: float) -> dict[str, Any]:
    lab = np.array([one["lab"] for one in groups])
    colours, weights = [one["colour"] for one in groups], [one["weight"] for one in groups]
    return {
        "svg": charts.cloud(lab, colours, weights, f"Colours {name} in the a*b* plane", reach=reach),
        "caption": f"a*b* plane, {name}; larger means more of the picture",
        "columns": ("Colour", "L*", "a*", "b*", "Share"),
        "rows": [row[1:] for row in _palette_rows({name: groups})],
    }


def _curve(values: Json, caption: str, span: tuple[float, float], labels: tuple[str, str]) -> dict[str, Any]:
    return {
        "svg": charts.curve(values["in"], values["out"], caption, span=span, labels=labels),
        "caption": f"{caption}; dashed: no change",
        "columns": labels,
        "rows": [(f"{one:.1f}", f"{two:.1f}") for one, two in zip(values["in"][::2], values["out"][::2], strict=True)],
    }


def record_files(record: Json) -> list[Json]:
    """Return the facts of every file that a record names: references, inputs, outputs."""
    outputs = [entry["output"] for entry in record["entries"] if entry["output"] is not None]
    return [*record["references"], *(entry["source"] for entry in record["entries"]), *outputs]
