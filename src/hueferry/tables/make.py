"""From a map to the table that ships: the size its error asks for, made safe, with its certificate."""

from __future__ import annotations

import attrs

from hueferry.maps.protocol import Map
from hueferry.picture import Encoding
from hueferry.tables.build import SIZES, code_function, input_curves, sample_table
from hueferry.tables.cells import Occupied
from hueferry.tables.certificate import Certificate, TableError, certify, table_error
from hueferry.tables.regularise import Regularisation, make_safe
from hueferry.tables.rolling import roll_into_range
from hueferry.tables.table import Table

MOST_CODES = 1.5
"""8-bit codes: the 99.9th percentile of the table error beyond which the larger table is taken."""

MOST_DELTA_E = 1.0
"""ΔE00: the largest error beyond which the larger table is taken."""


@attrs.frozen(eq=False)
class MadeTable:
    """A table that may be applied.

    Attributes:
        table: the table.
        certificate: measured on this very table.
        regularisation: what had to be done to make it safe.
    """

    table: Table
    certificate: Certificate
    regularisation: Regularisation

    @property
    def sentences(self) -> tuple[str, ...]:
        """What a person should know of it."""
        return (*self.certificate.sentences(), *self.regularisation.sentences())


def make_table(
    map_: Map,
    encoding: Encoding,
    *,
    occupied: Occupied,
    max_gain: float,
    size: int | None = None,
    output: Encoding | None = None,
    hold_ends: bool = True,
) -> MadeTable:
    """Make the table of a map for pictures that hold the colours `occupied`.

    Args:
        map_: Oklab to Oklab.
        encoding: what the table reads.
        occupied: colours of the pictures, `Occupied.of_palette(palette, encoding)`.
        max_gain: largest accepted gain on occupied cells.
        size: nodes along an axis; None takes 33, or 65 where the error of 33 is too large.
        output: what the table writes; None means `encoding`.
        hold_ends: keep pixels that are clipped in all channels neutral.
    """
    written = encoding if output is None else output
    plain = code_function(map_, encoding, output=output, hold_ends=hold_ends, into_gamut=False)
    function = roll_into_range(plain, occupied)
    for nodes in SIZES if size is None else (size,):
        table = sample_table(function, size=nodes, curves=input_curves(encoding, nodes))
        safe, how = make_safe(table, occupied=occupied, encoding=encoding, max_gain=max_gain, output=output)
        error = table_error(safe, function, occupied, encoding=written)
        if how.needed or _accepted(error):  # more nodes bring no map back that had to be changed
            break
    certificate = certify(safe, occupied=occupied, encoding=encoding, max_gain=max_gain, output=output, error=error)
    return MadeTable(safe, certificate, how)


def _accepted(error: TableError) -> bool:
    return error.high <= MOST_CODES and error.largest_delta_e <= MOST_DELTA_E
