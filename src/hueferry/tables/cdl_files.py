"""Decision lists out of files: `.cc` with one correction, `.ccc` and `.cdl` with several.

References:
    Pines & Reisner (2009), ASC Color Decision List transfer functions and interchange syntax, version 1.2.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import attrs
import numpy as np

from hueferry.errors import InputError, MapFileError
from hueferry.tables.cdl import DecisionList, Grade, Style, Triple
from hueferry.tables.markup import children, local_name, numbers_of, parse_markup

if TYPE_CHECKING:
    from xml.etree.ElementTree import Element

SUFFIXES = frozenset({".cc", ".ccc", ".cdl"})
"""How the names of files with decision lists end."""

_ROOTS = frozenset({"ColorCorrection", "ColorCorrectionCollection", "ColorDecisionList"})
_PARTS = frozenset({"SOPNode", "SatNode", "SATNode", "Description", "InputDescription", "ViewingDescription"})
_MOST = 4096
_MOST_NAMED = 8


@attrs.frozen
class NamedGrade:
    """A correction of a file.

    Attributes:
        name: its id; empty if it has none.
        grade: what it does.
    """

    name: str
    grade: Grade


def read_decision_list(path: Path, *, name: str | None = None) -> NamedGrade:
    """Read the correction of a `.cc`, `.ccc` or `.cdl` file.

    Args:
        path: the file.
        name: id of the correction; None takes the only one.

    Raises:
        MapFileError: it is no such file, is broken, has no correction of that name, or has several and none was named.
    """
    root = parse_markup(path, kind="a decision list")
    if local_name(root) not in _ROOTS:
        raise MapFileError(path, f"it is no decision list: its root is {local_name(root)[:40]}")
    found = [element for element in root.iter() if local_name(element) == "ColorCorrection"]
    if not 1 <= len(found) <= _MOST:
        raise MapFileError(path, f"it holds {len(found)} corrections; 1 … {_MOST} are read")
    if name is not None:
        found = [element for element in found if element.get("id") == name]
        if not found:
            raise MapFileError(path, f"it holds no correction called {name!r}")
    if len(found) > 1:
        names = ", ".join(repr((element.get("id") or "")[:40]) for element in found[:_MOST_NAMED])
        raise MapFileError(path, f"it holds {len(found)} corrections; choose one by its id: {names}")
    strange = [local_name(part) for part in found[0] if local_name(part) not in _PARTS]
    if strange:
        raise MapFileError(path, f"its correction holds {strange[0][:40]!r}, which a decision list does not define")
    return NamedGrade(found[0].get("id") or "", read_grade(path, found[0], style=Style.FORWARD))


def read_grade(path: Path, element: Element, *, style: Style) -> Grade:
    """Return what the SOPNode and the SatNode in an element do; a missing one does nothing.

    Raises:
        MapFileError: a part is broken, or a number is out of its range.
    """
    sop = next(children(element, "SOPNode"), None)
    sat = next((child for name in ("SatNode", "SATNode") for child in children(element, name)), None)
    numbers = {}
    if sop is not None:
        numbers = {part.lower(): _triple(path, sop, part) for part in ("Slope", "Offset", "Power")}
    saturation = 1.0 if sat is None else float(_numbers(path, sat, "Saturation", 1)[0])
    try:
        return Grade(DecisionList(**numbers, saturation=saturation), style)
    except InputError as error:
        raise MapFileError(path, str(error)) from error


def _triple(path: Path, node: Element, part: str) -> Triple:
    red, green, blue = _numbers(path, node, part, 3).tolist()
    return red, green, blue


def _numbers(path: Path, node: Element, part: str, count: int) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    found = list(children(node, part))
    if len(found) != 1:
        raise MapFileError(path, f"its {local_name(node)} must have one {part}")
    numbers = numbers_of(path, found[0].text, where=part)
    if numbers.size != count:
        raise MapFileError(path, f"its {part} must be {count} numbers, and has {numbers.size}")
    return numbers
