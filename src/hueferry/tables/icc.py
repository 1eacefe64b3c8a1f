"""Maps as ICC profiles: a device link, codes to codes, and an abstract profile, Lab to Lab.

Both hold 16-bit numbers between 0 and 1: what a table gives beyond is clipped, as it is in pictures of integers.

References:
    ICC.1:2022 (profile version 4.4): 8.6 (device link), 8.8 (abstract), 10.6 (curveType), 10.12 (lutAToBType),
    10.20 (profileSequenceDescType), 7.2.18 (profile ID), 6.3.4.2 (16-bit encoding of Lab).
"""

from __future__ import annotations

import hashlib
import struct

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.make_profile import assemble, text_tag
from hueferry.colour.spaces import lab_to_xyz, xyz_to_lab
from hueferry.errors import InputError
from hueferry.picture import Encoding
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

LAB_NODES = 65
"""Nodes along L*, a* and b* of an abstract profile."""

MOST_NODES = 129
_TOP = 65535
_COPYRIGHT = "No copyright; use freely."
_SAMPLES = 33
_ZERO, _RANGE = np.array([0.0, 128.0, 128.0]), np.array([100.0, 255.0, 255.0])
"""16-bit Lab: L* from 0 to 100, a* and b* from −128 to 127 (ICC.1:2022, 6.3.4.2)."""

_RGB_DEVICE = bytes(20)
"""Maker, model, attributes and technology of a device that is nobody's."""


@attrs.frozen
class ExportError:
    """How far what was exported is from its table.

    Attributes:
        mean: ΔE00, over an even grid of codes.
        largest: the same.
        clipped: share of the grid whose output is clipped, 0 … 1.
    """

    mean: float
    largest: float
    clipped: float


def device_link(table: Table, *, name: str) -> bytes:
    """Return a device link profile that does what `table` does to RGB codes.

    Args:
        table: any table; its input curves become A curves, its lattice the CLUT.
        name: description, for people.
    """
    curves = table.curves
    ramp = np.array([0.0, 1.0], np.float32)
    a_curves = [ramp if curves is None else curves[channel] for channel in range(3)]
    tags = {
        b"desc": text_tag(name),
        b"cprt": text_tag(_COPYRIGHT),
        b"A2B0": _lut_tag(a_curves, np.clip(table.lattice, 0.0, 1.0)),
        b"pseq": b"pseq\0\0\0\0" + struct.pack(">I", 2) + 2 * (_RGB_DEVICE + 2 * text_tag("RGB ")),
    }
    return _signed(assemble(tags, kind=b"link", space=b"RGB ", connection=b"RGB "))


def abstract_profile(table: Table, encoding: Encoding, *, name: str) -> bytes:
    """Return an abstract profile that does to colours what `table` does to the codes of `encoding`.

    Colours that the codes cannot hold are shifted as the nearest codes are.

    Args:
        table: reads and writes codes of `encoding`.
        encoding: of pictures that the table is for.
        name: description, for people.
    """
    tags = {
        b"desc": text_tag(name),
        b"cprt": text_tag(_COPYRIGHT),
        b"A2B0": _lut_tag([np.array([0.0, 1.0], np.float32)] * 3, _lab_lattice(table, encoding)),
    }
    return _signed(assemble(tags, kind=b"abst", space=b"Lab ", connection=b"Lab "))


def link_error(table: Table, encoding: Encoding) -> ExportError:
    """Return how far the device link of a table is from it: 16-bit nodes and curves, and clipping apart."""
    stored = Table(_sixteen_bit(table.lattice), None if table.curves is None else _sixteen_bit(table.curves))
    return table_distance(stored, table, encoding)


def table_distance(given: Table, wanted: Table, encoding: Encoding) -> ExportError:
    """Return how far one table is from another, over an even grid of codes, once both are clipped."""
    codes = _grid()
    return _error(encoding, look_up(given, codes), look_up(wanted, codes))


def abstract_error(table: Table, encoding: Encoding) -> ExportError:
    """Return how far the abstract profile of a table is from it, over codes of `encoding`."""
    codes = _grid()
    lattice = Table(_sixteen_bit(_lab_lattice(table, encoding)))
    given = _from_pcs(look_up(lattice, _to_pcs(xyz_to_lab(encoding.to_xyz(codes)))))
    wanted = look_up(table, codes)
    clipped = float((np.abs(wanted - np.clip(wanted, 0, 1)).max(axis=1) > 0.5 / 255).mean())
    difference = delta_e_2000(given, xyz_to_lab(encoding.to_xyz(np.clip(wanted, 0.0, 1.0))))
    return ExportError(float(difference.mean()), float(difference.max()), clipped)


def _error(encoding: Encoding, given: Codes, wanted: Codes) -> ExportError:
    held = np.clip(wanted, 0.0, 1.0)
    labs = [xyz_to_lab(encoding.to_xyz(codes)) for codes in (np.clip(given, 0.0, 1.0), held)]
    difference = delta_e_2000(*labs)
    clipped = float((np.abs(wanted - held).max(axis=1) > 0.5 / 255).mean())
    return ExportError(float(difference.mean()), float(difference.max()), clipped)


def _grid() -> Codes:
    ramp = np.linspace(0.0, 1.0, _SAMPLES)
    return np.stack(np.meshgrid(ramp, ramp, ramp, indexing="ij"), axis=-1).reshape(-1, 3)


def _lab_lattice(table: Table, encoding: Encoding) -> NDArray[np.float64]:
    ramp = np.linspace(0.0, 1.0, LAB_NODES)
    nodes = np.stack(np.meshgrid(ramp, ramp, ramp, indexing="ij"), axis=-1).reshape(-1, 3)
    lab = _from_pcs(nodes)
    codes = np.clip(encoding.from_xyz(lab_to_xyz(lab)), 0.0, 1.0)
    before = xyz_to_lab(encoding.to_xyz(codes))
    after = xyz_to_lab(encoding.to_xyz(np.clip(look_up(table, codes), 0.0, 1.0)))
    moved = np.clip(_to_pcs(lab + after - before), 0.0, 1.0)
    return np.asarray(moved.reshape(LAB_NODES, LAB_NODES, LAB_NODES, 3))


def _to_pcs(lab: NDArray[np.float64]) -> Codes:
    return np.asarray((lab + _ZERO) / _RANGE)


def _from_pcs(codes: Codes) -> NDArray[np.float64]:
    return np.asarray(codes * _RANGE - _ZERO)


def _sixteen_bit(values: NDArray[np.floating]) -> NDArray[np.float64]:
    return np.rint(np.clip(values.astype(np.float64), 0.0, 1.0) * _TOP) / _TOP


def _lut_tag(a_curves: list[NDArray[np.float32]], lattice: NDArray[np.floating]) -> bytes:
    """Return a lutAToBType of A curves, a CLUT and B curves that change nothing, three channels to three."""
    size = lattice.shape[0]
    if size > MOST_NODES:
        raise InputError(f"a CLUT of {size} nodes along an axis is larger than profiles of this kind are")
    plain = b"curv\0\0\0\0" + struct.pack(">I", 0)
    b_part = plain * 3
    clut = bytes([size] * 3 + [0] * 13) + b"\x02\0\0\0" + _numbers(lattice)
    clut += b"\0" * (-len(clut) % 4)
    a_part = b"".join(_curve(curve) for curve in a_curves)
    first = 32
    places = first, 0, 0, first + len(b_part), first + len(b_part) + len(clut)
    return b"mAB \0\0\0\0" + struct.pack(">BBH5I", 3, 3, 0, *places) + b_part + clut + a_part


def _curve(samples: NDArray[np.float32]) -> bytes:
    if len(samples) == 2:  # from 0 to 1: none is shorter and exact
        return b"curv\0\0\0\0" + struct.pack(">I", 0)
    data = b"curv\0\0\0\0" + struct.pack(">I", len(samples)) + _numbers(samples)
    return data + b"\0" * (-len(data) % 4)


def _numbers(values: NDArray[np.floating]) -> bytes:
    return np.rint(np.clip(values.astype(np.float64), 0.0, 1.0) * _TOP).astype(">u2").tobytes()


def _signed(profile: bytes) -> bytes:
    """Put the profile ID in: the MD5 of the profile with flags, rendering intent and the ID itself set to 0."""
    blank = bytearray(profile)
    blank[44:48] = blank[64:68] = bytes(4)
    blank[84:100] = bytes(16)
    identity = hashlib.md5(bytes(blank), usedforsecurity=False).digest()
    return profile[:84] + identity + profile[100:]
