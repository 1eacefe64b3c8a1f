"""Any function of codes as a table: where its nodes must stand, and how many it takes.

A lattice with tetrahedra holds affine functions exactly, and lists of one-dimensional nodes before a tetrahedral
table too, if the input curves are those nodes and the lattice is that table. Others are approximated: of several
placings of the nodes the one with the least misfit is taken, with as many nodes as the misfit asks for.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.errors import InputError
from hueferry.tables.build import CodeFunction
from hueferry.tables.misfit import Misfit, misfit, probes
from hueferry.tables.operations import Cube, Curves, Matrix, Operation
from hueferry.tables.process import ProcessList, run
from hueferry.tables.separable import separable_table
from hueferry.tables.table import Table

Floats = NDArray[np.float64]

MOST_CODES = 1.5
"""8-bit codes: a list whose table is further off than this at the 99.9th percentile is refused."""

_EXACT = 5e-4
_GOOD_CODES = 0.1
"""8-bit codes at the 99.9th percentile, where no more nodes are tried."""

_SIZES = (33, 65, 129)
_LARGEST_SIZE = 129
_KNOTS = 16385
_BLOCK = 1 << 17
_MOST_WORK = 1 << 26
"""Results of single nodes of a list that a lattice may ask for; a long list gets a smaller one."""


@attrs.frozen(eq=False)
class Placing:
    """Where the nodes of a lattice stand.

    Attributes:
        head: what the input curves do; its results never fall along a channel.
        rest: what the lattice holds: results of `head` to output codes.
        nodes: for each channel the increasing results of `head` at which nodes stand, from that of 0 to that of 1.
        knots: of the curves; 2 for an identity.
    """

    head: CodeFunction
    rest: CodeFunction
    nodes: tuple[Floats, Floats, Floats]
    knots: int = _KNOTS

    def table(self) -> Table:
        """Return the table, its lattice filled."""
        size = len(self.nodes[0])
        grid = np.stack(np.meshgrid(*self.nodes, indexing="ij"), axis=-1).reshape(-1, 3)
        values = np.concatenate([self.rest(grid[start : start + _BLOCK]) for start in range(0, len(grid), _BLOCK)])
        return Table(values.reshape(size, size, size, 3), self._curves(size) if self.knots > 2 else None)

    def _curves(self, size: int) -> Floats:
        even = np.linspace(0.0, 1.0, size)
        through = self.head(np.repeat(np.linspace(0.0, 1.0, self.knots)[:, None], 3, axis=1))
        curves = np.stack([np.interp(through[:, i], self.nodes[i], even) for i in range(3)])
        curves[:, 0], curves[:, -1] = 0.0, 1.0
        return np.maximum.accumulate(curves, axis=1)


def express(process: ProcessList) -> tuple[Table, Misfit]:
    """Return the table of a process list, and how far it is from the list.

    Raises:
        InputError: no table comes near enough.
    """
    if process.separable:
        lengths = [len(operation.values) for operation in process.operations if isinstance(operation, Curves)]
        found = separable_table(process, lengths=lengths)
        if found is not None:
            return _near_enough(*found)
    return _near_enough(*_best_of(process, _placings(process)))


def express_function(function: CodeFunction, *, sizes: Sequence[int]) -> tuple[Table, Misfit]:
    """Return the table of any function of codes, with even nodes or nodes that follow its bends.

    Args:
        function: (n, 3) codes to (n, 3) codes, pure.
        sizes: nodes along an axis to try, from few to many.

    Raises:
        InputError: no table comes near enough.
    """
    return _near_enough(*_best_of(function, (option for size in sizes for option in _general(function, size))))


def _near_enough(table: Table, found: Misfit) -> tuple[Table, Misfit]:
    if found.high > MOST_CODES:
        raise InputError(
            f"it bends too sharply for a table of {table.size} nodes an axis: {found.sentence}; "
            f"at most {MOST_CODES} at the 99.9th percentile are accepted"
        )
    return table, found


def _best_of(function: CodeFunction, placings: Iterator[Placing]) -> tuple[Table, Misfit]:
    probe = probes()
    best: tuple[Table, Misfit] | None = None
    for placing in placings:
        if best is not None and len(placing.nodes[0]) > best[0].size and best[1].high < _GOOD_CODES:
            break
        table = placing.table()
        found = misfit(table, function, probe)
        if best is None or found.high < best[1].high:
            best = table, found
        if found.largest < _EXACT:
            break
    if best is None:
        raise InputError("there is no table to try")
    return best


def _placings(process: ProcessList) -> Iterator[Placing]:
    if all(isinstance(operation, Matrix) for operation in process.operations):
        yield _even(process, 2)
    if isinstance(process.head()[1][0], Cube):
        yield from _before_cube(process)
    for size in _SIZES:
        if len(process.operations) * size**3 > _MOST_WORK:
            break
        yield from _after_head(process, size)
        yield from _general(process, size)


def _before_cube(process: ProcessList) -> Iterator[Placing]:
    """Nodes where those of a three-dimensional table stand, and between them."""
    head, rest = process.head()
    cube = rest[0]
    if not isinstance(cube, Cube):
        return

    def before(codes: Codes) -> Codes:
        return np.clip(run(head, codes), 0.0, 1.0)

    def after(codes: Codes) -> Codes:
        return run(rest, codes)

    lengths = [len(operation.values) for operation in head if isinstance(operation, Curves)]
    within = _span(before)
    if within is None:
        return
    even = np.linspace(0.0, 1.0, cube.size)
    own = [np.concatenate([[a], even[(even > a + 1e-9) & (even < b - 1e-9)], [b]]) for a, b in within]
    steps = max(len(nodes) for nodes in own) - 1
    for parts in sorted({1, 2, 4, (_LARGEST_SIZE - 1) // steps}):
        size = parts * steps + 1
        if size > _LARGEST_SIZE or len(process.operations) * size**3 > _MOST_WORK:
            break
        red, green, blue = (_split(_filled(nodes, steps), parts) for nodes in own)
        knots = {2} if not head else {*lengths, _KNOTS, 65536}
        for count in sorted(knots):
            yield Placing(before, after, (red, green, blue), count)


def _after_head(process: ProcessList, size: int) -> Iterator[Placing]:
    """Nodes at even steps of what the nodes at the start make of each channel."""
    head, rest = process.head()

    def before(codes: Codes) -> Codes:
        return run(head, codes)

    def after(codes: Codes) -> Codes:
        return run(rest, codes)

    within = _span(before) if head else None
    if within is not None:
        red, green, blue = (np.linspace(low, high, size) for low, high in within)
        yield Placing(before, after, (red, green, blue))


def _general(function: CodeFunction, size: int) -> Iterator[Placing]:
    """Nodes at even steps of codes, and nodes that stand closer where the function bends."""
    yield _even(function, size)
    ramp = np.linspace(0.0, 1.0, 1025)
    places = [_followed(function, axis, ramp) for axis in range(3)]
    red, green, blue = (_on_knots(np.interp(np.linspace(0.0, 1.0, size), place, ramp)) for place in places)
    yield Placing(_as_they_are, function, (red, green, blue))


def _even(function: CodeFunction, size: int) -> Placing:
    nodes = np.linspace(0.0, 1.0, size)
    return Placing(_as_they_are, function, (nodes, nodes, nodes), 2)


def _as_they_are(codes: Codes) -> Codes:
    return codes


def _followed(function: CodeFunction, axis: int, ramp: Floats) -> Floats:
    """Return a rising line of 0 … 1 over `ramp`, steep where the function bends along a channel.

    The error of linear interpolation is least where nodes are as dense as the square root of the bend.
    """
    others = np.stack(np.meshgrid(*[np.linspace(0.0, 1.0, 5)] * 2, indexing="ij"), axis=-1).reshape(-1, 2)
    lines = np.empty((len(others), len(ramp), 3))
    lines[:, :, axis] = ramp
    lines[:, :, [i for i in range(3) if i != axis]] = others[:, None, :]
    values = function(lines.reshape(-1, 3)).reshape(lines.shape)
    bend = np.abs(np.diff(values, n=2, axis=1)).max(axis=2).mean(axis=0)
    density = np.sqrt(np.concatenate([bend[:1], bend, bend[-1:]]))
    density = density[1:] + density[:-1] + 1e-12
    risen = np.concatenate([[0.0], np.cumsum(density)])
    return np.asarray(0.5 * risen / risen[-1] + 0.5 * ramp)


def _on_knots(nodes: Floats) -> Floats:
    """Return rising nodes moved onto knots of the curves, so that a curve has one slope between two nodes."""
    last = _KNOTS - 1
    knots = np.rint(nodes * last).astype(np.int64)
    rising = np.arange(len(nodes))
    knots = np.maximum.accumulate(knots - rising) + rising
    knots = np.minimum(knots, last - rising[::-1])
    return np.asarray(knots / last)


def _span(head: CodeFunction) -> list[tuple[float, float]] | None:
    """Return what 0 and 1 become in each channel, or None if a channel falls somewhere or stands still."""
    through = head(np.repeat(np.linspace(0.0, 1.0, _KNOTS)[:, None], 3, axis=1))
    if (np.diff(through, axis=0) < 0).any() or (through[-1] - through[0] < 1e-6).any():
        return None
    return list(zip(through[0].tolist(), through[-1].tolist(), strict=True))


def _filled(nodes: Floats, steps: int) -> Floats:
    """Return nodes with the widest gaps halved until there are as many steps."""
    while len(nodes) - 1 < steps:
        widest = int(np.argmax(np.diff(nodes)))
        nodes = np.insert(nodes, widest + 1, (nodes[widest] + nodes[widest + 1]) / 2)
    return nodes


def _split(nodes: Floats, parts: int) -> Floats:
    """Return nodes with every gap cut into as many equal parts."""
    places = np.arange((len(nodes) - 1) * parts + 1) / parts
    return np.interp(places, np.arange(len(nodes)), nodes)


def lattice_operation(table: Table) -> tuple[Operation, ...]:
    """Return the operations that a table is: its curves, where it has any, and its lattice."""
    cube = Cube(table.lattice, is_tetrahedral=True)
    return (cube,) if table.curves is None else (Curves(table.curves.T), cube)
