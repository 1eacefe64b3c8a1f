"""XML of others, read safely: no entities, no document types, a bounded size, and numbers that are finite."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from hueferry.errors import MapFileError

if TYPE_CHECKING:
    from xml.etree.ElementTree import Element

_LARGEST = 200 << 20
_DEEPEST = 64
_GREATEST = float(np.finfo(np.float32).max)


def parse_markup(path: Path, *, kind: str) -> Element:
    """Return the root element of a file.

    Args:
        path: the file.
        kind: what it should be, for the complaint if it is not: "CLF".

    Raises:
        MapFileError: it cannot be read, is too large or too deep, is not XML, or declares a document type or entities.
    """
    from xml.etree.ElementTree import ParseError

    from defusedxml import DefusedXmlException
    from defusedxml.ElementTree import fromstring

    try:
        if not path.is_file():
            raise MapFileError(path, "this is a folder" if path.is_dir() else "there is no such file")
        if path.stat().st_size > _LARGEST:
            raise MapFileError(path, f"it is larger than {_LARGEST >> 20} MB, which no map is")
        root: Element = fromstring(path.read_bytes(), forbid_dtd=True)
    except (OSError, ValueError) as error:
        if isinstance(error, DefusedXmlException):
            raise MapFileError(path, f"it is not {kind}: it declares a document type or entities") from error
        raise MapFileError(path, f"it cannot be read: {getattr(error, 'strerror', None) or error}") from error
    except (ParseError, LookupError) as error:
        raise MapFileError(path, f"it is not {kind}: {error}") from error
    _check_depth(path, root, kind)
    return root


def _check_depth(path: Path, root: Element, kind: str) -> None:
    level = [root]
    for _ in range(_DEEPEST):
        level = [child for element in level for child in element]
        if not level:
            return
    raise MapFileError(path, f"it is not {kind}: its elements are nested more than {_DEEPEST} deep")


def local_name(element: Element) -> str:
    """Return the name of an element without its namespace."""
    return str(element.tag).rsplit("}", 1)[-1]


def children(element: Element, name: str) -> Iterator[Element]:
    """Yield the children of that name, in whatever namespace."""
    return (child for child in element if local_name(child) == name)


def numbers_of(path: Path, text: str | None, *, where: str) -> NDArray[np.float64]:
    """Return the numbers of a text.

    Args:
        path: the file, for complaints.
        text: numbers with white space between them.
        where: what holds them, for complaints.

    Raises:
        MapFileError: something is no number, or none that 32 bits can hold.
    """
    try:
        numbers = np.array((text or "").split(), dtype=np.float64)
    except (ValueError, OverflowError) as error:
        raise MapFileError(path, f"its {where} holds something that is no number: {error}") from error
    return finite(path, numbers, where=where)


def finite(path: Path, numbers: NDArray[np.float64], *, where: str) -> NDArray[np.float64]:
    """Return the numbers, all of which 32 bits can hold.

    Raises:
        MapFileError: some are not.
    """
    if not (np.abs(numbers) <= _GREATEST).all():
        raise MapFileError(path, f"its {where} holds numbers that are not finite")
    return numbers


def attribute_number(path: Path, element: Element, name: str, default: float | None = None) -> float:
    """Return an attribute that must be one finite number.

    Raises:
        MapFileError: it is missing and has no default, or is no such number.
    """
    where = f"{local_name(element)} attribute {name}"
    text = element.get(name)
    if text is None:
        if default is None:
            raise MapFileError(path, f"its {local_name(element)} lacks the attribute {name}")
        return default
    numbers = numbers_of(path, text, where=where)
    if numbers.size != 1:
        raise MapFileError(path, f"its {where} must be one number, not {text[:40]!r}")
    return float(numbers[0])
