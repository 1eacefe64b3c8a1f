"""What a correction rests on, and what it leaves open."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from enum import StrEnum
from functools import partial
from types import MappingProxyType
from typing import Any

import attrs


class Basis(StrEnum):
    """What carried the decision."""

    PAIRS = "pairs"
    PALETTE = "palette"
    ADOPTED = "adopted"
    NONE = "none"


def _frozen(mapping: Mapping[str, float]) -> Mapping[str, float]:
    return MappingProxyType(dict(mapping))


@attrs.frozen(kw_only=True)
class Evidence:
    """What a correction rests on.

    Attributes:
        basis: what carried it; `none` means that the map moves nothing.
        decision: one sentence for people.
        pairs_share: how much of what is known about the change came from pairs, 0 … 1.
        palette_share: the same for palettes; the three shares sum to 1.
        prior_share: the same for the prior.
        pairs: paired colours used, over all references.
        coverage: largest share of the source that one reference shows.
        inliers: keypoints explained, over all references.
        expected_error: mean ΔE00 expected between the output and what it should be, on the source's colours.
        moved: mean ΔE00 by which the map moves the source's colours.
        influence: share of each reference in the map, in their order; sums to 1, or is all 0 under `none`.
        judged_before: mean ΔE00 on pairs that the judged fit had not seen, before; None without pairs.
        judged_after: the same after.
        exposure_stops: what the files' exposure values said the change of exposure was, or None.
        camera: the camera-like parameters of the map, by name.
    """

    basis: Basis
    decision: str
    pairs_share: float = 0.0
    palette_share: float = 0.0
    prior_share: float = 1.0
    pairs: int = 0
    coverage: float = 0.0
    inliers: int = 0
    expected_error: float = 0.0
    moved: float = 0.0
    influence: tuple[float, ...] = ()
    judged_before: float | None = None
    judged_after: float | None = None
    exposure_stops: float | None = None
    camera: Mapping[str, float] = attrs.field(factory=dict, converter=_frozen)

    def __reduce__(self) -> tuple[Callable[[], Evidence], tuple[()]]:
        """Cross to worker processes, which a read-only view of a dictionary does not."""
        values = {field.name: getattr(self, field.name) for field in attrs.fields(type(self))}
        return partial(type(self), **{**values, "camera": dict(self.camera)}), ()

    def as_dict(self) -> dict[str, Any]:
        """Return everything as JSON values."""
        values = {field.name: getattr(self, field.name) for field in attrs.fields(type(self))}
        return {
            **values,
            "basis": self.basis.value,
            "influence": list(self.influence),
            "camera": dict(self.camera),
        }
