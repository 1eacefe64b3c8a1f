"""The report of a run on slides: cautions first, then stains, tissue, control figures and certificates."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from hueferry.errors import HueferryError
from hueferry.reports import charts
from hueferry.reports.page import NAME, asset, content_hash, name_of, record_files
from hueferry.reports.pictures import picture_address
from hueferry.reports.words import CAUTIONS, plain_verdict, said, setting_facts

Json = Mapping[str, Any]

_OVERLAY = 520
"""Longest side of the tissue overlay in the page, in pixels."""

_FIGURES = (
    ("glass, codes of 255", "glass_codes", "{:.0f}"),
    ("share of glass", "glass_share", "{:.1%}"),
    ("share of tissue", "tissue_share", "{:.1%}"),
    ("share of ink", "pen_share", "{:.1%}"),
    ("share of haze", "hazy_share", "{:.1%}"),
    ("sharpness", "sharpness", "{:.3f}"),
    ("angle between the stains, degrees", "stain_angle_degrees", "{:.1f}"),
    ("mean density, OD in R, G, B", "mean_density", "{:.3f}"),
)


def write_slide_page(record: Json, folder: Path) -> Path:
    """Write the page of a run on slides into its folder and return its path.

    Raises:
        OutputError: nothing can be written there.
    """
    from hueferry.files.atomic import write_bytes

    overlays = [_overlay(folder, entry) for entry in record["entries"]]
    return write_bytes(folder / NAME, render_slide_page(record, overlays).encode("utf-8"), overwrite=True)


def render_slide_page(record: Json, overlays: list[str]) -> str:
    """Return the page as HTML; every value of the record is escaped.

    Args:
        record: the JSON values of a record of `stain`.
        overlays: data addresses of the tissue overlays, empty where there is none.
    """
    from jinja2 import Environment, select_autoescape

    style = asset("report.css")
    environment = Environment(autoescape=select_autoescape(default=True, default_for_string=True))
    entries = record["entries"]
    compared = [entry for entry in entries if "cost_delta_e_after" in entry["numbers"]]
    names = [name_of(entry) for entry in compared]
    before, after = ([entry["numbers"][f"cost_delta_e_{when}"] for entry in compared] for when in ("before", "after"))
    count = len(entries)
    return environment.from_string(asset("slides.html.j2")).render(
        title=f"{count} slide{'' if count == 1 else 's'} brought together",
        lead=f"Stain and light were brought {record['sentences'][0]}; one certified map a slide, never one a tile.",
        cautions=CAUTIONS["stain"],
        names=names,
        chart=charts.costs(names, before, after, floor=None) if names else "",
        failures=record["failures"],
        slides=[_slide(entry, overlay) for entry, overlay in zip(entries, overlays, strict=True)],
        settings=setting_facts(record["settings"]),
        versions=sorted(record["versions"].items()),
        files=record_files(record),
        version=record["versions"].get("hueferry", ""),
        style=style,
        style_hash=content_hash(style),
    )


def _slide(entry: Json, overlay: str) -> dict[str, Any]:
    numbers = entry["numbers"]
    certificate = numbers["certificate"]
    return {
        "name": name_of(entry),
        "said": "; ".join(entry["sentences"]) + ".",
        "overlay": overlay,
        "vectors": _vectors(numbers["before"], numbers["after"]),
        "figures": _figures(numbers),
        "safe": certificate["safe"],
        "verdict": plain_verdict(certificate),
        "certificate": said(certificate),
    }


def _figures(numbers: Json) -> list[dict[str, str]]:
    rows = [
        {"name": label, "before": _shown(numbers["before"][key], form), "after": _shown(numbers["after"][key], form)}
        for label, key, form in _FIGURES
    ]
    for label, key, form in (("cost, ΔE*ab", "cost_delta_e", "{:.2f}"), ("cost, OD", "cost_density", "{:.3f}")):
        if f"{key}_after" in numbers:
            both = {when: _shown(numbers[f"{key}_{when}"], form) for when in ("before", "after")}
            rows.append({"name": label, **both})
    for label, key, form in (
        ("glass off its target, codes", "glass_off_target_codes", "{:.2f}"),
        ("clipped share of tissue", "clipped_share", "{:.2%}"),
        ("structure of the nuclear stain kept, SSIM", "nuclear_ssim", "{:.4f}"),
        ("gradients of the nuclear stain kept, correlation", "nuclear_gradient_correlation", "{:.4f}"),
    ):
        if key in numbers:
            rows.append({"name": label, "before": "", "after": _shown(numbers[key], form)})
    return rows


def _shown(value: Any, form: str) -> str:  # noqa: ANN401 - whatever JSON holds
    if value is None:
        return "–"
    return " ".join(form.format(one) for one in value) if isinstance(value, list) else form.format(value)


def _vectors(before: Json, after: Json) -> list[dict[str, str]]:
    if before["stain_vectors"] is None or after["stain_vectors"] is None:
        return []
    rows = []
    for index in range(2):
        vectors = [one["stain_vectors"][index] for one in (before, after)]
        amounts = [one["stain_amounts_99"][index] for one in (before, after)]
        colours = ["#{:02x}{:02x}{:02x}".format(*_colour_of(vector)) for vector in vectors]
        rows.append(
            {
                "name": f"stain {index + 1}",
                "swatch": charts.swatches(colours, [0.5, 0.5], f"Stain {index + 1} before and after"),
                "before": _shown(vectors[0], "{:.2f}"),
                "after": _shown(vectors[1], "{:.2f}"),
                "amount_before": f"{amounts[0]:.2f}",
                "amount_after": f"{amounts[1]:.2f}",
            }
        )
    return rows


def _colour_of(vector: list[float]) -> tuple[int, int, int]:
    """Return the 8-bit colour of a stain of density 0.7 on white glass."""
    codes = np.clip(np.rint(255 * 10 ** (-0.7 * np.array(vector))), 0, 255).astype(int)
    return int(codes[0]), int(codes[1]), int(codes[2])


def _overlay(folder: Path, entry: Json) -> str:
    from hueferry.files.read import read

    if entry["output"] is None:
        return ""
    stem = Path(str(entry["output"]["path"])).name
    for suffix in (".ome.zarr", ".ome.tif", ".tif"):
        stem = stem.removesuffix(suffix)
    try:
        return picture_address(read(folder / f"{stem}.tissue.png"), _OVERLAY)
    except HueferryError:
        return ""
