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
from hueferry.tables.cells import Occupied
from hueferry.tables.certificate import Certificate, certify, table_error
from hueferry.tables.table import Table

MAX_GAIN = 4.0
"""Stretch of codes that is accepted: a stain twice as strong stretches pale codes by two, by design."""

_LEAST_PAIRS = 300
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
    """A map of densities that shifts what is denser than a slide's tissue as it shifts the densest tissue.

    A matrix in density is a product of powers in codes, which runs away where no tissue is: all of the table would
    have to be smoothed for colours that the slide does not hold.

    Attributes:
        inner: density to density.
        densest: (3,) density beyond which the shift stays.
    """

    inner: Map
    densest: NDArray[np.float64] = attrs.field(converter=read_only)

    @classmethod
    def around(cls, inner: Map, density: Colours) -> BoundedMap:
        """Bound a map to the densities of a slide."""
        return cls(inner, np.quantile(density, _DENSEST, axis=0) + _MARGIN)

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) densities over."""
        held = np.clip(colours, -_MARGIN, self.densest)
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
    if reference.picture is None or min(look.thumbnail.shape[:2]) < 64:
        return None
    from hueferry.colour.encoding import from_oklab
    from hueferry.evidence.pairs import find_pairs
    from hueferry.evidence.reduced import reduce_picture

    pairs = find_pairs(reduce_picture(look.picture), reduce_picture(reference.picture))
    if pairs is None or len(pairs) < _LEAST_PAIRS:
        return None
    encoding = look.scale.encoding
    here = look.scale.of(np.clip(from_oklab(encoding, pairs.source), 0.0, 1.0))
    there = reference.scale(encoding).of(np.clip(from_oklab(encoding, pairs.reference), 0.0, 1.0))
    free = not (look.regions.glass.seen and reference.glass_seen)
    return register_pairs(here, there, pairs.weights, free_glass=free)


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
