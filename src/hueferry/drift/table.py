"""The numbers behind a chart, as rows and as CSV."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence

from hueferry.drift.chart import CHANNELS, Chart, Trace

Cell = str | float | None

_FORMULA = ("=", "+", "-", "@", "\t", "\r")


def rows(chart: Chart) -> list[Mapping[str, Cell]]:
    """Return one mapping a reading: date, names, shifts, averages, limits, alarms and notices."""
    return [_row(chart, index) for index in range(len(chart.readings))]


def as_csv(chart: Chart) -> str:
    """Return the rows as CSV (RFC 4180), with a first line of names.

    Text that a spreadsheet would take for a formula gets an apostrophe in front.
    """
    table = rows(chart)
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\r\n")
    if table:
        writer.writerow(table[0].keys())
    for row in table:
        writer.writerow([_plain(cell) for cell in row.values()])
    return text.getvalue()


def _row(chart: Chart, index: int) -> Mapping[str, Cell]:
    reading = chart.readings[index]
    first, second = reading.stain_angles or (None, None)
    row: dict[str, Cell] = {
        "when": reading.when.isoformat(),
        "device": reading.device,
        "picture": reading.picture,
        "reference": reading.reference,
        "w2": reading.w2,
        "first_stain_degrees": first,
        "second_stain_degrees": second,
    }
    for channel in CHANNELS:
        row[channel] = getattr(reading, channel)
    for trace in chart.traces:
        row |= _of_trace(trace, index)
    row["alarm"] = " ".join(CHANNELS[trace.channel][0] for trace in chart.traces if trace.alarms[index])
    row["notices"] = "; ".join(_words(chart, index))
    return row


def _of_trace(trace: Trace, index: int) -> Mapping[str, Cell]:
    centre, name = trace.level.centre, trace.channel
    return {
        f"{name}_centre": centre,
        f"{name}_lower": centre - trace.single_width,
        f"{name}_upper": centre + trace.single_width,
        f"{name}_range": float(trace.ranges[index - 1]) if index else None,
        f"{name}_range_upper": trace.range_limit,
        f"{name}_average": float(trace.averages[index]),
        f"{name}_average_lower": centre - float(trace.average_widths[index]),
        f"{name}_average_upper": centre + float(trace.average_widths[index]),
    }


def _words(chart: Chart, index: int) -> Sequence[str]:
    from hueferry.drift.rules import RULES

    return [f"{CHANNELS[n.channel][0]} {RULES[n.rule].words}" for n in chart.notices if n.reading == index]


def _plain(cell: Cell) -> str:
    if cell is None:
        return ""
    if isinstance(cell, float):
        return f"{cell:.6g}"
    return "'" + cell if cell.startswith(_FORMULA) else cell
