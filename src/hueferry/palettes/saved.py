"""Saved palettes by the names of their files, and several of them as one."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from types import MappingProxyType

import numpy as np

from hueferry.errors import OutputError, PaletteError
from hueferry.palettes.cgats import cgats_text, read_cgats
from hueferry.palettes.json_form import json_text, read_json
from hueferry.palettes.palette import Palette
from hueferry.palettes.reduce import thin

_READERS: Mapping[str, Callable[[Path], Palette]] = MappingProxyType(
    {".txt": read_cgats, ".cgats": read_cgats, ".json": read_json}
)
_WRITERS: Mapping[str, Callable[[Palette], str]] = MappingProxyType(
    {".txt": cgats_text, ".cgats": cgats_text, ".json": json_text}
)

SUFFIXES = frozenset(_READERS)
"""How the names of saved palettes end."""


def is_palette(path: Path) -> bool:
    """Whether the name of a file says that it is a saved palette."""
    return path.suffix.lower() in SUFFIXES


def read_palette(path: Path) -> Palette:
    """Read a saved palette, in the form that its name says.

    Raises:
        PaletteError: the file is no such palette.
    """
    if not is_palette(path):
        raise PaletteError(f"{path}: a saved palette has a name that ends in {', '.join(sorted(SUFFIXES))}")
    return _READERS[path.suffix.lower()](path)


def palette_text(palette: Palette, path: Path) -> str:
    """Return a palette as text, in the form that the name of its file says.

    Raises:
        OutputError: the name says none.
    """
    check_name(path)
    return _WRITERS[path.suffix.lower()](palette)


def check_name(path: Path) -> None:
    """Refuse a name that says no form of a palette.

    Raises:
        OutputError: the name says none.
    """
    if not is_palette(path):
        raise OutputError(path, "a palette is saved as CGATS text (.txt, .cgats) or as JSON (.json); name it so")


def merge(palettes: Sequence[Palette], *, size: int = 1024) -> Palette:
    """Return the palette of all that several palettes stand for, as if their pixels had been counted together.

    Each counts by its pixels; where one does not know how many it had, all count the same.

    Args:
        palettes: at least one.
        size: largest number of colours.

    Raises:
        PaletteError: there is none.
    """
    if not palettes:
        raise PaletteError("there is no palette to merge; give at least one")
    pixels = [palette.pixels for palette in palettes]
    known = min(pixels) > 0
    shares = np.array(pixels, dtype=np.float64) if known else np.ones(len(palettes))
    shares /= shares.sum()
    spread = float(np.sqrt(shares @ np.array([palette.spread**2 for palette in palettes])))
    colours = np.concatenate([palette.colours for palette in palettes])
    weights = np.concatenate([share * palette.weights for share, palette in zip(shares, palettes, strict=True)])
    colours, place = np.unique(colours, axis=0, return_inverse=True)
    weights = np.bincount(place.ravel(), weights)
    return thin(Palette(colours, weights / weights.sum(), spread, sum(pixels) if known else 0), size)
