"""The document on formats says what the list of formats says; the matrix tests hold the list to the code."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

import hueferry
from hueferry.colour.scene import to_codes
from hueferry.errors import OutputError
from hueferry.files.formats import FORMATS, REFUSED, Format
from hueferry.files.probe import MOST_PIXELS
from hueferry.files.write import write
from hueferry.picture import Picture
from photographs import photograph

DOCUMENT = Path(hueferry.__file__).parents[2] / "docs" / "formats.md"
TURNS = {"exif": "in EXIF", "own": "in a field of its own", "upright": "written upright"}


def tables() -> list[list[list[str]]]:
    """Tables of the document, each a list of rows, each a list of cells; without the row of dashes."""
    found: list[list[list[str]]] = []
    before = ""
    for line in DOCUMENT.read_text(encoding="utf-8").splitlines():
        if line.startswith("|"):
            if not before.startswith("|"):
                found.append([])
            cells = [cell.strip() for cell in line.strip("|").split("|")]
            if not set("".join(cells)) <= set("-"):
                found[-1].append(cells)
        before = line
    return found


def row_of(one: Format) -> list[str]:
    back = "to the bit" if one.lossless else "≥ 45 dB"
    return [
        one.title,
        " ".join(one.suffixes),
        ", ".join("float" if depth == 32 else str(depth) for depth in one.depths),
        "yes" if one.alpha else "no",
        "yes" if one.gray else "as colour",
        back if one.writes else "read only",
        ", ".join(sorted(one.keeps)),
        TURNS[one.turn],
        f"`hueferry[{one.extra}]`" if one.extra else "",
    ]


@pytest.mark.parametrize("name", FORMATS)
def test_every_format_has_the_row_that_the_list_gives(name: str) -> None:
    assert row_of(FORMATS[name]) in tables()[0]


def test_no_row_is_of_a_format_that_is_not_there() -> None:
    read, refused, _ = tables()

    assert [row[0] for row in read[1:]] == [one.title for one in FORMATS.values()]
    assert refused[1:] == [[one.title, one.reason] for one in REFUSED]


def test_every_remark_stands_in_the_document() -> None:
    remarks = re.findall(r"^- (.+?): (.+)\.$", DOCUMENT.read_text(encoding="utf-8"), re.MULTILINE)

    assert [one for one in remarks if one[0] in {one.title for one in FORMATS.values()}] == [
        (one.title, one.remark) for one in FORMATS.values() if one.remark
    ]


def test_codes_of_light_are_those_of_the_document() -> None:
    lights, codes = tables()[2]
    values = np.array([0, 1 / 128, 0.18, 1, 16, 128])

    assert [f"{value:.4f}".replace("0.0000", "0") for value in to_codes(values)] == codes[1:]
    assert [re.split(r" \(", cell)[0] for cell in lights[1:]] == ["0", "1/128", "0.18", "1", "16", "128"]
    assert MOST_PIXELS == 1_000_000_000


def test_extras_are_those_of_the_package() -> None:
    stated = (Path(hueferry.__file__).parents[2] / "pyproject.toml").read_text(encoding="utf-8")

    for one in FORMATS.values():
        assert bool(one.extra) == bool(one.needs)
        if one.extra:
            package = one.needs.replace("_", "-")
            assert re.search(rf'^{one.extra} = \["{package}>=', stated, re.MULTILINE), one.extra


@pytest.mark.parametrize("name", [name for name, one in FORMATS.items() if not one.writes])
def test_what_is_read_only_is_not_written(name: str, tmp_path: Path) -> None:
    from hueferry.colour.encoding import SRGB

    with pytest.raises(OutputError, match="is not written"):
        write(Picture(photograph("china", step=16), SRGB), tmp_path / f"a{FORMATS[name].suffixes[0]}")
    assert FORMATS[FORMATS[name].written_as].writes
