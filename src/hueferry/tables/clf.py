"""Tables as Common LUT Format files: the saved form of a map, which other software reads too.

What is written: a `ProcessList` with a `LUT1D` for the input curves, where there are any, and a `LUT3D` with
tetrahedral interpolation stated, in 32-bit float, blue index changing fastest. The descriptors say what the codes
mean, and `Info` holds facts for people and a checksum of the numbers.

References:
    Academy S-2014-006 (Common LUT Format, version 3.0); SMPTE ST 2136-1.
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING
from xml.sax.saxutils import escape, quoteattr

import numpy as np
from numpy.typing import NDArray

from hueferry.errors import InputError, MapFileError
from hueferry.tables.express import express
from hueferry.tables.markup import children, parse_markup
from hueferry.tables.misfit import Misfit
from hueferry.tables.operations import Cube, Curves
from hueferry.tables.process import process_of
from hueferry.tables.table import Table

if TYPE_CHECKING:
    from xml.etree.ElementTree import Element

SCHEMA = "hueferry/map-1"
_NAMESPACE = "urn:AMPAS:CLF:v3.0"


def clf_text(table: Table, *, encoding: str, facts: Mapping[str, str] | None = None) -> str:
    """Return a table as CLF text; the same table and facts always give the same text.

    Args:
        table: the table.
        encoding: what its codes mean, for people, such as "sRGB".
        facts: names and values for `Info`, for people; plain text.
    """
    parts = [
        '<?xml version="1.0" encoding="UTF-8"?>',
        f'<ProcessList xmlns="{_NAMESPACE}" id="{_digest(table)[:32]}" name="hueferry map" compCLFversion="3.0">',
        "  <Description>Colour map by hueferry</Description>",
        f"  <InputDescriptor>{escape(encoding)}</InputDescriptor>",
        f"  <OutputDescriptor>{escape(encoding)}</OutputDescriptor>",
        "  <Info>",
        f"    <Schema>{SCHEMA}</Schema>",
        f"    <Checksum>{_digest(table)}</Checksum>",
        *(f"    <Fact name={quoteattr(_plain(k))}>{escape(_plain(v))}</Fact>" for k, v in (facts or {}).items()),
        "  </Info>",
    ]
    if table.curves is not None:
        steps = table.curves.shape[1]
        parts += [
            '  <LUT1D id="curves" inBitDepth="32f" outBitDepth="32f" interpolation="linear">',
            f'    <Array dim="{steps} 3">',
            *_rows(table.curves.T),
            "    </Array>",
            "  </LUT1D>",
        ]
    n = table.size
    parts += [
        '  <LUT3D id="lattice" inBitDepth="32f" outBitDepth="32f" interpolation="tetrahedral">',
        f'    <Array dim="{n} {n} {n} 3">',
        *_rows(table.lattice.reshape(-1, 3)),
        "    </Array>",
        "  </LUT3D>",
        "</ProcessList>",
    ]
    return "\n".join(parts) + "\n"


def _rows(values: NDArray[np.float32]) -> list[str]:
    return [f"{r:.9g} {g:.9g} {b:.9g}" for r, g, b in values.tolist()]


def _plain(text: str) -> str:
    return "".join(character for character in str(text) if character.isprintable())


def _digest(table: Table) -> str:
    numbers = b"" if table.curves is None else table.curves.astype("<f4").tobytes()
    return hashlib.sha256(numbers + table.lattice.astype("<f4").tobytes()).hexdigest()


def read_clf(path: Path) -> Table:
    """Read a CLF file as a table: ours to the bit, those of others as near as `read_map` says.

    Args:
        path: the file.

    Raises:
        MapFileError: the file is not CLF, is broken or too large, holds numbers that are not finite, does not match its
            checksum, or does what no table comes near enough to.
    """
    return table_and_misfit(path)[0]


def table_and_misfit(path: Path) -> tuple[Table, Misfit | None]:
    """Read a CLF file as a table, with its distance from the process list; None for ours, which are tables.

    Raises:
        MapFileError: as for `read_clf`.
    """
    root = parse_markup(path, kind="CLF")
    if any(_is_our_schema(info) for info in children(root, "Info")):
        return _own(path, root), None
    try:
        return express(process_of(path, root))
    except MapFileError:
        raise
    except InputError as error:
        raise MapFileError(path, f"it cannot be applied as a table: {error}") from error


def _is_our_schema(info: Element) -> bool:
    return any((schema.text or "") == SCHEMA for schema in children(info, "Schema"))


def _own(path: Path, root: Element) -> Table:
    process = process_of(path, root)
    if process.names not in (("LUT3D",), ("LUT1D", "LUT3D")):
        raise MapFileError(path, "it says that it is a map of ours, but its nodes are " + ", ".join(process.names))
    curves, lattice = (None, *process.operations)[-2:]
    if (
        not isinstance(lattice, Cube)
        or not lattice.is_tetrahedral
        or not (curves is None or isinstance(curves, Curves))
    ):
        raise MapFileError(path, "it says that it is a map of ours, but is to be read in another way")
    try:
        table = Table(lattice.lattice, None if curves is None else curves.values.T)
    except InputError as error:
        raise MapFileError(path, f"its numbers are no table: {error}") from error
    facts = [element.text or "" for info in children(root, "Info") for element in children(info, "Checksum")]
    if facts != [_digest(table)]:
        raise MapFileError(path, "its numbers do not match its checksum; the file was changed or damaged")
    return table
