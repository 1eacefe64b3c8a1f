"""Palettes as ISO 28178 (CGATS) text: CIELAB D50 and weights, for people and for other software.

References:
    ISO 28178:2009, Exchange format for colour and process control data using XML or ASCII text.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from hueferry.colour.spaces import lab_to_xyz, oklab_to_lab, xyz_to_oklab
from hueferry.errors import PaletteError
from hueferry.palettes.palette import Palette

SCHEMA = "hueferry/palette-1"
_FIELDS = ("LAB_L", "LAB_A", "LAB_B", "WEIGHT")
_LARGEST_FILE = 16 << 20
LARGEST_PALETTE = 1 << 16


def cgats_text(palette: Palette) -> str:
    """Return a palette as CGATS text; the same palette always gives the same text."""
    lab = oklab_to_lab(palette.colours)
    rows = [
        f"{number} {row[0]:.9g} {row[1]:.9g} {row[2]:.9g} {weight:.12g}"
        for number, (row, weight) in enumerate(zip(lab.tolist(), palette.weights.tolist(), strict=True), start=1)
    ]
    head = [
        "CGATS.17",
        'ORIGINATOR "hueferry"',
        'DESCRIPTOR "Palette: CIELAB relative to D50, with the share of each colour"',
        'KEYWORD "HUEFERRY_SCHEMA"',
        f'HUEFERRY_SCHEMA "{SCHEMA}"',
        'KEYWORD "HUEFERRY_SHA256"',
        f'HUEFERRY_SHA256 "{_digest(rows)}"',
        'KEYWORD "WEIGHT"',
        f"NUMBER_OF_FIELDS {1 + len(_FIELDS)}",
        "BEGIN_DATA_FORMAT",
        " ".join(("SAMPLE_ID", *_FIELDS)),
        "END_DATA_FORMAT",
        f"NUMBER_OF_SETS {len(rows)}",
        "BEGIN_DATA",
    ]
    return "\n".join([*head, *rows, "END_DATA"]) + "\n"


def read_cgats(path: Path) -> Palette:
    """Read a palette from CGATS text with LAB_L, LAB_A and LAB_B; without weights, all colours weigh the same.

    Raises:
        PaletteError: the file is no such text, is too large, holds numbers that are no colours or shares, or does not
            match its checksum.
    """
    try:
        return palette_from_cgats(text_of(path))
    except PaletteError as error:
        raise PaletteError(f"{path}: {error}") from error


def text_of(path: Path) -> str:
    """Return the text of a palette file.

    Raises:
        PaletteError: it cannot be read, is too large, or is no UTF-8; the message does not name the file.
    """
    try:
        with path.open("rb") as stream:
            data = stream.read(_LARGEST_FILE + 1)
    except OSError as error:
        raise PaletteError(f"it cannot be read: {error.strerror or error}") from error
    if len(data) > _LARGEST_FILE:
        raise PaletteError(f"it is larger than {_LARGEST_FILE >> 20} MB, which no palette is")
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError as error:
        raise PaletteError(f"it is no text: {error}") from error


def palette_from_cgats(text: str) -> Palette:
    """Return the palette that CGATS text holds.

    Raises:
        PaletteError: as for `read_cgats`.
    """
    lines = [" ".join(line.split()) for line in text.splitlines()]
    fields = " ".join(_between(lines, "BEGIN_DATA_FORMAT", "END_DATA_FORMAT")).split()
    rows = [line for line in _between(lines, "BEGIN_DATA", "END_DATA") if line]
    if not 1 <= len(rows) <= LARGEST_PALETTE:
        raise PaletteError(f"a palette has 1 … {LARGEST_PALETTE} colours, and this text holds {len(rows)}")
    stated = [line.split()[1].strip('"') for line in lines if line.startswith("HUEFERRY_SHA256 ")]
    if stated and stated != [_digest(rows)]:
        raise PaletteError("its numbers do not match its checksum; the file was changed or damaged")
    count = [line.split()[1] for line in lines if line.startswith("NUMBER_OF_SETS ")]
    if count and count != [str(len(rows))]:
        raise PaletteError(f"it promises {count[0]} colours and holds {len(rows)}")
    lab = np.stack([_column(rows, fields, name) for name in _FIELDS[:3]], axis=1)
    weights = _column(rows, fields, "WEIGHT") if "WEIGHT" in fields else np.ones(len(rows))
    if np.abs(lab).max() > 1000 or (weights < 0).any() or not 0 < weights.sum() < np.inf:
        raise PaletteError("it holds numbers that are no colours or no shares")
    return Palette(xyz_to_oklab(lab_to_xyz(lab)), weights / weights.sum())


def _between(lines: Sequence[str], first: str, last: str) -> list[str]:
    try:
        start = lines.index(first)
        return list(lines[start + 1 : lines.index(last, start)])
    except ValueError as error:
        raise PaletteError(f"it is not CGATS text: there is no {first} … {last}") from error


def _column(rows: Sequence[str], fields: Sequence[str], name: str) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    if name not in fields:
        raise PaletteError(f"it has no field {name}; a palette needs LAB_L, LAB_A and LAB_B")
    place = fields.index(name)
    try:
        values = np.array([float(row.split()[place]) for row in rows], dtype=np.float64)
    except (ValueError, IndexError) as error:
        raise PaletteError(f"its field {name} holds something that is no number: {error}") from error
    if not np.isfinite(values).all():
        raise PaletteError(f"its field {name} holds numbers that are not finite")
    return values


def _digest(rows: Sequence[str]) -> str:
    return hashlib.sha256("\n".join(rows).encode()).hexdigest()
