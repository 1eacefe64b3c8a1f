"""The camera map that pairs of colours and the prior support, and how sure it is."""

from __future__ import annotations

from collections.abc import Callable

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_lab, oklab_to_linear_srgb
from hueferry.evidence.camera import SIZE, CameraMap, Parameters, render
from hueferry.evidence.prior import Prior
from hueferry.evidence.sensitivities import sensitivities

Ends = NDArray[np.bool_]

HEAVY = 4.0
"""Degrees of freedom of the Student likelihood: gross errors lose their say."""

_LEAST_SCALE = 0.006
"""Oklab; what 8-bit rounding and sharpness leave at best."""

_SCALES = (0.06, 0.04, 0.025, 0.015, 0.01, 0.006, 0.004, *(_LEAST_SCALE,) * 8)
"""Smallest scale in each step: from wide to narrow, so that a majority of one colour cannot shut the others out."""

_NARROW = 4
"""Steps that a fit from a good guess leaves out."""


@attrs.frozen(eq=False)
class Estimate:
    """A camera map with its posterior.

    Attributes:
        map: the most plausible member of the family.
        covariance: (15, 15) of its parameters.
        scale: robust deviation of the pairs from the map, in Oklab, a channel.
    """

    map: CameraMap
    covariance: NDArray[np.float64] = attrs.field(converter=read_only)
    scale: float


def fit_camera(
    source: Colours,
    reference: Colours,
    *,
    weights: NDArray[np.float64],
    prior: Prior,
    effective: float,
    ends: tuple[Ends, Ends] | None = None,
    start: Parameters | None = None,
) -> Estimate:
    """Find the most plausible camera map by iterated reweighting and Gauss-Newton steps (Fisher scoring).

    Args:
        source: (n, 3) Oklab.
        reference: (n, 3) Oklab.
        weights: (n,) trust, any scale.
        prior: what is known before looking.
        effective: how many independent pairs these n are worth; > 0.
        ends: (n, 3) where a channel of the reference is clipped at its lower, and at its upper end; None for nowhere.
        start: (15,) a guess that is near already; None for the prior's mean.

    References:
        Lange, Little & Taylor (1989), Robust statistical modeling using the t distribution.
    """
    light = oklab_to_linear_srgb(source)
    trust = weights * (effective / weights.sum())
    parameters = np.array(prior.mean if start is None else start)
    for blur in _SCALES if start is None else _SCALES[_NARROW:]:
        rendered, slope = sensitivities(parameters, light)
        residual = reference - rendered if ends is None else lacking(rendered, reference, low=ends[0], high=ends[1])
        squared = (residual**2).sum(axis=1)
        scale = max(_spread(squared, trust), blur)
        say = trust * (HEAVY + 3) / (HEAVY + squared / scale**2)
        weighted = (slope * (say / scale**2)).reshape(SIZE, -1)
        precision = weighted @ slope.reshape(SIZE, -1).T + prior.precision
        gradient = weighted @ residual.T.ravel() - prior.precision @ (parameters - prior.mean)
        step = np.linalg.solve(precision, gradient)
        step *= min(1.0, 3.0 / max(float(np.abs(step / prior.deviations).max()), 1e-12))
        parameters = parameters + step
        if blur == _LEAST_SCALE and float(step @ precision @ step) < 1e-2:
            break
    return Estimate(CameraMap(parameters), np.linalg.inv(precision), scale)


def lacking(carried: Colours, reference: Colours, *, low: Ends, high: Ends) -> Colours:
    """Return (n, 3) what `carried` colours lack of `reference`, whose clipped channels are bounds and not values.

    A channel clipped at its upper end is met by anything above, one clipped at its lower end by anything below.
    """
    residual = reference - carried
    rows = (low | high).any(axis=1)
    if rows.any():
        light, ours = oklab_to_linear_srgb(reference[rows]), oklab_to_linear_srgb(carried[rows])
        light = np.where(high[rows], np.maximum(light, ours), np.where(low[rows], np.minimum(light, ours), light))
        residual[rows] = linear_srgb_to_oklab(light) - carried[rows]
    return residual


def _spread(squared: NDArray[np.float64], trust: NDArray[np.float64]) -> float:
    """Weighted median of squared distances as a deviation a channel (a chi-square of 3 has median 2.366)."""
    order = np.argsort(squared)
    total = np.cumsum(trust[order])
    return float(np.sqrt(squared[order][np.searchsorted(total, total[-1] / 2)] / 2.366))


def expected_error(
    map_: Callable[[Colours], Colours], parameters: Parameters, covariance: NDArray[np.float64], colours: Colours
) -> float:
    """Return the mean ΔE00 that the posterior still leaves between `map_` and the right map, on (n, 3) `colours`.

    The posterior stands in for the unknown map by one deviation to both sides along each of its principal axes.
    """
    values, axes = np.linalg.eigh(covariance)
    spreads = np.sqrt(np.maximum(values, 0.0))[:, None] * axes.T
    sides = render(np.concatenate([parameters + spreads, parameters - spreads]), oklab_to_linear_srgb(colours))
    differences = delta_e_2000(oklab_to_lab(sides), oklab_to_lab(map_(colours)))
    return float(np.sqrt((differences**2).sum(axis=0) / 2).mean())
