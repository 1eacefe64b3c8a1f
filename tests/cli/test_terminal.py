"""Hostile names are shown as they are, and results go to stdout alone."""

from __future__ import annotations

import json

import pytest

from hueferry.cli.terminal import plain, remark, show_json, show_table

HOSTILE = ["[red]x[/red]", "a\nb", "\x1b[31mred", "\u202egpj.exe", "\ud800", "tab\there", "[/b]"]


@pytest.mark.parametrize("name", HOSTILE)
def test_no_control_or_direction_character_reaches_the_terminal(name: str) -> None:
    shown = plain(name)

    assert shown.isprintable()
    shown.encode("utf-8")


def test_ordinary_names_are_left_alone() -> None:
    assert plain("Töpferei 陶 🏺.jpg") == "Töpferei 陶 🏺.jpg"


def test_a_table_prints_markup_literally_within_80_columns(capsys: pytest.CaptureFixture[str]) -> None:
    show_table("Costs", ("picture", "before"), [(name, "1.00") for name in HOSTILE] + [("x" * 200, "2.00")])

    out = capsys.readouterr().out

    assert "[red]x[/red]" in out
    assert "\x1b" not in out
    assert max(len(line) for line in out.splitlines()) <= 80


def test_remarks_stay_off_stdout(capsys: pytest.CaptureFixture[str]) -> None:
    remark("working")
    show_json({"a": [1, "é"]})

    captured = capsys.readouterr()

    assert captured.err == "working\n"
    assert json.loads(captured.out) == {"a": [1, "é"]}
