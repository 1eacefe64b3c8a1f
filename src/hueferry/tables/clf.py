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
from hueferry.tables.table import Table

if TYPE_CHECKING:
    from xml.etree.ElementTree import Element

SCHEMA = "hueferry/map-1"
_LARGEST = 200 << 20
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
    """Read a CLF file as a table: ours to the bit, those of others by sampling what OpenColorIO makes of them.

    Args:
        path: the file.

    Raises:
        MapFileError: the file is not CLF, is broken or too large, holds numbers that are not finite, or does not match
            its checksum.
    """
    root = _parsed(path)
    nodes = [(_local(node), node) for node in root if _local(node) not in _DESCRIPTIVE]
    names = [name for name, _ in nodes]
    own = any(_local(node) == "Schema" and (node.text or "") == SCHEMA for node in root.iter())
    if not own:
        _check_finite(path, root)
        return _sampled(path)
    if names not in (["LUT3D"], ["LUT1D", "LUT3D"]):
        raise MapFileError(path, "it says that it is a map of ours, but its nodes are " + ", ".join(names))
    curves = _array(path, nodes[0][1], "LUT1D").T if len(nodes) == 2 else None
    lattice = _array(path, nodes[-1][1], "LUT3D")
    size = round(len(lattice) ** (1 / 3))
    try:
        table = Table(lattice.reshape(size, size, size, 3), curves)
    except (ValueError, InputError) as error:
        raise MapFileError(path, f"its numbers are no table: {error}") from error
    stated = next((node.text or "" for node in root.iter() if _local(node) == "Checksum"), "")
    if stated != _digest(table):
        raise MapFileError(path, "its numbers do not match its checksum; the file was changed or damaged")
    return table


_DESCRIPTIVE = frozenset({"Description", "InputDescriptor", "OutputDescriptor", "Info"})


def _parsed(path: Path) -> Element:
    from xml.etree.ElementTree import ParseError

    from defusedxml import DefusedXmlException
    from defusedxml.ElementTree import fromstring

    try:
        if path.stat().st_size > _LARGEST:
            raise MapFileError(path, f"it is larger than {_LARGEST >> 20} MB, which no map is")
        root = fromstring(path.read_bytes(), forbid_dtd=True)
    except FileNotFoundError as error:
        raise MapFileError(path, "there is no such file") from error
    except OSError as error:
        raise MapFileError(path, f"it cannot be read: {error.strerror or error}") from error
    except (ParseError, DefusedXmlException, ValueError, LookupError) as error:
        raise MapFileError(path, f"it is not CLF: {error}") from error
    if _local(root) != "ProcessList":
        raise MapFileError(path, f"it is not CLF: its root is {_local(root)}, not ProcessList")
    return root


def _local(node: Element) -> str:
    return str(node.tag).rsplit("}", 1)[-1]


def _array(path: Path, node: Element, kind: str) -> NDArray[np.float32]:
    array = next((child for child in node if _local(child) == "Array"), None)
    if array is None:
        raise MapFileError(path, f"its {kind} has no array")
    try:
        numbers = _numbers(array)
        dim = [int(part) for part in (array.get("dim") or "").split()]
    except (ValueError, OverflowError) as error:
        raise MapFileError(path, f"its {kind} holds something that is no number: {error}") from error
    if not dim or dim[-1] != 3 or any(part < 2 for part in dim) or numbers.size != int(np.prod(dim, dtype=np.int64)):
        raise MapFileError(path, f"its {kind} promises {dim} numbers and holds {numbers.size}")
    if not np.isfinite(numbers).all():
        raise MapFileError(path, f"its {kind} holds numbers that are not finite")
    return numbers.reshape(-1, 3)


def _numbers(node: Element) -> NDArray[np.float32]:
    with np.errstate(over="ignore"):  # what float32 cannot hold becomes infinite, and is refused as such
        return np.array((node.text or "").split(), dtype=np.float32)


def _check_finite(path: Path, root: Element) -> None:
    """Refuse arrays with numbers that are not finite: OpenColorIO would take NaN for 0 without a word."""
    for node in root.iter():
        if _local(node) != "Array":
            continue
        try:
            numbers = _numbers(node)
        except (ValueError, OverflowError) as error:
            raise MapFileError(path, f"an array holds something that is no number: {error}") from error
        if not np.isfinite(numbers).all():
            raise MapFileError(path, "an array holds numbers that are not finite")


def _sampled(path: Path) -> Table:
    """Sample somebody else's process list on a lattice of 65 nodes an axis, as OpenColorIO's processor computes it."""
    import PyOpenColorIO

    from hueferry.tables.build import sample_table

    PyOpenColorIO.ClearAllCaches()  # it remembers files by their path, and this one may have been written anew
    transform = PyOpenColorIO.FileTransform(src=str(path.resolve()), interpolation=PyOpenColorIO.INTERP_TETRAHEDRAL)
    try:
        processor = PyOpenColorIO.Config.CreateRaw().getProcessor(transform).getDefaultCPUProcessor()
    except PyOpenColorIO.Exception as error:
        reason = str(error).splitlines()[0][:200]
        raise MapFileError(path, f"it cannot be used: {reason}") from error

    def run(codes: NDArray[np.float64]) -> NDArray[np.float64]:
        values = np.ascontiguousarray(codes, dtype=np.float32)
        processor.applyRGB(values)
        return values.astype(np.float64)

    return sample_table(run, size=65)
