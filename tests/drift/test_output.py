"""Table, CSV and picture of a chart: the same numbers, and nothing hostile alive."""

from __future__ import annotations

import csv
import io

import attrs
import pytest
from defusedxml.ElementTree import fromstring

from drift.series_of import readings
from hueferry.drift.chart import chart
from hueferry.drift.drawing import as_svg
from hueferry.drift.table import as_csv, rows

SVG = "{http://www.w3.org/2000/svg}"
DRIFTING = chart(readings(1, 30, monthly=0.5))
EVIL = "=HYPERLINK(1)<script>alert(1)</script>\x1b\n\u202e&\"'"


def test_a_row_a_reading_with_its_numbers() -> None:
    table = rows(DRIFTING)

    assert len(table) == 30
    assert table[4]["b"] == DRIFTING.readings[4].b
    assert table[4]["b_average"] == DRIFTING.traces[2].averages[4]
    assert table[4]["l_upper"] == DRIFTING.traces[0].level.centre + DRIFTING.traces[0].single_width
    assert table[0]["a_range"] is None
    assert table[5]["a_range"] == pytest.approx(abs(DRIFTING.readings[5].a - DRIFTING.readings[4].a), abs=1e-12)
    assert "b*" in str(table[-1]["alarm"])


def test_csv_reads_back_as_the_rows() -> None:
    back = list(csv.DictReader(io.StringIO(as_csv(DRIFTING), newline="")))

    assert len(back) == 30
    assert float(back[7]["l"]) == pytest.approx(DRIFTING.readings[7].l, rel=1e-5)
    assert back[7].keys() == rows(DRIFTING)[7].keys()


def test_no_cell_of_text_is_a_formula() -> None:
    evil = chart([attrs.evolve(r, device=EVIL, picture="@x", reference="-y") for r in readings(1, 10)])

    back = list(csv.DictReader(io.StringIO(as_csv(evil), newline="")))

    assert back[0]["device"] == "'" + EVIL
    assert (back[0]["picture"], back[0]["reference"]) == ("'@x", "'-y")


def test_few_readings_still_make_a_table_and_a_picture() -> None:
    few = chart(readings(1, 3))

    assert len(rows(few)) == 3
    assert few.sentence in "".join(fromstring(as_svg(few)).itertext())


def test_the_picture_says_what_it_shows() -> None:
    root = fromstring(as_svg(DRIFTING))

    assert root.get("role") == "img"
    assert root.find(f"{SVG}title").text == "Drift of scanner"
    assert root.find(f"{SVG}desc").text == DRIFTING.sentence


def test_the_picture_has_a_sign_for_every_reading_alarm_and_notice() -> None:
    root = fromstring(as_svg(DRIFTING))
    legend = 1

    def drawn(kind: str) -> int:
        return sum(element.get("class") == kind for element in root.iter()) - legend

    assert drawn("dot") == 3 * 30
    assert drawn("alarm") == sum(int(trace.alarms.sum()) for trace in DRIFTING.traces) > 0
    assert drawn("notice") == len({(n.reading, n.channel) for n in DRIFTING.notices}) > 0


def test_everything_is_inside_the_picture() -> None:
    root = fromstring(as_svg(DRIFTING))
    _, _, width, height = (float(v) for v in root.get("viewBox").split())

    for circle in root.findall(f"{SVG}circle"):
        assert 0 < float(circle.get("cx")) < width
        assert 0 < float(circle.get("cy")) < height


def test_hostile_names_are_text() -> None:
    svg = as_svg(chart([attrs.evolve(r, device=EVIL) for r in readings(1, 10)]))
    root = fromstring(svg)

    assert {element.tag for element in root.iter()}.isdisjoint({f"{SVG}script", "script"})
    assert "<script" not in svg
    assert "\x1b" not in svg
    assert "\u202e" not in svg
    assert "http" not in svg.replace("http://www.w3.org/2000/svg", "")


def test_readings_of_one_moment_are_drawn_side_by_side() -> None:
    same = [attrs.evolve(r, when=readings(1, 1)[0].when) for r in readings(1, 12)]

    places = {circle.get("cx") for circle in fromstring(as_svg(chart(same))).findall(f"{SVG}circle")}

    assert len(places) >= 12
