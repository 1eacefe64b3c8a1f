"""A chart as one SVG picture: plain, calm, readable in gray and by a screen reader.

Readings are dots, the weighted average is a line, its limits a band, single-reading limits dashes. An alarm is a
triangle and a notice a ring, so that nothing rests on colour alone.
"""

from __future__ import annotations

from collections.abc import Iterator
from html import escape

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.drift.chart import CHANNELS, Chart, Trace

Series = NDArray[np.float64]

_WIDTH, _LEFT, _RIGHT = 960, 76, 24
_PANEL, _STRIP = 170, 44  # heights: readings, and their moving ranges below
_TOP, _HEAD, _FOOT = 66, 34, 30

_STYLE = """
svg { color: #2b2b29; font: 14px system-ui, sans-serif }
.ground { fill: #e9e9e7 }
.frame { fill: none; stroke: currentColor; stroke-opacity: .25 }
.band { fill: currentColor; fill-opacity: .09 }
.single { stroke: currentColor; stroke-opacity: .55; stroke-dasharray: 5 4 }
.centre { stroke: currentColor; stroke-opacity: .45 }
.average { fill: none; stroke: currentColor; stroke-width: 2 }
.dot { fill: currentColor; fill-opacity: .55 }
.alarm { fill: #9c3d1e }
polyline.range { fill: none; stroke: currentColor; stroke-opacity: .6 }
.notice { fill: none; stroke: currentColor; stroke-width: 1.4 }
text { fill: currentColor }
.small { font-size: 12px; fill-opacity: .75 }
@media (prefers-color-scheme: dark) {
  svg { color: #dcdcd8 }
  .ground { fill: #242423 }
  .alarm { fill: #f0a27f }
}
"""


def as_svg(chart: Chart) -> str:
    """Draw L*, a* and b* of one device over time, one panel below the other."""
    height = _TOP + len(chart.traces) * (_HEAD + _PANEL + _STRIP + _FOOT) + 36
    title = f"Drift of {chart.device}" if chart.device else "Drift"
    parts = [
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {_WIDTH} {height}" role="img" '
        'aria-labelledby="drift-title drift-answer">',
        f'<title id="drift-title">{_text(title)}</title>',
        f'<desc id="drift-answer">{_text(chart.sentence)}</desc>',
        f"<style>{_STYLE}</style>",
        f'<rect class="ground" width="{_WIDTH}" height="{height}"/>',
        f'<text x="{_LEFT}" y="28" font-size="18">{_text(_short(title))}</text>',
        f'<text x="{_LEFT}" y="52">{_text(chart.sentence)}</text>',
    ]
    places = _places(chart)
    for number, trace in enumerate(chart.traces):
        top = _TOP + number * (_HEAD + _PANEL + _STRIP + _FOOT)
        parts += [_heading(trace, top + 22), *_panel(chart, trace, places, top + _HEAD)]
        parts += _strip(chart, trace, places, top + _HEAD + _PANEL)
    return "\n".join([*parts, *_legend(height - 14), "</svg>"]) + "\n"


def _legend(y: int) -> list[str]:
    """Draw every sign once with its words."""
    signs = (
        ('<circle class="dot" cx="8" r="3"/>', "reading", 90),
        ('<path class="average" d="M0 0 h16"/>', "weighted average", 150),
        ('<rect class="band" width="16" height="10" y="-5"/>', "its limits", 100),
        ('<path class="single" d="M0 0 h16"/>', "limits of single readings and steps", 265),
        ('<path class="alarm" d="M8 -6 l6 11 h-12 z"/>', "alarm", 80),
        ('<circle class="notice" cx="8" r="6"/>', "worth a look", 0),
    )
    x, parts = _LEFT, []
    for sign, words, width in signs:
        parts.append(f'<g transform="translate({x} {y})">{sign}<text class="small" x="22" y="4">{words}</text></g>')
        x += width
    return parts


def _places(chart: Chart) -> Series:
    """Return the horizontal place of each reading: by date, and evenly where all dates are one."""
    times = np.array([reading.when.timestamp() for reading in chart.readings])
    if len(times) > 1 and times[-1] == times[0]:
        times = np.arange(float(len(times)))
    share = (times - times[:1]) / max(float(np.ptp(times)) if len(times) else 0.0, 1e-9)
    return np.asarray(_LEFT + 10 + share * (_WIDTH - _LEFT - _RIGHT - 20))


@attrs.frozen
class _Scale:
    """From a value to a height on the page."""

    low: float
    high: float
    top: int
    height: int

    @classmethod
    def around(cls, values: Series, top: int, height: int) -> _Scale:
        low, high = float(values.min()), float(values.max())
        margin = 0.08 * max(high - low, 0.1)
        return cls(low - margin, high + margin, top, height)

    def __call__(self, value: float) -> float:
        return self.top + self.height * (1 - (float(value) - self.low) / (self.high - self.low))

    def line(self, places: Series, values: Series) -> list[str]:
        return [f"{x:.1f},{self(y):.1f}" for x, y in zip(places, values, strict=True)]


def _heading(trace: Trace, y: int) -> str:
    label, less, more = CHANNELS[trace.channel]
    return f'<text x="{_LEFT}" y="{y}">{label} <tspan class="small">up is {more}, down is {less}</tspan></text>'


def _panel(chart: Chart, trace: Trace, places: Series, top: int) -> list[str]:
    centre, widths = trace.level.centre, trace.average_widths
    limits = [centre - trace.single_width, centre + trace.single_width]
    scale = _Scale.around(np.concatenate([trace.values, limits, centre - widths, centre + widths]), top, _PANEL)
    band = scale.line(places, centre + widths) + scale.line(places, centre - widths)[::-1]
    return [
        _frame(top, _PANEL),
        f'<polygon class="band" points="{" ".join(band)}"/>',
        _level_line("centre", scale(centre)),
        *(_level_line("single", scale(limit)) for limit in limits),
        f'<polyline class="average" points="{" ".join(scale.line(places, trace.averages))}"/>',
        *(_label(f"{value:+.2f}", scale(value)) for value in (*limits, centre)),
        *_marks(chart, trace, places, scale),
    ]


def _marks(chart: Chart, trace: Trace, places: Series, scale: _Scale) -> Iterator[str]:
    noticed = {notice.reading for notice in chart.notices if notice.channel == trace.channel}
    for index, (x, value) in enumerate(zip(places, trace.values, strict=True)):
        yield f'<circle class="dot" cx="{x:.1f}" cy="{scale(value):.1f}" r="3"/>'
        if index in noticed:
            yield f'<circle class="notice" cx="{x:.1f}" cy="{scale(value):.1f}" r="6"/>'
        if trace.alarms[index]:
            yield f'<path class="alarm" d="M{x:.1f} {scale(trace.averages[index]) - 7:.1f} l6 11 h-12 z"/>'


def _strip(chart: Chart, trace: Trace, places: Series, top: int) -> list[str]:
    """Draw the moving ranges: what limits rest on."""
    scale = _Scale.around(np.append(trace.ranges, [0.0, trace.range_limit]), top, _STRIP)
    y = top + _STRIP + 18
    first, last = (f"{chart.readings[index].when:%Y-%m-%d}" for index in (0, -1))
    return [
        _frame(top, _STRIP),
        _level_line("single", scale(trace.range_limit)),
        f'<polyline class="range" points="{" ".join(scale.line(places[1:], trace.ranges))}"/>',
        _label("step", top + _STRIP / 2),
        f'<text class="small" x="{_LEFT}" y="{y}">{first}</text>',
        f'<text class="small" x="{_WIDTH - _RIGHT}" y="{y}" text-anchor="end">{last}</text>',
    ]


def _frame(top: int, height: int) -> str:
    return f'<rect class="frame" x="{_LEFT}" y="{top}" width="{_WIDTH - _LEFT - _RIGHT}" height="{height}"/>'


def _label(text: str, y: float) -> str:
    return f'<text class="small" x="{_LEFT - 8}" y="{y + 4:.1f}" text-anchor="end">{text}</text>'


def _level_line(kind: str, y: float) -> str:
    return f'<line class="{kind}" x1="{_LEFT}" x2="{_WIDTH - _RIGHT}" y1="{y:.1f}" y2="{y:.1f}"/>'


def _short(text: str) -> str:
    return text if len(text) <= 80 else text[:79] + "…"


def _text(text: str) -> str:
    """Escape text for XML; characters that XML or a reader's eye cannot hold show as U+FFFD."""
    return escape("".join(c if c.isprintable() else "\ufffd" for c in text), quote=True)
