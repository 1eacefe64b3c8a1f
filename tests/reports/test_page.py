"""The report page: everything in one file, everything escaped, every number that of the record."""

from __future__ import annotations

import base64
import hashlib
import re
from html.parser import HTMLParser
from pathlib import Path

import pytest

from hueferry.errors import InputError
from hueferry.jobs import cost_table
from hueferry.record.record import read_record
from hueferry.reports.page import render_page, write_report
from reports.runs import HOSTILE, make_run, with_entries


class Elements(HTMLParser):
    """Counts elements, and collects attributes that could fetch or run something."""

    def __init__(self) -> None:
        super().__init__()
        self.counts: dict[str, int] = {}
        self.addresses: list[str] = []
        self.handlers: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.counts[tag] = self.counts.get(tag, 0) + 1
        for name, value in attrs:
            if name in ("src", "href", "action", "data", "xlink:href", "poster", "srcset"):
                self.addresses.append(value or "")
            if name.startswith("on"):
                self.handlers.append(name)


def elements(page: str) -> Elements:
    parser = Elements()
    parser.feed(page)
    return parser


@pytest.fixture(scope="module")
def run(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return make_run(tmp_path_factory.mktemp("report"))


def test_nothing_is_fetched_from_anywhere(run: Path) -> None:
    page = (run / "report.html").read_text(encoding="utf-8")

    found = elements(page)

    assert all(address.startswith(("data:image/jpeg;base64,", "#")) for address in found.addresses)
    assert not found.handlers
    assert "http://" not in page.replace("http://www.w3.org/2000/svg", "")
    assert "https://" not in page
    assert found.counts["script"] == 1
    assert found.counts["style"] == 1


def test_the_content_policy_allows_this_style_and_script_alone(run: Path) -> None:
    page = (run / "report.html").read_text(encoding="utf-8")
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', page)
    assert policy is not None
    directives = policy[1].replace("&#39;", "'")

    for tag in ("style", "script"):
        body = re.search(rf"<{tag}>(.*?)</{tag}>", page, re.DOTALL)
        assert body is not None
        digest = base64.b64encode(hashlib.sha256(body[1].encode()).digest()).decode()
        assert f"{tag}-src 'sha256-{digest}'" in directives
    assert directives.startswith("default-src 'none'")
    assert "unsafe" not in directives


def test_hostile_names_make_no_element(run: Path) -> None:
    tame = render_page(with_entries(run, [f"picture-{n}.png" for n in range(40)]), [None] * 40)
    hostile = render_page(with_entries(run, [HOSTILE[n % len(HOSTILE)] for n in range(40)]), [None] * 40)

    assert elements(hostile).counts == elements(tame).counts
    assert not elements(hostile).handlers


def test_tables_say_what_the_record_says(run: Path) -> None:
    page = (run / "report.html").read_text(encoding="utf-8")

    for entry in read_record(run)["entries"]:
        numbers = entry["numbers"]
        for value in (numbers["cost_before"]["w2"], numbers["cost_after"]["w2"], numbers["moved"]):
            assert f"<td>{value:.2f}</td>" in page
        assert entry["output"]["sha256"] in page


def test_every_chart_has_a_name_and_a_table(run: Path) -> None:
    page = (run / "report.html").read_text(encoding="utf-8")

    assert page.count("<svg") == page.count('role="img" aria-label="')
    assert page.count("<figure><svg") <= page.count("<summary>Table</summary>")


def test_the_page_is_rebuilt_byte_for_byte_from_the_record(run: Path) -> None:
    before = (run / "report.html").read_bytes()

    write_report(run)

    assert (run / "report.html").read_bytes() == before


def test_the_page_says_once_what_the_pictures_were_brought_towards(run: Path) -> None:
    page = (run / "report.html").read_text(encoding="utf-8")

    assert "Brought towards hero.png. The median" in page
    assert page.count("were solved together.") == 1


def test_a_record_whose_pictures_are_gone_still_makes_a_page(run: Path, tmp_path: Path) -> None:
    (tmp_path / "record.json").write_bytes((run / "record.json").read_bytes())

    page = write_report(tmp_path).read_text(encoding="utf-8")

    assert "data:image" not in page
    assert "brought together" in page


def test_five_hundred_pictures_stay_small(run: Path) -> None:
    """A page of 500 pictures stays below 15 MB: charts here, and half a megabyte for every hundred thumbnails."""
    page = render_page(with_entries(run, [f"{n}.png" for n in range(500)]), [None] * 500)

    assert len(page.encode()) < 13e6


def test_without_a_record_there_is_no_page(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="holds no record"):
        write_report(tmp_path)


def test_a_cost_table_becomes_a_page(run: Path, tmp_path: Path) -> None:
    shoot = sorted((run.parent / "shoot").glob("*.png"))

    table = cost_table(shoot, out=tmp_path / "cost")
    page = (tmp_path / "cost" / "cost.html").read_text(encoding="utf-8")

    assert len(table["pairs"]) == 3
    for pair in table["pairs"]:
        assert f"<td>{pair['w2']:.3f}</td>" in page
        assert f"<td>{pair['normal_kl']:.3f}</td>" in page
    assert not elements(page).addresses
    assert "https://" not in page
