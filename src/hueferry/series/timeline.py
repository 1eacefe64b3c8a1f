"""Time-lapse: take flicker out, and keep what changes slowly."""

from __future__ import annotations

from collections.abc import Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Linear, Weights, read_only
from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_linear_srgb
from hueferry.evidence.camera import CameraMap, Parameters, render
from hueferry.evidence.estimate import fit_camera
from hueferry.evidence.prior import no_change
from hueferry.series.joint import move_light
from hueferry.series.views import View

FEWEST = 4
"""Pictures below which there is no time-lapse."""

PRICE = 2.0
"""What one more term costs, over Schwarz's criterion: flicker has three channels in which it may look like a course."""

_ROUNDS = 6
_NEWTON = 12
_PAIRS = 4000.0
_SAMPLE = 400


@attrs.frozen(eq=False)
class Trend:
    """What changes slowly over a series.

    Attributes:
        parameters: (n, 15) smoothed camera maps.
        terms: how many numbers describe each parameter's course: 1 is no change, 2 a straight line, more a curve.
        steadiness: (n,) 1 for frames that were heard in full, towards 0 for flashes.
    """

    parameters: Parameters = attrs.field(converter=read_only)
    terms: int
    steadiness: Weights = attrs.field(converter=read_only)


def capture_times(views: Sequence[View]) -> NDArray[np.float64]:
    """Return (n,) capture times where all are known and differ, else the places in the order given."""
    known = np.array([view.taken for view in views if view.taken is not None], dtype=np.float64)
    if len(known) < len(views) or len(np.unique(known)) < len(views):
        return np.arange(len(views), dtype=np.float64)
    return known


def find_trend(parameters: Parameters, times: NDArray[np.float64], colours: Colours) -> Trend:
    """Smooth the camera maps of a series over time.

    One smoother serves all parameters, so that what two of them do against each other stays in balance: regression on
    Legendre polynomials, at most two for every root of a frame, as many as the Bayesian information criterion finds
    worth having in what the maps make of `colours`. Frames far from the course, flashes, lose their say.

    Args:
        parameters: (n, 15) camera maps to one common rendering.
        times: (n,) of the frames.
        colours: (m, 3) Oklab colours on which maps are compared.

    References:
        Schwarz (1978), Estimating the dimension of a model; Rakhmanov (2007), Bounds for polynomials with a unit
        discrete norm (how many polynomials equal steps can bear).
    """
    light = oklab_to_linear_srgb(colours)
    looks = np.stack([render(own, light).ravel() for own in parameters])
    count = len(times)
    most = max(1, min(int(2 * np.sqrt(count)), count // 4))
    best, trend = np.inf, None
    for terms in range(1, most + 1):
        hat, steadiness, left = _smooth(looks, _basis(times, terms))
        score = count * np.log(max(left, 1e-12)) + PRICE * terms * np.log(count)
        if score < best - 1e-9:
            best, trend = score, Trend(hat @ parameters, terms, steadiness)
    assert trend is not None  # noqa: S101 - one term is always tried
    return trend


def _basis(times: NDArray[np.float64], terms: int) -> NDArray[np.float64]:
    span = max(float(np.ptp(times)), 1e-9)
    return np.polynomial.legendre.legvander(2 * (times - times.min()) / span - 1, terms - 1)


def _smooth(looks: Colours, basis: NDArray[np.float64]) -> tuple[NDArray[np.float64], Weights, float]:
    """Return the (n, n) smoother, the say of each frame, and the mean square it leaves."""
    say = np.ones(len(looks))
    for _ in range(_ROUNDS):
        root = np.sqrt(say)[:, None]
        hat = basis @ np.linalg.pinv(basis * root) * root.T
        squared = ((looks - hat @ looks) ** 2).mean(axis=1)
        usual = max(float(np.median(squared)), 1e-10)
        say = 1 / (1 + (squared / (12 * usual)) ** 2)
    return hat, say, float((say * squared).sum() / say.sum())


def steadying_map(own: Parameters, smooth: Parameters, colours: Colours) -> CameraMap:
    """Return the map that gives a frame the look of the trend: its own map, then the trend's undone.

    Args:
        own: (15,) the frame's map to the common rendering.
        smooth: (15,) the trend's.
        colours: (n, 3) Oklab colours of the frame.
    """
    some = colours[:: max(1, len(colours) // _SAMPLE)]
    wanted = linear_srgb_to_oklab(_undone(smooth, render(own, oklab_to_linear_srgb(some))))
    estimate = fit_camera(some, wanted, weights=np.ones(len(some)), prior=no_change(), effective=_PAIRS)
    return estimate.map


def _undone(parameters: Parameters, colours: Colours) -> Linear:
    """Return (n, 3) light that `parameters` render as `colours`, by Newton's method."""
    light = oklab_to_linear_srgb(colours)
    for _ in range(_NEWTON):
        light = np.maximum(move_light(parameters, light, colours - render(parameters, light)), 0.0)
    return light
