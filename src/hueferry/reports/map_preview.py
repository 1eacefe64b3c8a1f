"""A picture of a map: what it does to grays, how much it stretches them, and where it carries colours."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.difference import delta_e_2000
from hueferry.files.canvas import Canvas, Colour, Point
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding
from hueferry.reports.map_facts import (
    Moved,
    chart_shape,
    gray_gains,
    gray_ramp,
    moved_chart,
    moved_palette,
    shown,
)
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

Floats = NDArray[np.float64]

PAPER: Colour = (250, 248, 244)
PANEL: Colour = (255, 255, 255)
INK: Colour = (38, 36, 33)
SOFT: Colour = (122, 116, 107)
RULE: Colour = (229, 224, 215)
BAND: Colour = (222, 214, 236)
EDGE: Colour = (110, 84, 160)
CHANNELS: tuple[tuple[str, Colour], ...] = (("R", (196, 64, 56)), ("G", (52, 134, 84)), ("B", (52, 98, 180)))

_WIDTH, _MARGIN, _GAP = 1560, 48, 24
_SIDE = (_WIDTH - 2 * _MARGIN - 2 * _GAP) / 3
_HEAD, _TOP_ROW, _CHART, _PALETTE = 132, 520, 470, 400
_STEPS = 256


@attrs.frozen
class Frame:
    """Where a plot lies, and what its axes span.

    Attributes:
        left: left side, pixels.
        top: upper side.
        width: its width.
        height: its height.
        low: smallest value of both axes' lower ends: (x, y).
        high: their upper ends.
    """

    left: float
    top: float
    width: float
    height: float
    low: Point
    high: Point

    def at(self, x: float, y: float) -> Point:
        """Return where a pair of values is drawn."""
        across = (x - self.low[0]) / (self.high[0] - self.low[0])
        up = (y - self.low[1]) / (self.high[1] - self.low[1])
        return self.left + across * self.width, self.top + (1 - up) * self.height

    def points(self, x: Floats, y: Floats) -> list[Point]:
        """Return where (n,) pairs are drawn, none outside the frame."""
        held = np.clip(y, self.low[1], self.high[1])
        return [self.at(a, b) for a, b in zip(x.tolist(), held.tolist(), strict=True)]


def draw_map(
    table: Table, encoding: Encoding, *, title: str, sentences: Sequence[str] = (), palette: Palette | None = None
) -> bytes:
    """Return the preview of a map as a PNG file.

    Args:
        table: the map.
        encoding: what its codes mean.
        title: what it is called.
        sentences: facts, of which the first few are shown.
        palette: colours of a picture, whose movement is shown too.
    """
    height = _MARGIN + _HEAD + _TOP_ROW + _GAP + _CHART + (0 if palette is None else _GAP + _PALETTE) + _MARGIN
    sheet = Canvas(_WIDTH, height, PAPER)
    _write_head(sheet, title, sentences)
    top = float(_MARGIN + _HEAD)
    chart = moved_chart(table, encoding)
    _draw_curves(sheet, table, encoding, (_MARGIN, top))
    _draw_gains(sheet, table, (_MARGIN + _SIDE + _GAP, top))
    third = (_MARGIN + 2 * (_SIDE + _GAP), top)
    _panel(sheet, third, (_SIDE, _TOP_ROW), "Where the chart goes", "a* to the right, b* up; from ring to dot")
    _draw_moves(sheet, chart, (third[0], top + 84), (_SIDE, _TOP_ROW - 104))
    top += _TOP_ROW + _GAP
    _draw_chart(sheet, chart, (_MARGIN, top))
    if palette is not None:
        _draw_palette(sheet, moved_palette(table, palette, encoding), (_MARGIN, top + _CHART + _GAP))
    return sheet.png()


def _write_head(sheet: Canvas, title: str, sentences: Sequence[str]) -> None:
    sheet.words((_MARGIN, _MARGIN + 34), title, INK, size=38)
    for line, sentence in enumerate(sentences[:3]):
        sheet.words((_MARGIN, _MARGIN + 64 + 22 * line), sentence, SOFT, size=16)


def _panel(sheet: Canvas, corner: Point, size: Point, title: str, subtitle: str) -> None:
    sheet.box(corner, size, PANEL, radius=10)
    sheet.words((corner[0] + 24, corner[1] + 38), title, INK, size=20)
    sheet.words((corner[0] + 24, corner[1] + 62), subtitle, SOFT, size=14)


def _draw_curves(sheet: Canvas, table: Table, encoding: Encoding, corner: Point) -> None:
    """What grays become, channel by channel, with the grays and their results in colour underneath."""
    _panel(sheet, corner, (_SIDE, _TOP_ROW), "What grays become", "result against gray, both in codes of 255")
    frame = Frame(corner[0] + 58, corner[1] + 88, _SIDE - 96, 318, (0.0, 0.0), (255.0, 255.0))
    _draw_grid(sheet, frame, [0, 64, 128, 192, 255], [0, 64, 128, 192, 255])
    _draw_dashed(sheet, frame.at(0, 0), frame.at(255, 255))
    ramp = gray_ramp(_STEPS)
    result = look_up(table, ramp)
    ends = _apart([frame.at(0, float(np.clip(255 * result[-1, i], 0, 255)))[1] for i in range(3)], 15.0)
    for i, (name, colour) in enumerate(CHANNELS):
        sheet.line(frame.points(255 * ramp[:, i], 255 * result[:, i]), colour, width=2.6)
        sheet.words((frame.left + frame.width + 9, ends[i]), name, colour, size=15, anchor="lm")
    for row, (codes, label) in enumerate(((ramp, "before"), (result, "after"))):
        top = frame.top + frame.height + 34 + 26 * row
        sheet.strip((frame.left, top), (frame.width, 22), shown(np.clip(codes, 0, 1), encoding))
        sheet.words((frame.left - 8, top + 11), label, SOFT, size=12, anchor="rm")


def _draw_gains(sheet: Canvas, table: Table, corner: Point) -> None:
    """How far neighbouring codes are pulled apart along gray: most and least, over all directions."""
    ramp = gray_ramp(_STEPS)
    most, least = gray_gains(table, ramp)
    _panel(sheet, corner, (_SIDE, _TOP_ROW), "How grays are stretched", "gain over all directions; noise grows by it")
    top_value = float(np.ceil(max(2.0, 1.1 * float(np.quantile(most, 0.99))) * 2) / 2)
    frame = Frame(corner[0] + 58, corner[1] + 88, _SIDE - 96, _TOP_ROW - 88 - 66, (0.0, 0.0), (255.0, top_value))
    _draw_grid(sheet, frame, [0, 64, 128, 192, 255], np.linspace(0, top_value, 5).tolist())
    x = 255 * ramp[:, 0]
    upper, lower = frame.points(x, most), frame.points(x, least)
    sheet.area([*upper, *lower[::-1]], BAND)
    _draw_dashed(sheet, frame.at(0, 1), frame.at(255, 1))
    sheet.line(upper, EDGE, width=2.6)
    sheet.line(lower, EDGE, width=1.4)
    said = f"most {most.max():.2f} at {x[most.argmax()]:.0f}, least {least.min():.2f} at {x[least.argmin()]:.0f}"
    sheet.words((frame.left, corner[1] + _TOP_ROW - 16), said, SOFT, size=14)


def _draw_grid(sheet: Canvas, frame: Frame, across: Sequence[float], up: Sequence[float]) -> None:
    for value in up:
        x, y = frame.at(frame.low[0], value)
        sheet.line([(x, y), (x + frame.width, y)], RULE)
        sheet.words((x - 8, y), f"{value:.4g}", SOFT, size=12, anchor="rm")
    for value in across:
        x, y = frame.at(value, frame.low[1])
        sheet.line([(x, y), (x, y - frame.height)], RULE)
        sheet.words((x, y + 18), f"{value:.4g}", SOFT, size=12, anchor="ms")


def _draw_dashed(sheet: Canvas, start: Point, end: Point) -> None:
    stops = np.linspace(0, 1, 61)
    for first, last in zip(stops[:-1:2], stops[1::2], strict=True):
        pair = [(start[0] + t * (end[0] - start[0]), start[1] + t * (end[1] - start[1])) for t in (first, last)]
        sheet.line(pair, SOFT)


def _apart(values: list[float], least: float) -> list[float]:
    """Return positions moved just so far that labels do not cover each other."""
    order = np.argsort(values)
    placed = np.array(values, dtype=np.float64)
    for before, after in pairwise(order):
        placed[after] = max(placed[after], placed[before] + least)
    return list(placed - (placed.mean() - float(np.mean(values))))


def _draw_moves(sheet: Canvas, moved: Moved, corner: Point, size: Point) -> None:
    """Draw a trail from each colour to its result, which has the colour of the result and the size of its share."""
    before, after = moved.lab()
    reach = max(float(np.quantile(np.abs(np.concatenate([before, after])[:, 1:]), 0.995)) * 1.1, 10.0)
    side = min(size) - 24
    frame = Frame(
        corner[0] + (size[0] - side) / 2, corner[1] + (size[1] - side) / 2, side, side, (-reach, -reach), (reach, reach)
    )
    _draw_rings(sheet, frame, reach)
    before_shown, after_shown = moved.shown()
    for i in np.argsort(-moved.weights, kind="stable"):
        start, end = (frame.at(*np.clip(lab[i, 1:], -reach, reach)) for lab in (before, after))
        radius = float(np.clip(3.2 * np.sqrt(moved.weights[i] * len(moved.weights)), 2.2, 11.0))
        sheet.line([start, end], (168, 162, 152), width=1.2)
        sheet.circle(start, 2.4, tuple((before_shown[i] * 0.75).astype(int).tolist()), width=1.1)
        sheet.dot(end, radius, tuple(after_shown[i].tolist()), ring=SOFT)


def _draw_rings(sheet: Canvas, frame: Frame, reach: float) -> None:
    step = next(s for s in (5, 10, 20, 40, 80, 160, 1e9) if reach / s <= 4)
    centre = frame.at(0, 0)
    for radius in np.arange(step, reach, step):
        sheet.circle(centre, radius / (2 * reach) * frame.width, RULE)
        sheet.words((centre[0] + 4, frame.at(0, radius)[1] - 3), f"{radius:.0f}", SOFT, size=11)
    sheet.line([frame.at(-reach, 0), frame.at(reach, 0)], RULE)
    sheet.line([frame.at(0, -reach), frame.at(0, reach)], RULE)


def _draw_chart(sheet: Canvas, chart: Moved, corner: Point) -> None:
    """Draw every patch of the chart cut across: before above the cut, after below."""
    width = _WIDTH - 2 * _MARGIN
    said = "upper left of each patch before, lower right after; " + _moved_by(chart)
    _panel(sheet, corner, (width, _CHART), "The chart, before and after", said)
    rows, columns = chart_shape()
    across, down = (width - 48) / columns, (_CHART - 84 - 24) / rows
    before, after = chart.shown()
    for index in range(rows * columns):
        left = corner[0] + 24 + (index % columns) * across
        top = corner[1] + 84 + (index // columns) * down
        wide, high = across - 5, down - 5
        sheet.box((left - 1, top - 1), (wide + 2, high + 2), RULE)
        sheet.area([(left, top), (left + wide, top), (left, top + high)], tuple(before[index].tolist()))
        sheet.area([(left + wide, top), (left + wide, top + high), (left, top + high)], tuple(after[index].tolist()))


def _draw_palette(sheet: Canvas, moved: Moved, corner: Point) -> None:
    """Draw a palette as two bands, before above after, each colour as wide as its share, and where it goes."""
    width = _WIDTH - 2 * _MARGIN
    said = "each colour as wide as its share; " + _moved_by(moved)
    _panel(sheet, corner, (width, _PALETTE), "The picture's palette", said)
    side = _PALETTE - 36.0
    band = width - side - 72
    before, after = moved.shown()
    edges = np.concatenate([[0.0], np.cumsum(moved.weights)]) * (band - 56) + corner[0] + 80
    height = (_PALETTE - 84 - 36) / 2
    for row, (label, colours) in enumerate((("before", before), ("after", after))):
        top = corner[1] + 88 + row * (height + 6)
        sheet.box((edges[0] - 1, top - 1), (edges[-1] - edges[0] + 2, height + 2), RULE)
        sheet.words((corner[0] + 72, top + height / 2), label, SOFT, size=13, anchor="rm")
        for left, right, colour in zip(edges[:-1], edges[1:], colours.tolist(), strict=True):
            sheet.box((left, top), (right - left + 0.5, height), tuple(colour))
    _draw_moves(sheet, moved, (corner[0] + width - side - 24, corner[1] + 18), (side, side))


def _moved_by(moved: Moved) -> str:
    before, after = moved.lab()
    distance = delta_e_2000(before, after)
    mean = float(moved.weights @ distance)
    return f"moved by {mean:.1f} on average and {distance.max():.1f} at most (CIEDE2000)"
