"""How results and remarks reach a terminal, a pipe or a log.

Results go to stdout and everything else to stderr. File names are hostile: they are shown literally, without markup
and without control or direction characters.
"""

from __future__ import annotations

import json
import sys
import unicodedata
from collections.abc import Mapping, Sequence
from typing import Any

_REPLACED = {"Cc", "Cf", "Cs", "Zl", "Zp"}


def plain(text: object) -> str:
    """Return text that a terminal shows as it is: control, direction and surrogate characters become escapes."""
    return "".join(
        character
        if unicodedata.category(character) not in _REPLACED
        else character.encode("unicode_escape").decode("ascii")
        for character in str(text)
    )


def remark(text: str) -> None:
    """Print one plain line to stderr."""
    print(plain(text), file=sys.stderr, flush=True)  # noqa: T201 - the terminal's home


def show_json(value: Mapping[str, Any]) -> None:
    """Print a result as JSON to stdout."""
    json.dump(value, sys.stdout, indent=2, ensure_ascii=True, allow_nan=False)
    sys.stdout.write("\n")


def show_lines(lines: Sequence[str]) -> None:
    """Print plain lines to stdout."""
    for line in lines:
        sys.stdout.write(plain(line) + "\n")


def show_table(
    title: str, columns: Sequence[str], rows: Sequence[Sequence[str]], *, left: Sequence[int] = (0,)
) -> None:
    """Print a table to stdout, at most 80 columns wide if that is not a terminal.

    Args:
        title: what the table shows, with its unit.
        columns: headings.
        rows: cells, as many in each row as there are headings.
        left: numbers of the columns that are flush left; the others are flush right.
    """
    from rich import box
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    console = Console(highlight=False, width=None if sys.stdout.isatty() else 80)
    table = Table(title=Text(title), title_justify="left", box=box.SIMPLE_HEAD, pad_edge=False)
    for index, column in enumerate(columns):
        table.add_column(
            Text(column), justify="left" if index in left else "right", overflow="fold" if index in left else "ellipsis"
        )
    for row in rows:
        table.add_row(*(Text(plain(cell)) for cell in row))
    console.print(table)
