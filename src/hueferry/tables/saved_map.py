"""Any saved map as a table: our own, process lists of others, and decision lists."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import attrs

from hueferry.errors import InputError, MapFileError
from hueferry.tables.cdl_files import SUFFIXES, read_decision_list
from hueferry.tables.clf import table_and_misfit
from hueferry.tables.compose import compose, invert
from hueferry.tables.express import express
from hueferry.tables.misfit import Misfit
from hueferry.tables.process import ProcessList
from hueferry.tables.table import Table

_FROM_FILE = "computed from the operations in the file"


@attrs.frozen(eq=False)
class SavedMap:
    """A map that was read from a file, or made of such maps.

    Attributes:
        table: what is applied.
        misfit: how far the table is from what it was computed from; None where a file holds this very table.
        sentences: what a person should know of it.
    """

    table: Table
    misfit: Misfit | None = None
    sentences: tuple[str, ...] = ()


def _computed(found: tuple[Table, Misfit], source: str) -> SavedMap:
    table, misfit = found
    return SavedMap(table, misfit, (f"{source}: {misfit.sentence}",))


def read_map(path: Path, *, correction: str | None = None) -> SavedMap:
    """Read a map: `.cc`, `.ccc` and `.cdl` as decision lists, all else as CLF.

    Args:
        path: the file.
        correction: id of the correction in a file with several; None takes the only one.

    Raises:
        MapFileError: it cannot be read, is broken, or does what no table comes near enough to.
    """
    if path.suffix.lower() not in SUFFIXES:
        if correction is not None:
            raise MapFileError(path, "only collections of decision lists (.ccc, .cdl) hold corrections to choose from")
        table, misfit = table_and_misfit(path)
        return SavedMap(table) if misfit is None else _computed((table, misfit), f"{path.name}, {_FROM_FILE}")
    grade = read_decision_list(path, name=correction).grade
    try:
        return _computed(express(ProcessList((grade,), ("ASC_CDL",))), f"{path.name}, {_FROM_FILE}")
    except MapFileError:
        raise
    except InputError as error:
        raise MapFileError(path, f"it cannot be applied as a table: {error}") from error


def chain(maps: Sequence[SavedMap]) -> SavedMap:
    """Return maps one after another as one; a single map is itself.

    Raises:
        InputError: there is none, or no table comes near enough to them together.
    """
    if len(maps) == 1:
        return maps[0]
    both = _computed(compose([one.table for one in maps]), f"{len(maps)} maps put together")
    return attrs.evolve(both, sentences=(*(said for one in maps for said in one.sentences), *both.sentences))


def backwards(saved: SavedMap) -> SavedMap:
    """Return a map that undoes another.

    Raises:
        InputError: several codes share a result, or no table comes near enough.
    """
    undone = invert(saved.table)
    return SavedMap(
        undone.table,
        undone.misfit,
        (
            *saved.sentences,
            f"the map backwards, there and back again: {undone.misfit.sentence}",
            f"it knows the way back from {100 * undone.reached:.0f} % of all colours, and goes straight on beyond",
        ),
    )
