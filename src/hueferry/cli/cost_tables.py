"""Cost tables on the terminal."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from hueferry.cli.terminal import show_lines, show_table

Json = Mapping[str, Any]

_ROWS = (
    ("w2", "Wasserstein 2", "how far colour must move, root mean square"),
    ("w1", "Wasserstein 1", "how far colour must move, on average"),
    ("sliced_w2", "sliced W2", "the same seen along lines"),
    ("gaussian_w2", "Gaussian W2", "means and spreads alone"),
    ("sinkhorn_divergence", "Sinkhorn", "transport with blur, debiased"),
)


def show_cost(table: Json) -> None:
    """Print a cost table: every figure for one pair, a matrix for more pictures."""
    pairs = table["pairs"]
    if len(pairs) == 1:
        _show_pair(pairs[0], table["units"])
    else:
        _show_pairs(pairs, table)


def _show_pair(pair: Json, units: Json) -> None:
    rows = [(label, _number(pair[key]), str(units.get(key, "")), meaning) for key, label, meaning in _ROWS]
    rows += [
        (key.replace("_", " "), _number(pair[key]), str(units[key]), "")
        for key in units
        if key in pair and key not in {row[0] for row in _ROWS} and not isinstance(pair[key], Mapping | list)
    ]
    show_table(f"{pair['a']} → {pair['b']}", ("figure", "value", "unit", "says"), rows)
    if pair.get("verdict"):
        show_lines([pair["verdict"]])


def _show_pairs(pairs: Sequence[Json], table: Json) -> None:
    names = list(dict.fromkeys(name for pair in pairs for name in (pair["a"], pair["b"])))
    value = {(pair["a"], pair["b"]): pair["w2"] for pair in pairs}
    value |= {(b, a): cost for (a, b), cost in value.items()}
    labels = [f"{index + 1} {name}" for index, name in enumerate(names)]
    rows = [
        (label, *("·" if one == two else _number(value.get((one, two))) for two in names))
        for label, one in zip(labels, names, strict=True)
    ]
    heads = ("Wasserstein 2, ΔE*ab", *(str(index + 1) for index in range(len(names))))
    show_table("How far colour must move between the pictures", heads, rows)
    show_lines(table.get("sentences", []))


def _number(value: object) -> str:
    return "∞" if value is None else f"{value:.3f}" if isinstance(value, float) else str(value)
