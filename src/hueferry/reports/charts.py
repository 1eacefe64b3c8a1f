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


def matrix(names: Sequence[str], distances: NDArray[np.float64], title: str) -> str:
    """Draw distances as squares, stronger ink for farther apart, with the number in every square.

    Args:
        names: n pictures; numbered in the order given.
        distances: (n, n), symmetric.
        title: accessible name.
    """
    cell, left, top = 40, 150, 22
    largest = max(float(distances.max()), 1e-9)
    body = []
    for i, name in enumerate(names):
        body += [
            text(left - 8, top + i * cell + 25, f"{shortened(name, 17)} {i + 1}", anchor="end"),
            text(left + i * cell + 20, 14, str(i + 1), anchor="middle"),
        ]
        for j in range(len(names)):
            x, y, share = left + j * cell, top + i * cell, distances[i, j] / largest
            body.append(
                f'<rect class="square" x="{x}" y="{y}" width="38" height="38" fill-opacity="{0.75 * share:.2f}"/>'
            )
            if i != j:
                kind = "light" if share > 0.6 else "dark"
                body.append(
                    f'<text class="{kind}" x="{x + 19}" y="{y + 24}" text-anchor="middle">{distances[i, j]:.1f}</text>'
                )
    return svg(left + cell * len(names), top + cell * len(names), title, body, kind="chart matrix")


def series_map(names: Sequence[str], before: Points, after: Points, title: str) -> str:
    """Draw every picture before (ring) and after (dot) on two axes, joined by a line; one scale for both axes."""
    width, height, margin = 640, 380, 34
    every = np.concatenate([before, after])
    low, span = every.min(axis=0), np.maximum(np.ptp(every, axis=0), 1e-9)
    scale = min((width - 2 * margin - 90) / span[0], (height - 2 * margin) / span[1])

    def place(points: Points) -> Points:
        return np.stack(
            [margin + (points[:, 0] - low[0]) * scale, height - margin - (points[:, 1] - low[1]) * scale], 1
        )

    step = _nice_step(span[0] / 5)
    body = [
        line(margin, height - 12, margin + step * scale, height - 12, "travel"),
        text(margin + step * scale + 8, height - 8, f"{step:g} ΔE*ab"),
    ]
    for index, ((x1, y1), (x2, y2)) in enumerate(zip(place(before), place(after), strict=True)):
        body += [
            line(x1, y1, x2, y2, "rule"),
            f'<circle class="ring" cx="{x1:.1f}" cy="{y1:.1f}" r="5"/>',
            f'<circle class="dot" cx="{x2:.1f}" cy="{y2:.1f}" r="5"/>',
            text(x1 + 8, y1 - 7, shortened(names[index], 18)),
        ]
    return svg(width, height, title, body, kind="chart series")


def traces(before: Sequence[float], after: Sequence[float], title: str, *, label: str) -> str:
    """Draw a value over the series, before (rings) and after (dots)."""
    width, height, left, bottom = 640, 190, 46, 26
    every = [*before, *after]
    low, high = min(every) - 1, max(every) + 1
    across = (width - left - 20) / max(len(before) - 1, 1)

    def points(values: Sequence[float]) -> Points:
        rise = (np.array(values) - low) / (high - low) * (height - bottom - 20)
        return np.stack([left + np.arange(len(values)) * across, height - bottom - rise], axis=1)

    body = [line(left, 10, left, height - bottom), line(left, height - bottom, width - 20, height - bottom)]
    body += [
        text(left - 6, height - bottom, f"{low:.0f}", anchor="end"),
        text(left - 6, 20, f"{high:.0f}", anchor="end"),
    ]
    body += [
        text(left + 6, 18, label),
        path_through(points(before), "trace thin"),
        path_through(points(after), "trace"),
    ]
    for kind, values in (("ring", before), ("dot", after)):
        body += [f'<circle class="{kind}" cx="{x:.1f}" cy="{y:.1f}" r="4"/>' for x, y in points(values)]
    body += [text(x, height - 8, str(i + 1), anchor="middle") for i, (x, _) in enumerate(points(before))]
    return svg(width, height, title, body, kind="chart traces")


def _stack(shares: NDArray[np.float64], height: float, gap: float) -> NDArray[np.float64]:
    """Return (n, 2) top and bottom of bars on top of each other, with gaps, as high as their shares."""
    lengths = shares * (height - gap * len(shares))
    tops = np.concatenate([[0.0], np.cumsum(lengths + gap)[:-1]]) + 2
    return np.stack([tops, tops + lengths], axis=1)


def _nice_step(raw: float) -> float:
    """Return the step 1, 2 or 5 times a power of ten that is next above `raw`."""
    power = 10.0 ** np.floor(np.log10(max(raw, 1e-9)))
    return float(next(factor * power for factor in (1, 2, 5, 10) if factor * power >= raw - 1e-12))
