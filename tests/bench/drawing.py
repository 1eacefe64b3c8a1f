"""The benchmark as one SVG picture: a bar a ratio, with its spread and its bars."""

from __future__ import annotations

from html import escape
from math import log10
from typing import Any

_ROW, _LEFT, _WIDTH = 22, 470, 430
_LOW, _HIGH = 0.02, 60.0


def draw(kept: dict[str, Any]) -> str:
    """Return an SVG of all groups, on a logarithmic axis of ratios."""
    rows = [(name, row) for name, group in kept["groups"].items() for row in group]
    height = 60 + _ROW * len(rows)
    body = [_axis(height), *(_bar(number, row) for number, (_, row) in enumerate(rows))]
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {_LEFT + _WIDTH + 40} {height}" '
        f'font-family="sans-serif" font-size="11" role="img" aria-label="Ratios of the benchmark">\n'
        f'<rect width="100%" height="100%" fill="#ffffff"/>\n{"".join(body)}</svg>\n'
    )


def _at(ratio: float) -> float:
    share = (log10(min(max(ratio, _LOW), _HIGH)) - log10(_LOW)) / (log10(_HIGH) - log10(_LOW))
    return _LEFT + _WIDTH * share


def _axis(height: int) -> str:
    lines = []
    for tick in (0.03, 0.1, 0.3, 1, 3, 10, 30):
        x = _at(tick)
        lines.append(f'<line x1="{x:.1f}" x2="{x:.1f}" y1="30" y2="{height - 20}" stroke="#d8d8d8"/>\n')
        lines.append(f'<text x="{x:.1f}" y="22" text-anchor="middle" fill="#444444">{tick:g} ×</text>\n')
    return "".join(lines)


def _bar(number: int, row: dict[str, Any]) -> str:
    y = 36 + _ROW * number
    start, end = _at(_LOW), _at(row["median"])
    colour = "#2f6f8f" if row["holds"] else "#b0452f"
    parts = [
        f'<text x="{_LEFT - 8}" y="{y + 11}" text-anchor="end" fill="#222222">{escape(row["name"])}</text>\n',
        f'<rect x="{start:.1f}" y="{y + 2}" width="{max(end - start, 1):.1f}" height="12" fill="{colour}"/>\n',
        f'<line x1="{_at(row["low"]):.1f}" x2="{_at(row["high"]):.1f}" y1="{y + 8}" y2="{y + 8}" stroke="#111111" '
        f'stroke-width="2"/>\n',
        f'<text x="{end + 6:.1f}" y="{y + 12}" fill="#222222">{row["median"]:.2f}</text>\n',
    ]
    if row["must"] is not None:
        x = _at(row["must"])
        parts.append(
            f'<line x1="{x:.1f}" x2="{x:.1f}" y1="{y}" y2="{y + 16}" stroke="#111111" stroke-dasharray="2 2"/>\n'
        )
    return "".join(parts)
