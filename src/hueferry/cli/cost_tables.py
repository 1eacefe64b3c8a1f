"""Cost tables on the terminal."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from hueferry.cli.terminal import show_lines, show_table

Json = Mapping[str, Any]

_MOVES = (
    ("w2", "Wasserstein 2", "root mean square of the cheapest way to carry all colour over"),
    ("w1", "Wasserstein 1", "mean of the cheapest way"),
    ("sliced_w2", "sliced W2", "the same, seen along lines through the colours"),
    ("gaussian_w2", "Gaussian W2", "means and spreads alone"),
    ("sinkhorn_divergence", "Sinkhorn divergence", "with a blur of 5, debiased"),
)
_APART = (
    ("jensen_shannon", "Jensen-Shannon", "nat, at most 0.693"),
    ("kl", "Kullback-Leibler, A from B", "nat"),
    ("kl_reverse", "Kullback-Leibler, B from A", "nat"),
    ("hellinger", "Hellinger", "0 … 1"),
    ("fisher_rao", "Fisher-Rao, histograms", "0 … 3.142"),
    ("normal_fisher_rao_l", "Fisher-Rao, normals of L*", "1"),
    ("normal_fisher_rao_a", "Fisher-Rao, normals of a*", "1"),
    ("normal_fisher_rao_b", "Fisher-Rao, normals of b*", "1"),
)
_WAYS = (("l", "L*", "lighter", "darker"), ("a", "a*", "redder", "greener"), ("b", "b*", "yellower", "bluer"))


def show_cost(table: Json) -> None:
    """Print a cost table: the figures of one pair, or a matrix for more pictures."""
    pairs = table["pairs"]
    if len(pairs) == 1:
        _show_pair(pairs[0])
    else:
        _show_pairs(pairs, table["comparison"])


def _show_pair(pair: Json) -> None:
    moves = [(label, _number(pair[key]), meaning) for key, label, meaning in _MOVES]
    show_table("How far colour must move, ΔE*ab (D50)", ("figure", "value", ""), moves, left=(0, 2))
    show_lines([f"A {pair['a']}", f"B {pair['b']}", f"B is {_way(pair)}.", pair["verdict"], ""])
    apart = [(label, _number(pair[key]), unit) for key, label, unit in _APART]
    show_table("How well the two can be told apart", ("figure", "value", "unit"), apart, left=(0, 2))


def _way(pair: Json) -> str:
    parts = []
    for key, name, more, less in _WAYS:
        step = pair[f"mean_shift_{key}"]
        parts.append(f"{abs(step):.1f} {name} {more if step >= 0 else less}")
    return ", ".join(parts) + " on average"


def _show_pairs(pairs: Sequence[Json], comparison: Json) -> None:
    names = comparison["names"]
    value = {(pair["a"], pair["b"]): pair["w2"] for pair in pairs}
    value |= {(b, a): cost for (a, b), cost in value.items()}
    rows = [
        (f"{index} {one}", *("·" if one == two else f"{value[one, two]:.1f}" for two in names))
        for index, one in enumerate(names, 1)
    ]
    heads = ("Wasserstein 2, ΔE*ab", *(str(index + 1) for index in range(len(names))))
    show_table("How far colour must move between the pictures", heads, rows)
    apart = [names[index] for index in comparison["outliers"]]
    show_lines(
        [
            "Most alike next to each other: " + ", ".join(names[index] for index in comparison["order"]) + ".",
            "Standing apart: " + (", ".join(apart) if apart else "none") + ".",
        ]
    )


def _number(value: float | None) -> str:
    return "∞" if value is None else f"{value:.3f}"
