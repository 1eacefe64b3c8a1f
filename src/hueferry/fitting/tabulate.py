"""A map as the table that is applied: built, made safe, certified."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.scene import is_scene_linear
from hueferry.colour.spaces import oklab_to_lab, oklab_to_xyz, xyz_to_oklab
from hueferry.fitting.settings import Aim, Settings
from hueferry.maps.beyond import BeyondWhite
from hueferry.maps.compose import Partial
from hueferry.maps.protocol import Map
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding
from hueferry.tables.cells import Occupied
from hueferry.tables.certificate import Certificate
from hueferry.tables.lookup import look_up
from hueferry.tables.make import make_table
from hueferry.tables.regularise import Regularisation
from hueferry.tables.table import Table


@attrs.frozen(eq=False)
class Tabulated:
    """A map with the table that stands for it.

    Attributes:
        map: the map at the strength that was asked for.
        table: its lattice, made safe.
        certificate: what was measured on the table.
        sentences: what had to be done for safety, for people.
    """

    map: Map
    table: Table
    certificate: Certificate
    sentences: tuple[str, ...]


def tabulate(wanted: Map, encoding: Encoding, palette: Palette, settings: Settings, *, bits: int) -> Tabulated:
    """Make the table of a map for pictures in `encoding`; the size is the smallest whose error is accepted.

    Args:
        wanted: Oklab to Oklab.
        encoding: what the table reads and writes.
        palette: the colours of the picture it is for.
        settings: strength, gain cap and table size.
        bits: significant bits a channel of the picture.
    """
    if settings.aim is Aim.AGREE and is_scene_linear(encoding):
        wanted = BeyondWhite(wanted)
    map_ = wanted if settings.strength == 1.0 else Partial(wanted, settings.strength)
    made = make_table(
        map_,
        encoding,
        occupied=Occupied.of_palette(palette, encoding),
        max_gain=settings.gain_cap(bits),
        size=settings.table_size,
    )
    return Tabulated(map_, made.table, made.certificate, _sentences(made.regularisation))


def _sentences(how: Regularisation) -> tuple[str, ...]:
    return tuple(f"{sentence[0].upper()}{sentence[1:]}." for sentence in how.sentences())


def carried(table: Table, encoding: Encoding, palette: Palette) -> Palette:
    """Return the palette that a picture has after the table, clipped as its pixels are."""
    codes = np.clip(encoding.from_xyz(oklab_to_xyz(palette.colours)), 0.0, 1.0)
    return attrs.evolve(palette, colours=xyz_to_oklab(encoding.to_xyz(np.clip(look_up(table, codes), 0.0, 1.0))))


def mean_move(before: Palette, after: Palette) -> float:
    """Return the mean ΔE00 between the same colours before and after."""
    return float(before.weights @ delta_e_2000(oklab_to_lab(before.colours), oklab_to_lab(after.colours)))
