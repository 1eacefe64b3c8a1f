"""What is kept of a picture that was done: text and plain arrays, so that a later run can go on from them."""

from __future__ import annotations

import io
import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.errors import InputError
from hueferry.palettes.palette import Palette
from hueferry.record.record import Entry, Failure, FileFact, Record, read_record
from hueferry.series.glimpse import Glimpse, Spot


@attrs.frozen(eq=False)
class Done:
    """A picture that was done: its entry in the record, what pages show of it, palettes for the overview."""

    entry: Entry
    glimpse: Glimpse
    palette: Palette
    palette_after: Palette


@attrs.frozen
class Kept:
    """The same as text and bytes: what a worker answers and the journal stores.

    Attributes:
        entry: JSON of the entry.
        arrays: small pictures and palettes, an NPZ archive without objects.
    """

    entry: str
    arrays: bytes


def pack(done: Done) -> Kept:
    """Put a picture that was done into text and bytes."""
    buffer = io.BytesIO()
    arrays: dict[str, Any] = _arrays_of("palette", done.palette) | _arrays_of("palette_after", done.palette_after)
    arrays |= {name: np.frombuffer(data, np.uint8) for name, data in _small_pictures(done.glimpse).items()}
    np.savez(buffer, size=np.array([done.glimpse.width, done.glimpse.height]), **arrays)
    return Kept(json.dumps(attrs.asdict(done.entry), ensure_ascii=False, allow_nan=False), buffer.getvalue())


def unpack(kept: Kept) -> Done:
    """Return what was packed.

    Raises:
        InputError: it is not what `pack` makes.
    """
    try:
        with np.load(io.BytesIO(kept.arrays), allow_pickle=False) as arrays:
            return Done(
                entry_from(json.loads(kept.entry)),
                _glimpse_from(arrays),
                _palette_from("palette", arrays),
                _palette_from("palette_after", arrays),
            )
    except (ValueError, KeyError, TypeError, OSError, EOFError) as error:
        raise InputError(f"what was kept of a picture cannot be read: {error}") from error


def entry_from(data: Mapping[str, Any]) -> Entry:
    """Return the entry whose JSON values these are."""
    output = data["output"]
    return Entry(
        source=FileFact(**data["source"]),
        output=None if output is None else FileFact(**output),
        numbers=data["numbers"],
        sentences=data["sentences"],
    )


def record_from(out: Path) -> Record:
    """Return the record that an earlier run left in a folder.

    Raises:
        InputError: there is none, or it is of another schema.
    """
    data = read_record(out)
    data.pop("schema")
    data["references"] = [FileFact(**fact) for fact in data["references"]]
    data["entries"] = [entry_from(entry) for entry in data["entries"]]
    data["failures"] = [Failure(**failure) for failure in data["failures"]]
    data["hold"] = None if data["hold"] is None else FileFact(**data["hold"])
    return Record(**data)


def _small_pictures(glimpse: Glimpse) -> dict[str, bytes]:
    pictures = {"before": glimpse.before, "after": glimpse.after}
    if glimpse.spot is None:
        return pictures
    spot = glimpse.spot
    return pictures | {"spot_before": spot.before, "spot_after": spot.after, "spot_said": spot.said.encode()}


def _glimpse_from(arrays: Mapping[str, NDArray[Any]]) -> Glimpse:
    data = {name: arrays[name].tobytes() for name in ("before", "after")}
    spot = None
    if "spot_said" in arrays:
        said = arrays["spot_said"].tobytes().decode()
        spot = Spot(arrays["spot_before"].tobytes(), arrays["spot_after"].tobytes(), said)
    width, height = (int(side) for side in arrays["size"])
    return Glimpse(data["before"], data["after"], width, height, spot)


def _arrays_of(name: str, palette: Palette) -> dict[str, NDArray[np.float64]]:
    facts = np.array([palette.spread, palette.pixels], np.float64)
    return {f"{name}_colours": palette.colours, f"{name}_weights": palette.weights, f"{name}_facts": facts}


def _palette_from(name: str, arrays: Mapping[str, NDArray[np.float64]]) -> Palette:
    spread, pixels = arrays[f"{name}_facts"]
    return Palette(arrays[f"{name}_colours"], arrays[f"{name}_weights"], float(spread), int(pixels))
