"""Which fitter stands behind the name of a method."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

from hueferry.maps.entropic import fit_entropic
from hueferry.maps.exact import fit_exact
from hueferry.maps.gaussian import fit_gaussian
from hueferry.maps.method import Method
from hueferry.maps.mixture import fit_mixture
from hueferry.maps.protocol import Map
from hueferry.maps.sliced import fit_channels, fit_sliced
from hueferry.palettes.palette import Palette

Fitter = Callable[[Palette, Palette, int], Map]
"""(source, target, seed) to a map."""

FITTERS: Mapping[Method, Fitter] = MappingProxyType(
    {
        Method.GAUSSIAN: lambda source, target, _: fit_gaussian(source, target),
        Method.CHANNELS: lambda source, target, _: fit_channels(source, target),
        Method.SLICED: lambda source, target, seed: fit_sliced(source, target, seed=seed),
        Method.ENTROPIC: lambda source, target, _: fit_entropic(source, target),
        Method.EXACT: lambda source, target, _: fit_exact(source, target),
        Method.MIXTURE: lambda source, target, seed: fit_mixture(source, target, seed=seed),
    }
)


def fit_map(source: Palette, target: Palette, *, method: Method, seed: int = 0) -> Map:
    """Fit a map from one palette to another by the named method; equal arguments give equal maps."""
    return FITTERS[method](source, target, seed)
