"""A process list of the Common LUT Format as a function of colours, in double precision.

Everything that version 3.0 of the standard defines is evaluated; whatever else stands in a file is refused, because
leaving it out would give other colours than its author meant.

References:
    Academy S-2014-006, Common LUT Format, version 3.0; SMPTE ST 2136-1.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING

import attrs
import numpy as np

from hueferry.arrays import Codes
from hueferry.errors import MapFileError
from hueferry.tables.markup import children, local_name, parse_markup
from hueferry.tables.operations import Operation
from hueferry.tables.process_arrays import read_lut1d, read_lut3d, read_matrix, read_range
from hueferry.tables.process_formulas import read_cdl, read_exponent, read_log

if TYPE_CHECKING:
    from xml.etree.ElementTree import Element

DESCRIPTIVE = frozenset({"Description", "InputDescriptor", "OutputDescriptor", "Info"})
"""Elements of a list that say something about it and do nothing to colours."""

_SMPTE = "http://www.smpte-ra.org/ns/2136-1/2024"
_VERSIONS = frozenset({"1", "2", "3"})
_MOST_NODES = 64
_LARGEST = float(np.finfo(np.float32).max)

SCALES: Mapping[str, float] = MappingProxyType(
    {"8i": 255.0, "10i": 1023.0, "12i": 4095.0, "16i": 65535.0, "16f": 1.0, "32f": 1.0}
)
"""The code that stands for 1 at every bit depth."""

NodeReader = Callable[[Path, "Element", float, float], Operation]

READERS: Mapping[str, NodeReader] = MappingProxyType(
    {
        "Matrix": read_matrix,
        "Range": read_range,
        "LUT1D": read_lut1d,
        "LUT3D": read_lut3d,
        "Exponent": read_exponent,
        "Log": read_log,
        "ASC_CDL": read_cdl,
    }
)
"""What reads a node: of the file, the node, and the scales of its input and output."""

_ATTRIBUTES = frozenset({"id", "name", "inBitDepth", "outBitDepth"})
_OWN_ATTRIBUTES: Mapping[str, frozenset[str]] = MappingProxyType(
    {
        "Matrix": frozenset(),
        "Range": frozenset({"style"}),
        "LUT1D": frozenset({"interpolation", "halfDomain", "rawHalfs"}),
        "LUT3D": frozenset({"interpolation"}),
        "Exponent": frozenset({"style"}),
        "Log": frozenset({"style"}),
        "ASC_CDL": frozenset({"style"}),
    }
)
_CHILDREN: Mapping[str, frozenset[str]] = MappingProxyType(
    {
        "Matrix": frozenset({"Array"}),
        "Range": frozenset({"minInValue", "maxInValue", "minOutValue", "maxOutValue"}),
        "LUT1D": frozenset({"Array"}),
        "LUT3D": frozenset({"Array"}),
        "Exponent": frozenset({"ExponentParams"}),
        "Log": frozenset({"LogParams"}),
        "ASC_CDL": frozenset({"SOPNode", "SatNode"}),
    }
)


@attrs.frozen(eq=False)
class ProcessList:
    """Operations one after another.

    Attributes:
        operations: what is done to normalised codes, in order; at least one.
        names: what the nodes are called in the standard.
    """

    operations: tuple[Operation, ...]
    names: tuple[str, ...]

    @property
    def separable(self) -> bool:
        """Whether each channel of the result depends on its own channel alone."""
        return all(operation.separable for operation in self.operations)

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) normalised codes over; results are finite and not clipped to 0 … 1."""
        return run(self.operations, codes)

    def head(self) -> tuple[tuple[Operation, ...], tuple[Operation, ...]]:
        """Return the operations at the start that treat each channel by itself, and the rest."""
        count = next((i for i, operation in enumerate(self.operations) if not operation.separable), None)
        return (self.operations, ()) if count is None else (self.operations[:count], self.operations[count:])


def run(operations: tuple[Operation, ...], codes: Codes) -> Codes:
    """Carry (n, 3) normalised codes through operations; what 32 bits could not hold is held at what they can."""
    values = np.clip(np.nan_to_num(np.asarray(codes, dtype=np.float64)), -_LARGEST, _LARGEST)
    for operation in operations:
        with np.errstate(over="ignore", under="ignore", invalid="ignore"):
            values = np.clip(np.nan_to_num(operation(values)), -_LARGEST, _LARGEST)
    return values


def read_process(path: Path) -> ProcessList:
    """Read a CLF file as a function of colours.

    Raises:
        MapFileError: it is not CLF, is broken or too large, or holds something that the standard does not define.
    """
    return process_of(path, parse_markup(path, kind="CLF"))


def process_of(path: Path, root: Element) -> ProcessList:
    """Return what a parsed CLF file does to colours.

    Raises:
        MapFileError: as for `read_process`.
    """
    _check_root(path, root)
    nodes = [node for node in root if local_name(node) not in DESCRIPTIVE]
    if not 1 <= len(nodes) <= _MOST_NODES:
        raise MapFileError(path, f"a process list has 1 … {_MOST_NODES} nodes, and this one has {len(nodes)}")
    operations = []
    expected = None
    for node in nodes:
        _check_node(path, node)
        depths = [_depth(path, node, which) for which in ("inBitDepth", "outBitDepth")]
        if expected is not None and depths[0] != expected:
            raise MapFileError(
                path,
                f"its {local_name(node)} reads {depths[0]}, but the node before writes {expected}; they must agree",
            )
        expected = depths[1]
        operations.append(READERS[local_name(node)](path, node, SCALES[depths[0]], SCALES[depths[1]]))
    return ProcessList(tuple(operations), tuple(local_name(node) for node in nodes))


def _check_root(path: Path, root: Element) -> None:
    if local_name(root) != "ProcessList":
        raise MapFileError(path, f"it is not CLF: its root is {local_name(root)[:40]}, not ProcessList")
    version = (root.get("compCLFversion") or "").strip()
    if not version:
        raise MapFileError(path, "it does not say its CLF version (compCLFversion)")
    if version.split(".")[0] not in _VERSIONS:
        raise MapFileError(path, f"it is CLF version {version[:20]}, and versions up to 3.0 are read")
    if not root.get("id") and f"{{{_SMPTE}}}" not in str(root.tag):
        raise MapFileError(path, "its process list has no id, which the standard asks for")


def _check_node(path: Path, node: Element) -> None:
    name = local_name(node)
    if name not in READERS:
        known = ", ".join(READERS)
        raise MapFileError(path, f"it holds {name[:40]!r}, which the standard does not define; it defines {known}")
    strange = sorted(set(node.keys()) - _ATTRIBUTES - _OWN_ATTRIBUTES[name])
    if strange:
        raise MapFileError(
            path, f"its {name} has the attribute {strange[0][:40]!r}, which the standard does not define"
        )
    found = [local_name(child) for child in node]
    strange = sorted(set(found) - _CHILDREN[name] - {"Description"})
    if strange:
        raise MapFileError(path, f"its {name} holds {strange[0][:40]!r}, which the standard does not define")
    twice = [child for child in found if found.count(child) > 1 and not child.endswith(("Params", "Description"))]
    if twice:
        raise MapFileError(path, f"its {name} holds {twice[0]} twice")
    if "Array" in _CHILDREN[name] and next(children(node, "Array"), None) is None:
        raise MapFileError(path, f"its {name} has no array")


def _depth(path: Path, node: Element, which: str) -> str:
    depth = node.get(which)
    if depth is None or depth not in SCALES:
        raise MapFileError(path, f"its {local_name(node)} has {which} {depth!r}; it must be one of {', '.join(SCALES)}")
    return depth
