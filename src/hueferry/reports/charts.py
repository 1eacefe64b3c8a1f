"""Charts as plain SVG: small, sharp in print, readable without a script, each with a title for those who cannot see it.

Colours of the chart itself come from the page's style sheet (`currentColor` and custom properties), so that light,
dark and print follow; only swatches and clouds carry colours of pictures. Shape and text always say what colour says.
"""

from __future__ import annotations

from collections.abc import Sequence
from html import escape

import numpy as np
from numpy.typing import NDArray

Points = NDArray[np.float64]


def svg(width: int, height: int, title: str, body: Sequence[str], *, kind: str) -> str:
    """Wrap drawn elements as one SVG with an accessible name; `kind` is its CSS class."""
    return (
        f'<svg class="{kind}" viewBox="0 0 {width} {height}" role="img" aria-label="{escape(title, quote=True)}" '
        f'xmlns="http://www.w3.org/2000/svg">{"".join(body)}</svg>'
    )


def text(x: float, y: float, label: str, *, anchor: str = "start") -> str:
    """Draw a label; it is escaped."""
    return f'<text x="{x:.1f}" y="{y:.1f}" text-anchor="{anchor}">{escape(label)}</text>'


def line(x1: float, y1: float, x2: float, y2: float, kind: str = "rule") -> str:
    """Draw a straight line of the CSS class `kind`."""
    return f'<line class="{kind}" x1="{x1:.1f}" y1="{y1:.1f}" x2="{x2:.1f}" y2="{y2:.1f}"/>'


def path_through(points: Points, kind: str) -> str:
    """Draw a line through (n, 2) points."""
    steps = " L".join(f"{x:.1f} {y:.1f}" for x, y in points)
    return f'<path class="{kind}" d="M{steps}"/>'


def costs(names: Sequence[str], before: Sequence[float], after: Sequence[float], *, floor: float | None) -> str:
    """Draw each picture's cost before (ring) and after (dot), joined by a line, on one scale from 0.

    Args:
        names: pictures.
        before: costs before, ΔE*ab.
        after: costs after, ΔE*ab.
        floor: what noise alone costs, drawn as a dashed line; None leaves it out.
    """
    row, left, right = 24, 190, 610
    top_value = max([*before, *after, floor or 0.0, 1.0])
    step = _nice_step(top_value / 4)
    scale = (right - left) / (np.ceil(top_value / step) * step)
    height = 34 + row * len(names)
    body = []
    for tick in np.arange(0, top_value + step, step):
        x = left + tick * scale
        if x <= right + 1:
            body += [line(x, 8, x, height - 24), text(x, height - 8, f"{tick:g}", anchor="middle")]
    if floor is not None:
        body.append(line(left + floor * scale, 8, left + floor * scale, height - 24, "floor"))
    for index, (name, one, two) in enumerate(zip(names, before, after, strict=True)):
        y = 20 + index * row
        a, b = left + one * scale, left + two * scale
        body += [
            text(left - 10, y + 4, shortened(name, 26), anchor="end"),
            line(a, y, b, y, "travel"),
            f'<circle class="ring" cx="{a:.1f}" cy="{y}" r="5"/>',
            f'<circle class="dot" cx="{b:.1f}" cy="{y}" r="5"/>',
        ]
    return svg(640, height, "Transport cost of every picture before and after", body, kind="chart costs")


def shortened(name: str, length: int) -> str:
    """Shorten a name in its middle to at most `length` characters."""
    if len(name) <= length:
        return name
    head = (length - 1) // 2
    return f"{name[:head]}…{name[-(length - 1 - head) :]}"


def swatches(colours: Sequence[str], weights: Sequence[float], title: str) -> str:
    """Draw colours (CSS hex) next to each other, as wide as their weights."""
    body, x = [], 0.0
    for colour, weight in zip(colours, weights, strict=True):
        width = 640 * weight
        body.append(f'<rect x="{x:.2f}" y="0" width="{width + 0.4:.2f}" height="26" fill="{colour}"/>')
        x += width
    return svg(640, 26, title, body, kind="chart swatches")


def cloud(lab: Points, colours: Sequence[str], weights: Sequence[float], title: str, *, reach: float) -> str:
    """Draw palette groups in the a*b* plane, each as large as its weight; `reach` is the largest |a*|, |b*| shown."""
    half, scale = 110, 100 / reach
    ring_step = _nice_step(reach / 2)
    body = [line(10, half, 210, half), line(half, 10, half, 210)]
    body += [
        f'<circle class="rule" cx="{half}" cy="{half}" r="{radius * scale:.1f}" fill="none"/>'
        for radius in np.arange(ring_step, reach + 1e-9, ring_step)
    ]
    body += [text(206, half - 5, "a*", anchor="end"), text(half + 5, 18, "b*")]
    for (_, a, b), colour, weight in zip(lab, colours, weights, strict=True):
        radius = 2.5 + 14 * np.sqrt(weight)
        body.append(
            f'<circle class="blob" cx="{half + a * scale:.1f}" cy="{half - b * scale:.1f}" r="{radius:.1f}" '
            f'fill="{colour}"/>'
        )
    return svg(220, 220, title, body, kind="chart cloud")


def curve(
    x: Sequence[float], y: Sequence[float], title: str, *, span: tuple[float, float], labels: tuple[str, str]
) -> str:
    """Draw y over x with the diagonal of no change; both run over `span`, named by `labels`."""
    low, high = span
    scale = 180 / (high - low)
    points = np.stack([30 + (np.asarray(x) - low) * scale, 190 - (np.asarray(y) - low) * scale], axis=1)
    points[:, 1] = np.clip(points[:, 1], 6, 194)
    body = [
        line(30, 190, 210, 190),
        line(30, 10, 30, 190),
        line(30, 190, 210, 10, "floor"),
        path_through(points, "trace"),
        text(210, 206, labels[0], anchor="end"),
        text(34, 16, labels[1]),
    ]
    return svg(220, 212, title, body, kind="chart curve")


def flows(plan: NDArray[np.float64], source: Sequence[str], target: Sequence[str], title: str) -> str:
    """Draw where colour goes: a ribbon from every source group to every target group, as thick as the mass it carries.

    Args:
        plan: (n, m) mass, summing to 1.
        source: n CSS colours.
        target: m CSS colours.
        title: accessible name.
    """
    height, gap = 220.0, 3.0
    left, right = _stack(plan.sum(axis=1), height, gap), _stack(plan.sum(axis=0), height, gap)
    used_left, used_right = left[:, 0].copy(), right[:, 0].copy()
    body = []
    for i, j in np.argwhere(plan > 0.002):
        thick = plan[i, j] * (height - gap * max(plan.shape))
        a, b = used_left[i], used_right[j]
        body.append(
            f'<path class="ribbon" fill="{source[i]}" d="M24 {a:.1f} C120 {a:.1f} 120 {b:.1f} 216 {b:.1f} '
            f'L216 {b + thick:.1f} C120 {b + thick:.1f} 120 {a + thick:.1f} 24 {a + thick:.1f} Z"/>'
        )
        used_left[i] += thick
        used_right[j] += thick
    for (top, bottom), colour in zip(left, source, strict=True):
        body.append(f'<rect x="4" y="{top:.1f}" width="20" height="{max(bottom - top, 0.5):.1f}" fill="{colour}"/>')
    for (top, bottom), colour in zip(right, target, strict=True):
        body.append(f'<rect x="216" y="{top:.1f}" width="20" height="{max(bottom - top, 0.5):.1f}" fill="{colour}"/>')
    return svg(240, 226, title, body, kind="chart flows")


def _stack(shares: NDArray[np.float64], height: float, gap: float) -> NDArray[np.float64]:
    """Return (n, 2) top and bottom of bars on top of each other, with gaps, as high as their shares."""
    lengths = shares * (height - gap * len(shares))
    tops = np.concatenate([[0.0], np.cumsum(lengths + gap)[:-1]]) + 2
    return np.stack([tops, tops + lengths], axis=1)


def _nice_step(raw: float) -> float:
    """Return the step 1, 2 or 5 times a power of ten that is next above `raw`."""
    power = 10.0 ** np.floor(np.log10(max(raw, 1e-9)))
    return float(next(factor * power for factor in (1, 2, 5, 10) if factor * power >= raw - 1e-12))
