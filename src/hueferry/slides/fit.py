"""The correction of a slide: one map in optical density, frozen into one certified table."""

from __future__ import annotations

from enum import StrEnum

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Colours, read_only
from hueferry.maps.affine import IDENTITY, AffineMap
from hueferry.maps.method import Method
from hueferry.maps.protocol import Map
from hueferry.slides.density import Density
from hueferry.slides.look import Look
from hueferry.slides.reference import SlideReference, density_palette
from hueferry.slides.register import Sample, register_distributions, register_pairs
from hueferry.slides.same_field import same_field
from hueferry.tables.cells import Occupied
from hueferry.tables.certificate import Certificate, certify, table_error
from hueferry.tables.table import Table

MAX_GAIN = 4.0
"""Stretch of codes that is accepted: a stain twice as strong stretches pale codes by two, by design."""

_PALE = 0.08
_CELLS = 4096
_DENSEST, _MARGIN = 0.995, 0.05


class SlideAim(StrEnum):
    """What a correction is for."""

    AGREE = "agree"
    """Bring stains and light together; leave differences of composition alone."""
    ADOPT = "adopt"
    """Take on the reference's densities fully, by transport in three dimensions."""


@attrs.frozen(eq=False)
class SlideFit:
    """A correction and what it rests on.

    Attributes:
        table: what is applied.
        certificate: measured on that very table.
        map: density of the slide to density of the reference.
        basis: "pairs", "palette", "adopt" or "none".
        sentences: what was done and why.
    """

    table: Table
    certificate: Certificate
    map: Map
    basis: str
    sentences: tuple[str, ...]


@attrs.frozen(eq=False)
class PinnedMap:
    """A map of densities that fades out towards the glass, so that bare glass keeps its density.

    Attributes:
        inner: density to density.
        pale: density below which it has faded.
    """

    inner: Map
    pale: float = _PALE

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) densities over."""
        strength = np.clip(np.linalg.norm(colours, axis=1) / (2 * self.pale), 0.0, 1.0)
        smooth = strength**2 * (3 - 2 * strength)
        return np.asarray(colours + smooth[:, None] * (self.inner(colours) - colours))


@attrs.frozen(eq=False)
class BoundedMap:
    """A map of densities that shifts what is unlike a slide's tissue as it shifts the nearest that is like it.

    A matrix in density is a product of powers in codes, which runs away where no tissue is, and most of all across the
    plane of the stains, where nothing tells how it should go: all of the table would have to be smoothed for colours
    that the slide does not hold.

    Attributes:
        inner: density to density.
        axes: (3, 3) columns: directions in which the slide's densities lie, the widest last.
        low: (3,) along these axes, where the shift begins to stay; glass, at 0, lies within.
        high: (3,) the same at the other end.
    """

    inner: Map
    axes: NDArray[np.float64] = attrs.field(converter=read_only)
    low: NDArray[np.float64] = attrs.field(converter=read_only)
    high: NDArray[np.float64] = attrs.field(converter=read_only)

    @classmethod
    def around(cls, inner: Map, density: Colours) -> BoundedMap:
        """Bound a map to the densities of a slide."""
        axes = np.linalg.eigh(density.T @ density)[1]
        ends = np.quantile(density @ axes, [1 - _DENSEST, _DENSEST], axis=0)
        return cls(inner, axes, np.minimum(ends[0], 0.0) - _MARGIN, np.maximum(ends[1], 0.0) + _MARGIN)

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) densities over."""
        held = np.clip(colours @ self.axes, self.low, self.high) @ self.axes.T
        return np.asarray(colours + self.inner(held) - held)


def fit_slide(
    look: Look,
    reference: SlideReference,
    *,
    aim: SlideAim = SlideAim.AGREE,
    strength: float = 1.0,
    max_gain: float | None = None,
    method: Method = Method.ENTROPIC,
) -> SlideFit:
    """Find the table that brings a slide towards its reference.

    Args:
        look: the slide.
        reference: what it is brought towards.
        aim: `agree` or `adopt`.
        strength: share of the way, 0 … 1.
        max_gain: largest stretch in code values; None means `MAX_GAIN`.
        method: the transport under `adopt`.
    """
    map_, basis, sentences = find_map(look, reference, aim=aim, method=method)
    if basis != "none":
        map_ = BoundedMap.around(map_, look.density)
    cap = MAX_GAIN if max_gain is None else max_gain
    table, certificate, more = freeze(map_, look, reference.scale(look.scale.encoding), strength=strength, max_gain=cap)
    if basis == "none":
        table, certificate, more = freeze(IDENTITY, look, look.scale, strength=0.0, max_gain=cap)
    return SlideFit(table, certificate, map_, basis, (*sentences, *more))


def find_map(
    look: Look, reference: SlideReference, *, aim: SlideAim, method: Method = Method.ENTROPIC
) -> tuple[Map, str, tuple[str, ...]]:
    """Return the map of densities, what it rests on, and sentences that say so."""
    if look.empty:
        return IDENTITY, "none", ("too little tissue was found, so nothing is changed",)
    encoding = look.scale.encoding
    if aim is SlideAim.ADOPT:
        from hueferry.maps.methods import fit_map

        target = density_palette(reference.sample(encoding).density)
        inner = fit_map(density_palette(look.density), target, method=method)
        return PinnedMap(inner), "adopt", ("the densities of the reference are taken on fully",)
    paired = _by_pairs(look, reference)
    if paired is not None:
        return paired[0], "pairs", (f"the same field is seen in both slides; {paired[1]:.3f} OD remain",)
    free = not (look.regions.glass.seen and reference.glass_seen)
    map_ = register_distributions(Sample(look.density, look.blocks), reference.sample(encoding), free_glass=free)
    return map_, "palette", ("stains were brought together by their distributions, composition discounted",)


def _by_pairs(look: Look, reference: SlideReference) -> tuple[AffineMap, float] | None:
    """Use the evidence of a field that both show, such as one slide on two scanners."""
    field = same_field(look, reference)
    if field is None:
        return None
    free = not (look.regions.glass.seen and reference.glass_seen)
    return register_pairs(field.source, field.reference, field.weights, free_glass=free)


def code_function(map_: Map, source: Density, target: Density, strength: float) -> _CodeMap:
    """Return codes to codes: density, the map, codes on the reference's glass."""
    glass = np.exp((1 - strength) * np.log(source.glass) + strength * np.log(target.glass))
    return _CodeMap(map_, source, Density(glass, source.encoding, source.light), strength)


@attrs.frozen(eq=False)
class _CodeMap:
    map: Map
    source: Density
    target: Density
    strength: float

    def __call__(self, codes: Codes) -> Codes:
        density = self.source.of(codes)
        carried = density + self.strength * (self.map(density) - density)
        # What is too dark for a density is handed on as it came, so that a map that moves nothing moves no code.
        return np.asarray(self.target.codes(carried) + codes - self.source.codes(density))


def freeze(
    map_: Map, look: Look, target: Density, *, strength: float, max_gain: float
) -> tuple[Table, Certificate, tuple[str, ...]]:
    """Sample a map into a table, make it safe, and certify that table."""
    from hueferry.tables.build import SIZES, input_curves, sample_table
    from hueferry.tables.make import MOST_CODES
    from hueferry.tables.regularise import make_safe

    encoding, function = look.scale.encoding, code_function(map_, look.scale, target, strength)
    occupied = occupied_codes(look)
    for size in SIZES:
        table = sample_table(function, size=size, curves=input_curves(encoding, size))
        safe, how = make_safe(table, occupied=occupied, encoding=encoding, max_gain=max_gain)
        error = table_error(safe, function, occupied, encoding=encoding)
        if how.needed or error.high <= MOST_CODES:
            break
    certificate = certify(safe, occupied=occupied, encoding=encoding, max_gain=max_gain, error=error)
    return safe, certificate, (*certificate.sentences(), *how.sentences())


def occupied_codes(look: Look) -> Occupied:
    """Return the codes that the slide holds: its tissue, and its glass."""
    step = max(1, len(look.codes) // _CELLS)
    tissue = look.codes[::step]
    weights = np.append(np.full(len(tissue), 0.9 / max(len(tissue), 1)), 0.1)
    return Occupied(np.concatenate([tissue, look.scale.glass[None, :]]), weights / weights.sum())
