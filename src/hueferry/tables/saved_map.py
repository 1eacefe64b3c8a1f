"""Any saved map as a table: our own, process lists of others, and decision lists."""

from __future__ import annotations

from pathlib import Path

import attrs

from hueferry.errors import InputError, MapFileError
from hueferry.tables.cdl_files import SUFFIXES, read_decision_list
from hueferry.tables.clf import table_and_misfit
from hueferry.tables.express import express
from hueferry.tables.misfit import Misfit
from hueferry.tables.process import ProcessList
from hueferry.tables.table import Table


@attrs.frozen(eq=False)
class SavedMap:
    """A map that was read from a file.

    Attributes:
        table: what is applied.
        misfit: how far the table is from what the file says; None where the file holds this very table.
    """

    table: Table
    misfit: Misfit | None = None

    @property
    def sentences(self) -> tuple[str, ...]:
        """What a person should know of it."""
        if self.misfit is None:
            return ()
        return (f"computed from the operations in the file: {self.misfit.sentence}",)


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
        return SavedMap(*table_and_misfit(path))
    grade = read_decision_list(path, name=correction).grade
    try:
        return SavedMap(*express(ProcessList((grade,), ("ASC_CDL",))))
    except MapFileError:
        raise
    except InputError as error:
        raise MapFileError(path, f"it cannot be applied as a table: {error}") from error
