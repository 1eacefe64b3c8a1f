"""Palettes as JSON: the same colours and shares as the CGATS text, for programs, and with what that has no field for.

The text is an object with these keys, and no others:

    schema   "hueferry/palette-1"
    version  1, raised whenever a key changes its meaning
    space    "CIELAB, D50"
    colours  a list of [L*, a*, b*]
    weights  a list of shares, as long, summing to 1 within 1e-6
    spread   root mean square distance in Oklab between the pixels and the colours that stand for them
    pixels   how many pixels were counted; 0 if unknown
    sha256   of the object without this key, written by `json.dumps` with sorted keys and without spaces
"""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import numpy as np

from hueferry.arrays import Lab
from hueferry.colour.spaces import lab_to_oklab, oklab_to_lab
from hueferry.errors import PaletteError
from hueferry.palettes.cgats import LARGEST_PALETTE, SCHEMA, text_of
from hueferry.palettes.palette import Palette

VERSION = 1
SPACE = "CIELAB, D50"

_KEYS = frozenset({"schema", "version", "space", "colours", "weights", "spread", "pixels", "sha256"})
_MOST_PIXELS = 1 << 62
_FURTHEST = 1000.0


def json_text(palette: Palette) -> str:
    """Return a palette as JSON text, a colour a line; the same palette always gives the same text."""
    body: dict[str, Any] = {
        "schema": SCHEMA,
        "version": VERSION,
        "space": SPACE,
        "spread": float(palette.spread),
        "pixels": int(palette.pixels),
        "weights": [float(f"{weight:.12g}") for weight in palette.weights.tolist()],
        "colours": [[float(f"{number:.9g}") for number in row] for row in oklab_to_lab(palette.colours).tolist()],
    }
    lines = [f" {json.dumps(key)}: {_value_text(value)}" for key, value in (body | {"sha256": _digest(body)}).items()]
    return "{\n" + ",\n".join(lines) + "\n}\n"


def _value_text(value: object) -> str:
    if not isinstance(value, list):
        return json.dumps(value, allow_nan=False)
    return "[\n" + ",\n".join(f"  {json.dumps(part, allow_nan=False)}" for part in value) + "\n ]"


def _digest(body: dict[str, Any]) -> str:
    return hashlib.sha256(json.dumps(body, sort_keys=True, separators=(",", ":")).encode()).hexdigest()


def read_json(path: Path) -> Palette:
    """Read a palette from JSON text.

    Raises:
        PaletteError: the file is no such text, is too large, holds numbers that are no colours or shares, or does not
            match its checksum.
    """
    try:
        return palette_from_json(text_of(path))
    except PaletteError as error:
        raise PaletteError(f"{path}: {error}") from error


def palette_from_json(text: str) -> Palette:
    """Return the palette that JSON text holds.

    Raises:
        PaletteError: as for `read_json`.
    """
    try:
        body = json.loads(text, parse_constant=_no_number)
    except (ValueError, RecursionError) as error:
        raise PaletteError(f"it is not JSON: {error}") from error
    if not isinstance(body, dict) or body.get("schema") != SCHEMA:
        stated = str(body.get("schema") if isinstance(body, dict) else None)[:40]
        hint = "; house palettes of slides are for stain --to" if stated.startswith("hueferry/house") else ""
        raise PaletteError(f"it is no palette of pictures: its schema is {stated!r}, not {SCHEMA!r}{hint}")
    if set(body) != _KEYS or body["version"] != VERSION or body["space"] != SPACE:
        raise PaletteError(f"it is a palette, but not of version {VERSION} in {SPACE}; a later hueferry may read it")
    if body.pop("sha256") != _digest(body):
        raise PaletteError("its numbers do not match its checksum; the file was changed or damaged")
    lab = _numbers(body["colours"], "colours")
    weights = _numbers(body["weights"], "weights")
    if lab.ndim != 2 or lab.shape[1] != 3 or weights.shape != (len(lab),) or not 1 <= len(lab) <= LARGEST_PALETTE:
        raise PaletteError(f"it must hold 1 … {LARGEST_PALETTE} colours of three numbers and as many weights")
    if np.abs(lab).max() > _FURTHEST or (weights < 0).any() or abs(float(weights.sum()) - 1) > 1e-6:
        raise PaletteError("it holds numbers that are no colours or no shares")
    return Palette(lab_to_oklab(lab), weights / weights.sum(), _spread(body["spread"]), _pixels(body["pixels"]))


def _no_number(word: str) -> float:
    raise PaletteError(f"it holds {word}, which is no number")


def _numbers(value: object, name: str) -> Lab:
    try:
        numbers = np.array(value, dtype=np.float64)
    except (TypeError, ValueError, OverflowError, RecursionError) as error:
        raise PaletteError(f"its {name} hold something that is no number: {error}") from error
    if not np.isfinite(numbers).all() or not numbers.size:
        raise PaletteError(f"its {name} hold numbers that are not finite, or none at all")
    return numbers


def _spread(value: object) -> float:
    if not isinstance(value, float | int) or not 0 <= value <= _FURTHEST:
        raise PaletteError(f"its spread is {str(value)[:40]!r}; it must be 0 or more")
    return float(value)


def _pixels(value: object) -> int:
    if not isinstance(value, int) or not 0 <= value <= _MOST_PIXELS:
        raise PaletteError(f"its number of pixels is {str(value)[:40]!r}; it must be a whole number, 0 or more")
    return int(value)
