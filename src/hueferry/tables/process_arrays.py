"""Process nodes with numbers in arrays, out of a file: Matrix, Range, LUT1D and LUT3D.

The numbers in a file are scaled by bit depths; what comes back works on normalised codes.

References:
    Academy S-2014-006, Common LUT Format, version 3.0; SMPTE ST 2136-1.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from hueferry.errors import MapFileError
from hueferry.tables.markup import children, finite, local_name, numbers_of
from hueferry.tables.operations import HALVES, Cube, Curves, HalfCurves, Matrix, Operation, Range

if TYPE_CHECKING:
    from xml.etree.ElementTree import Element

Floats = NDArray[np.float64]
_LONGEST = 1 << 16
_MOST_NODES = 129
_AGREES = 1e-5


def read_matrix(path: Path, node: Element, reads: float, writes: float) -> Operation:
    """Read a Matrix; its numbers carry the scales of both depths, its offsets that of the output."""
    array, dim = _array(path, node)
    # Versions before 3.0 had a third number, which the standard lets readers pass over.
    if dim[:2] not in ((3, 3), (3, 4)) or len(dim) > 3:
        raise MapFileError(path, f"its Matrix is {_spaced(dim)}; it must be 3 3 or 3 4")
    numbers = _shaped(path, node, finite(path, array, where="Matrix"), dim[:2])
    offset = numbers[:, 3] / writes if dim[1] == 4 else np.zeros(3)
    return Matrix(numbers[:, :3] * (reads / writes), offset)


def read_range(path: Path, node: Element, reads: float, writes: float) -> Operation:
    """Read a Range: a scale between two pairs of values, or a clamp at one end."""
    style = (node.get("style") or "Clamp").lower()
    if style not in ("clamp", "noclamp"):
        raise MapFileError(path, f"its Range has style {style[:40]!r}; it must be Clamp or noClamp")
    low = _pair(path, node, "min", reads, writes)
    high = _pair(path, node, "max", reads, writes)
    if low is None and high is None:
        raise MapFileError(path, "its Range has neither minimum nor maximum values")
    if low is None or high is None:
        return _one_sided(path, low, high, style)
    if high[0] <= low[0] or high[1] < low[1]:
        raise MapFileError(path, "its Range ends before it begins: a maximum must be more than its minimum")
    scale = (high[1] - low[1]) / (high[0] - low[0])
    offset = low[1] - low[0] * scale
    return Range(scale, offset) if style == "noclamp" else Range(scale, offset, low[1], high[1])


def _one_sided(path: Path, low: tuple[float, float] | None, high: tuple[float, float] | None, style: str) -> Operation:
    if style == "noclamp":
        raise MapFileError(path, "its Range has one pair of values and does not clamp; the standard forbids that")
    read, written = low or high or (0.0, 0.0)
    if abs(read - written) > _AGREES * max(1.0, abs(read)):
        raise MapFileError(path, "its Range has one pair of values, and they differ; the standard forbids that")
    return Range(lowest=written) if low is not None else Range(highest=written)


def _pair(path: Path, node: Element, end: str, reads: float, writes: float) -> tuple[float, float] | None:
    """Return the normalised input and output value of one end, or None if neither is there."""
    found = [next(children(node, f"{end}{side}Value"), None) for side in ("In", "Out")]
    if found == [None, None]:
        return None
    values = []
    for element, scale in zip(found, (reads, writes), strict=True):
        numbers = np.zeros(0) if element is None else numbers_of(path, element.text, where="Range")
        if numbers.size != 1:
            raise MapFileError(path, f"its Range must have one {end}InValue and one {end}OutValue, a number each")
        values.append(float(numbers[0]) / scale)
    return values[0], values[1]


def read_lut1d(path: Path, node: Element, _reads: float, writes: float) -> Operation:
    """Read a LUT1D; its numbers carry the scale of the output depth alone."""
    if (node.get("interpolation") or "linear").lower() != "linear":
        raise MapFileError(path, f"its LUT1D asks for {node.get('interpolation', '')[:40]!r} and must be read linearly")
    array, dim = _array(path, node)
    if len(dim) != 2 or dim[1] not in (1, 3) or not 2 <= dim[0] <= _LONGEST:
        raise MapFileError(path, f"its LUT1D is {_spaced(dim)}; it must be 2 … {_LONGEST} rows of 1 or 3 numbers")
    values = _shaped(path, node, array, dim)
    if _is_true(path, node, "rawHalfs"):
        values = _halves(path, values)
    if _is_true(path, node, "halfDomain"):
        if len(values) != HALVES:
            raise MapFileError(path, f"its LUT1D has a half domain and {len(values)} rows; it must have {HALVES}")
        # What stands for infinity and for no number is never looked up.
        patterns = np.arange(HALVES, dtype=np.uint16).view(np.float16)
        values = np.where(np.isfinite(patterns)[:, None], values, 0.0)
        return HalfCurves(_threefold(finite(path, values, where="LUT1D") / writes))
    return Curves(_threefold(finite(path, values, where="LUT1D") / writes))


def _threefold(values: Floats) -> Floats:
    return values if values.shape[1] == 3 else np.repeat(values, 3, axis=1)


def _halves(path: Path, values: Floats) -> Floats:
    if not ((values >= 0) & (values < HALVES) & (values == np.floor(values))).all():
        raise MapFileError(path, "its LUT1D has raw halfs that are no bit patterns: integers of 0 … 65535")
    return values.astype(np.uint16).view(np.float16).astype(np.float64)


def _is_true(path: Path, node: Element, name: str) -> bool:
    value = node.get(name)
    if value is not None and value.lower() not in ("true", "false"):
        raise MapFileError(path, f"its LUT1D has {name} {value[:40]!r}; it can only be true")
    return value is not None and value.lower() == "true"


def read_lut3d(path: Path, node: Element, _reads: float, writes: float) -> Operation:
    """Read a LUT3D; its numbers carry the scale of the output depth alone, blue changing fastest."""
    interpolation = (node.get("interpolation") or "trilinear").lower()
    if interpolation not in ("trilinear", "tetrahedral"):
        raise MapFileError(
            path, f"its LUT3D asks for {interpolation[:40]!r} interpolation; it must be trilinear or tetrahedral"
        )
    array, dim = _array(path, node)
    if len(dim) != 4 or dim[3] != 3 or len(set(dim[:3])) != 1 or not 2 <= dim[0] <= _MOST_NODES:
        raise MapFileError(
            path, f"its LUT3D promises {_spaced(dim)}; it must be n n n 3 with n between 2 and {_MOST_NODES}"
        )
    lattice = _shaped(path, node, finite(path, array, where="LUT3D"), dim)
    return Cube(lattice / writes, interpolation == "tetrahedral")


def _array(path: Path, node: Element) -> tuple[Floats, tuple[int, ...]]:
    array = next(children(node, "Array"))
    name = local_name(node)
    try:
        dim = tuple(int(part) for part in (array.get("dim") or "").split())
    except ValueError as error:
        raise MapFileError(path, f"its {name} has dimensions that are no numbers: {error}") from error
    if not dim or any(not 1 <= part <= _LONGEST for part in dim):
        raise MapFileError(path, f"its {name} has the dimensions {_spaced(dim)!r}")
    try:
        return np.array((array.text or "").split(), dtype=np.float64), dim
    except (ValueError, OverflowError) as error:
        raise MapFileError(path, f"its {name} holds something that is no number: {error}") from error


def _shaped(path: Path, node: Element, numbers: Floats, dim: tuple[int, ...]) -> Floats:
    if numbers.size != int(np.prod(dim, dtype=np.int64)):
        raise MapFileError(
            path, f"its {local_name(node)} promises {_spaced(dim)} numbers and holds {numbers.size} in all"
        )
    return numbers.reshape(dim)


def _spaced(dim: tuple[int, ...]) -> str:
    return " ".join(str(part) for part in dim[:6])
