"""A chart as one SVG picture: plain, calm, readable in gray and by a screen reader.

Readings are dots, the weighted average is a line, its limits a band, single-reading limits dashes. An alarm is a
triangle and a notice a ring, so that nothing rests on colour alone.
"""

from __future__ import annotations

from collections.abc import Sequence
from html import escape

import numpy as np
from numpy.typing import NDArray

from hueferry.drift.chart import CHANNELS, Chart, Trace

Series = NDArray[np.float64]

_WIDTH, _PANEL, _LEFT, _RIGHT, _TOP, _GAP = 960, 190, 76, 24, 76, 40

_STYLE = """
svg { background: #e9e9e7; color: #2b2b29; font: 14px system-ui, sans-serif }
.frame { fill: none; stroke: currentColor; stroke-opacity: .25 }
.band { fill: currentColor; fill-opacity: .09 }
.single { stroke: currentColor; stroke-opacity: .55; stroke-dasharray: 5 4 }
.centre { stroke: currentColor; stroke-opacity: .45 }
.average { fill: none; stroke: currentColor; stroke-width: 2 }
.dot { fill: currentColor; fill-opacity: .55 }
.alarm { fill: #9c3d1e }
.notice { fill: none; stroke: currentColor; stroke-width: 1.4 }
text { fill: currentColor }
.small { font-size: 12px; fill-opacity: .75 }
@media (prefers-color-scheme: dark) {
  svg { background: #242423; color: #dcdcd8 }
  .alarm { fill: #f0a27f }
}
"""


def as_svg(chart: Chart) -> str:
    """Draw L*, a* and b* of one device over time, one panel below the other."""
    height = _TOP + len(chart.traces) * (_PANEL + _GAP) + 12
    title = f"Drift of {chart.device}" if chart.device else "Drift"
    parts = [
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {_WIDTH} {height}" role="img" '
        'aria-labelledby="drift-title drift-answer">',
        f'<title id="drift-title">{_text(title)}</title>',
        f'<desc id="drift-answer">{_text(chart.sentence)}</desc>',
        f"<style>{_STYLE}</style>",
        f'<text x="{_LEFT}" y="28" font-size="18">{_text(_short(title))}</text>',
        f'<text x="{_LEFT}" y="52">{_text(chart.sentence)}</text>',
    ]
    places = _places(chart)
    for number, trace in enumerate(chart.traces):
        parts += _panel(chart, trace, places, top=_TOP + number * (_PANEL + _GAP))
    return "\n".join([*parts, "</svg>"]) + "\n"


def _places(chart: Chart) -> Series:
    """Return the horizontal place of each reading: by date, and evenly where all dates are one."""
    times = np.array([reading.when.timestamp() for reading in chart.readings])
    if len(times) == 0 or times[-1] == times[0]:
        times = np.arange(float(len(times)))
    share = (times - times.min(initial=0.0)) / max(float(np.ptp(times)) if len(times) else 0.0, 1e-9)
    return np.asarray(_LEFT + 10 + share * (_WIDTH - _LEFT - _RIGHT - 20))


def _panel(chart: Chart, trace: Trace, places: Series, *, top: int) -> Sequence[str]:
    label, less, more = CHANNELS[trace.channel]
    centre, widths = trace.level.centre, trace.average_widths
    limits = [centre - trace.single_width, centre + trace.single_width]
    extent = np.concatenate([trace.values, limits, centre - widths, centre + widths])
    low, high = float(extent.min()), float(extent.max())
    margin = 0.08 * max(high - low, 0.1)

    def height_of(value: float | np.floating) -> float:
        share = (float(value) - low + margin) / (high - low + 2 * margin)
        return top + _PANEL * (1 - share)

    def line(values: Series) -> str:
        return " ".join(f"{x:.1f},{height_of(y):.1f}" for x, y in zip(places, values, strict=True))

    left, right = _LEFT, _WIDTH - _RIGHT
    parts = [
        f'<rect class="frame" x="{left}" y="{top}" width="{right - left}" height="{_PANEL}"/>',
        f'<polygon class="band" points="{line(centre + widths)} {_backwards(line(centre - widths))}"/>',
        _level_line("centre", height_of(centre)),
        *(_level_line("single", height_of(limit)) for limit in limits),
        f'<polyline class="average" points="{line(trace.averages)}"/>',
        f'<text x="{left - 8}" y="{top + 14}" text-anchor="end">{label}</text>',
        f'<text class="small" x="{left + 8}" y="{top + 16}">{more}</text>',
        f'<text class="small" x="{left + 8}" y="{top + _PANEL - 8}">{less}</text>',
        *(
            f'<text class="small" x="{left - 8}" y="{height_of(v) + 4:.1f}" text-anchor="end">{v:+.2f}</text>'
            for v in (*limits, centre)
        ),
        f'<text class="small" x="{left}" y="{top + _PANEL + 18}">{chart.readings[0].when:%Y-%m-%d}</text>',
        f'<text class="small" x="{right}" y="{top + _PANEL + 18}" text-anchor="end">'
        f"{chart.readings[-1].when:%Y-%m-%d}</text>",
    ]
    noticed = {notice.reading for notice in chart.notices if notice.channel == trace.channel}
    for index, (x, value) in enumerate(zip(places, trace.values, strict=True)):
        parts.append(f'<circle class="dot" cx="{x:.1f}" cy="{height_of(value):.1f}" r="3"/>')
        if index in noticed:
            parts.append(f'<circle class="notice" cx="{x:.1f}" cy="{height_of(value):.1f}" r="6"/>')
        if trace.alarms[index]:
            parts.append(_triangle(x, height_of(trace.averages[index])))
    return parts


def _level_line(kind: str, y: float) -> str:
    return f'<line class="{kind}" x1="{_LEFT}" x2="{_WIDTH - _RIGHT}" y1="{y:.1f}" y2="{y:.1f}"/>'


def _triangle(x: float, y: float) -> str:
    return f'<path class="alarm" d="M{x:.1f} {y - 7:.1f} l6 11 h-12 z"/>'


def _backwards(points: str) -> str:
    return " ".join(reversed(points.split(" ")))


def _short(text: str) -> str:
    return text if len(text) <= 80 else text[:79] + "…"


def _text(text: str) -> str:
    """Escape text for XML; characters that XML or a reader's eye cannot hold show as U+FFFD."""
    return escape("".join(c if c.isprintable() else "\ufffd" for c in text), quote=True)
