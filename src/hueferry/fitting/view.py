"""The numbers behind the pictures of a report: palette groups, where colour went, tone and chroma curves."""

from __future__ import annotations

from typing import Any

import numpy as np

from hueferry.colour.spaces import lab_to_xyz, oklab_to_lab, oklab_to_linear_srgb, xyz_to_lab
from hueferry.colour.transfer import linear_to_srgb
from hueferry.palettes.groups import group
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

_STEPS = 33
_HUES = np.linspace(0.0, 2 * np.pi, 24, endpoint=False)


def view_of(table: Table, encoding: Encoding, before: Palette, after: Palette, target: Palette) -> dict[str, Any]:
    """Return what a report draws of one fit, as JSON values.

    Args:
        table: the table that was applied.
        encoding: what it reads and writes.
        before: the picture's palette.
        after: the same colours through the table, in the same order.
        target: the reference's palette.
    """
    groups_before, label_before = group(before)
    groups_after, label_after = group(after)
    plan = np.zeros((len(groups_before), len(groups_after)))
    np.add.at(plan, (label_before, label_after), before.weights)
    return {
        "before": _groups(groups_before),
        "after": _groups(groups_after),
        "reference": _groups(group(target)[0]),
        "plan": [[round(float(mass), 5) for mass in row] for row in plan],
        "tone": _tone(table, encoding),
        "chroma": _chroma(table, encoding),
    }


def _groups(palette: Palette) -> list[dict[str, Any]]:
    lab = oklab_to_lab(palette.colours)
    codes = np.clip(np.rint(255 * linear_to_srgb(np.clip(oklab_to_linear_srgb(palette.colours), 0, 1))), 0, 255)
    return [
        {
            "colour": "#{:02x}{:02x}{:02x}".format(*(int(code) for code in rgb)),
            "lab": [round(float(value), 2) for value in row],
            "weight": round(float(weight), 5),
        }
        for rgb, row, weight in zip(codes, lab, palette.weights, strict=True)
    ]


def _tone(table: Table, encoding: Encoding) -> dict[str, list[float]]:
    grays = np.repeat(np.linspace(0.0, 1.0, _STEPS)[:, None], 3, axis=1)
    return {"in": _lightness(encoding, grays), "out": _lightness(encoding, np.clip(look_up(table, grays), 0.0, 1.0))}


def _lightness(encoding: Encoding, codes: np.ndarray[Any, np.dtype[np.float64]]) -> list[float]:
    return [round(float(value), 2) for value in xyz_to_lab(encoding.to_xyz(codes))[:, 0]]


def _chroma(table: Table, encoding: Encoding) -> dict[str, list[float]]:
    """Mean C*ab of 24 hues at L* = 60, for C*ab 0 … 40."""
    chroma = np.linspace(0.0, 40.0, 17)
    ring = np.stack([np.full_like(_HUES, 60.0), np.cos(_HUES), np.sin(_HUES)], axis=1)
    result = []
    for radius in chroma:
        lab = ring * np.array([1.0, radius, radius])
        codes = look_up(table, np.clip(encoding.from_xyz(lab_to_xyz(lab)), 0.0, 1.0))
        out = xyz_to_lab(encoding.to_xyz(np.clip(codes, 0.0, 1.0)))
        result.append(round(float(np.hypot(out[:, 1], out[:, 2]).mean()), 2))
    return {"in": [float(value) for value in chroma], "out": result}
