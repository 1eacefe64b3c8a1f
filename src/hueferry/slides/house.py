"""A house palette saved: what several slides have in common, as JSON text that can be read, compared and checked."""

from __future__ import annotations

import base64
import binascii
import hashlib
import json
from pathlib import Path
from typing import Any

import numpy as np

from hueferry.colour.encoding import SRGB
from hueferry.errors import InputError, PaletteError
from hueferry.picture import Encoding
from hueferry.record.record import installed_versions
from hueferry.slides.density import Light
from hueferry.slides.reference import SlideReference, between
from hueferry.slides.stains import Stains

SCHEMA = "hueferry/house-1"
SUFFIX = ".json"

_MOST_BYTES = 64 << 20
_MOST_COLOURS = 200_000
_MOST_BLOCKS = 1 << 31
_TOP = 65535


def house_text(reference: SlideReference) -> str:
    """Return a reference as JSON text; the same reference always gives the same text.

    Codes of tissue are rounded to 16 bit. Names of slides are not in it.
    """
    profile = reference.encoding.profile
    codes, glass = reference.codes, reference.glass[None, :]
    if profile is None:  # what has no profile is told in sRGB, which needs none
        codes, glass = (between(part, reference.encoding, SRGB) for part in (codes, glass))
    rows = np.column_stack([np.rint(_TOP * np.clip(codes, 0, 1)).astype(np.int64), reference.blocks])
    body = {
        "schema": SCHEMA,
        "version": installed_versions().get("hueferry", ""),
        "light": reference.light.value,
        "profile": None if profile is None else base64.b64encode(profile).decode("ascii"),
        "glass": [float(value) for value in glass[0]],
        "glass_seen": reference.glass_seen,
        "stains": None if reference.stains is None else _stains_as_dict(reference.stains),
        "shares": list(reference.shares),
        "colours": rows.tolist(),
    }
    return json.dumps(body | {"sha256": _digest(body)}, separators=(",", ":"), allow_nan=False) + "\n"


def read_house(path: Path) -> SlideReference:
    """Read a saved house palette.

    Raises:
        PaletteError: the file is missing, broken, changed since it was written, or something else.
    """
    try:
        with path.open("rb") as stream:
            raw = stream.read(_MOST_BYTES + 1)
        data = json.loads(raw) if len(raw) <= _MOST_BYTES else None
    except OSError as error:
        raise PaletteError(f"{path}: it cannot be read: {error.strerror or error}") from error
    except (ValueError, RecursionError) as error:
        raise PaletteError(f"{path}: this is not JSON text; make one with `palette --stain`") from error
    if not isinstance(data, dict) or data.get("schema") != SCHEMA:
        raise PaletteError(f"{path}: this is not of the schema {SCHEMA}; make one with `palette --stain`")
    said = data.pop("sha256", None)
    if said != _digest(data):
        raise PaletteError(f"{path}: its text was changed since it was saved; save it again")
    try:
        return _reference(data)
    except (KeyError, TypeError, ValueError, OverflowError, binascii.Error, InputError) as error:
        raise PaletteError(f"{path}: its values make no house palette ({error}); save it again") from error


def _digest(body: dict[str, Any]) -> str:
    canonical = json.dumps(body, sort_keys=True, separators=(",", ":"), ensure_ascii=True)
    return hashlib.sha256(canonical.encode("ascii")).hexdigest()


def _reference(data: dict[str, Any]) -> SlideReference:
    rows = np.array(data["colours"], dtype=np.int64)
    if rows.ndim != 2 or rows.shape[1] != 4 or not 0 < len(rows) <= _MOST_COLOURS:
        raise ValueError(f"colours are rows of red, green, blue and block, not an array of shape {rows.shape}")
    if rows.min() < 0 or rows[:, :3].max() > _TOP or rows[:, 3].max() > _MOST_BLOCKS:
        raise ValueError("a colour lies outside 0 … 65535")
    glass = np.array(data["glass"], dtype=np.float64)
    if glass.shape != (3,) or not np.isfinite(glass).all() or (glass < 0.02).any() or (glass > 1.5).any():
        raise ValueError("glass is three codes between 0.02 and 1")
    shares = tuple(float(share) for share in data["shares"])
    if not shares or not all(0 <= share <= 1 for share in shares):
        raise ValueError("shares are numbers between 0 and 1")
    return SlideReference(
        codes=rows[:, :3] / _TOP,
        blocks=rows[:, 3],
        glass=glass,
        glass_seen=bool(data["glass_seen"]),
        encoding=_encoding(data["profile"]),
        light=Light(data["light"]),
        picture=None,
        shares=shares,
        stains=_stains(data["stains"]),
    )


def _encoding(profile: str | None) -> Encoding:
    if profile is None:
        return SRGB
    from hueferry.colour.profile import read_profile

    return read_profile(base64.b64decode(profile, validate=True))


def _stains_as_dict(stains: Stains) -> dict[str, Any]:
    return {"vectors": stains.vectors.tolist(), "strengths": stains.strengths.tolist()}


def _stains(data: dict[str, Any] | None) -> Stains | None:
    if data is None:
        return None
    vectors, strengths = (np.array(data[name], dtype=np.float64) for name in ("vectors", "strengths"))
    if vectors.shape != (2, 3) or strengths.shape != (2,) or not np.isfinite(np.append(vectors, strengths)).all():
        raise ValueError("stains are two vectors of three numbers, each with its strength")
    return Stains(vectors, strengths)
