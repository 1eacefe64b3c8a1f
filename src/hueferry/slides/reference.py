"""What slides are brought towards: one slide, or several as a house palette that no outlier dominates."""

from __future__ import annotations

from collections.abc import Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, read_only
from hueferry.errors import InputError
from hueferry.maps.gaussian import fit_gaussian
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding, Picture
from hueferry.slides.density import Density, Light
from hueferry.slides.look import Look
from hueferry.slides.register import Sample
from hueferry.slides.stains import Stains, common_stains, stains_of

_EACH = 20_000
_OF_PALETTE = 256


@attrs.frozen(eq=False)
class SlideReference:
    """Tissue colours and glass that slides are brought towards.

    Attributes:
        codes: (n, 3) codes of tissue.
        blocks: (n,) which block of which slide each comes from.
        glass: (3,) codes of the glass.
        glass_seen: whether bare glass was seen.
        encoding: how codes stand for colour.
        light: what Beer–Lambert's law is applied to.
        picture: the thumbnail, where there is one slide only: the same field may be seen in it.
        shares: (k,) how much each slide counts.
        stains: the stains of the slides, as most of them have them; None where they cannot be told.
    """

    codes: Codes = attrs.field(converter=read_only)
    blocks: NDArray[np.int64]
    glass: NDArray[np.float64] = attrs.field(converter=read_only)
    glass_seen: bool
    encoding: Encoding
    light: Light
    picture: Picture | None
    shares: tuple[float, ...]
    stains: Stains | None = None

    def scale(self, encoding: Encoding) -> Density:
        """Return the density scale of the reference for slides in `encoding`."""
        return Density(
            np.clip(between(self.glass[None, :], self.encoding, encoding)[0], 0.02, 1.0), encoding, self.light
        )

    def sample(self, encoding: Encoding) -> Sample:
        """Return the reference's tissue densities as a slide in `encoding` would show them."""
        return Sample(self.scale(encoding).of(between(self.codes, self.encoding, encoding)), self.blocks)


def reference_of(looks: Sequence[Look]) -> SlideReference:
    """Make a reference from slides: their robust barycentre in density, and the weighted median of their glass.

    Each slide is carried to the common palette by its Gaussian map; with three or more, outliers count less.

    Raises:
        InputError: no slide with tissue was given.
    """
    from hueferry.transport.barycentre import common_palette, robust_shares

    useful = [look for look in looks if not look.empty]
    if not useful:
        raise InputError("no reference slide shows enough tissue; give a slide with stained tissue")
    first = useful[0]
    if len(useful) == 1:
        return SlideReference(
            first.codes, first.blocks, first.scale.glass, first.regions.glass.seen,
            first.scale.encoding, first.scale.light, first.picture, (1.0,), stains_of(first.density),
        )  # fmt: skip
    even = np.full(len(useful), 1 / len(useful))
    palettes = [density_palette(look.density) for look in useful]
    shares, common = robust_shares(palettes, even), common_palette(palettes)
    glass = np.array([_glass_in(look, first.scale.encoding) for look in useful])
    scale = Density(_weighted_median(glass, shares), first.scale.encoding, first.scale.light)
    parts = []
    for number, (look, palette, share) in enumerate(zip(useful, palettes, shares, strict=True)):
        index = np.linspace(0, len(look.density) - 1, max(int(share * _EACH), 1)).astype(np.int64)
        carried = fit_gaussian(palette, common)(look.density[index])
        parts.append((np.clip(scale.codes(carried), 0.0, 1.0), look.blocks[index] + 1000 * number))
    return SlideReference(
        np.concatenate([codes for codes, _ in parts]), np.concatenate([blocks for _, blocks in parts]),
        scale.glass, all(look.regions.glass.seen for look in useful),
        first.scale.encoding, first.scale.light, None, tuple(float(share) for share in shares),
        common_stains([found for look in useful if (found := stains_of(look.density)) is not None]),
    )  # fmt: skip


def density_palette(density: NDArray[np.float64], size: int = _OF_PALETTE) -> Palette:
    """Return (n, 3) densities as a palette in optical density of at most `size` colours, taken at even steps."""
    from hueferry.palettes.reduce import thin

    points = density[:: max(1, len(density) // (16 * size))]
    return thin(Palette(points, np.full(len(points), 1 / len(points))), size)


def _glass_in(look: Look, encoding: Encoding) -> NDArray[np.float64]:
    return np.asarray(between(look.scale.glass[None, :], look.scale.encoding, encoding)[0])


def _weighted_median(values: NDArray[np.float64], shares: NDArray[np.float64]) -> NDArray[np.float64]:
    order = np.argsort(values, axis=0)
    total = np.cumsum(shares[order], axis=0)
    place = (total < 0.5 * total[-1]).sum(axis=0)
    return np.asarray(np.take_along_axis(np.take_along_axis(values, order, axis=0), place[None, :], axis=0)[0])


def between(codes: Codes, given: Encoding, wanted: Encoding) -> Codes:
    """Return (n, 3) codes of one encoding in another, clipped to what it holds."""
    if given is wanted or given.profile == wanted.profile:
        return codes
    return np.clip(wanted.from_xyz(given.to_xyz(codes)), 0.0, 1.0)
