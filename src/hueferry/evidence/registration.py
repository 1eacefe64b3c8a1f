"""Registering two scenes: the change of light under which their stuff looks alike.

Both pictures are taken as samples of one mixture of stuff (colour and texture), in any proportions. The change of
light is found by expectation and maximisation with a uniform share for stuff that the other picture does not have:
no mass has to be moved anywhere, which is what separates this from transport between palettes.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours
from hueferry.colour.spaces import oklab_to_linear_srgb
from hueferry.evidence.camera import SIZE, Parameters, render
from hueferry.evidence.prior import Prior
from hueferry.evidence.scene import Scene
from hueferry.evidence.sensitivities import sensitivities

BLURS = (0.15, 0.1, 0.07, 0.05, 0.05, 0.04, 0.04, 0.03, 0.03, 0.03)
"""Oklab distance at which two colours are still taken for the same, from step to step."""

TEXTURE = 0.4
"""The same for log texture."""

FOREIGN = 0.2
"""Share of a patch's chance kernel mass that stands for stuff the other picture does not have."""

WORTH = 24.0
"""Independent patches that a scene of any number of patches is worth: neighbours show the same stuff."""

_LEAST_SCALE = 0.03


def register(source: Scene, reference: Scene, prior: Prior) -> Parameters:
    """Return the (15,) change of light under which `source` looks most like `reference`.

    A blurred matching draws colours together; what it does to the source matched with itself is taken off, so that
    equal scenes stand still (the same repair as the debiased divergences of Feydy et al. 2019).

    References:
        Myronenko & Song (2010), Point set registration: coherent point drift, for the mixture with a uniform share;
        Student reweighting as in `fit_camera`.
    """
    light = oklab_to_linear_srgb(source.colours)
    across = _texture_kernel(source, reference, TEXTURE)
    within = _texture_kernel(source, source, TEXTURE)
    parameters = np.array(prior.mean)
    for blur in BLURS:
        rendered, slope = sensitivities(parameters, light)
        goal, mass = _matched(across, rendered, reference.colours, blur)
        drawn, _ = _matched(within, rendered, rendered, blur)
        scale = max(0.7 * blur, _LEAST_SCALE)
        parameters = parameters + _step(parameters, goal - drawn, slope, mass * WORTH, scale, prior)
    return parameters


def _matched(
    alike: NDArray[np.float64], ours: Colours, theirs: Colours, blur: float
) -> tuple[Colours, NDArray[np.float64]]:
    """Return (n, 3) what each of `ours` is matched with on average, and (n,) the mass of it that finds a match."""
    n, m = alike.shape
    kernel = alike * _colour_kernel(ours, theirs, blur)
    foreign_here = FOREIGN * alike.mean(axis=1, keepdims=True) + 1e-9
    foreign_there = FOREIGN * alike.mean(axis=0) + 1e-9
    plan = kernel / (kernel.mean(axis=0) + foreign_there)
    plan += kernel / (kernel.mean(axis=1, keepdims=True) + foreign_here)
    mass = plan.sum(axis=1)
    return (plan @ theirs) / np.maximum(mass, 1e-12)[:, None], mass / (2 * n * m)


def _step(
    parameters: Parameters, residual: Colours, slope: NDArray[np.float64], trust: NDArray[np.float64], scale: float,
    prior: Prior,
) -> Parameters:  # fmt: skip
    say = trust * 7 / (4 + (residual**2).sum(axis=1) / scale**2) / scale**2
    weighted = (slope * say).reshape(SIZE, -1)
    precision = weighted @ slope.reshape(SIZE, -1).T + prior.precision
    gradient = weighted @ residual.T.ravel() - prior.precision @ (parameters - prior.mean)
    step = np.linalg.solve(precision, gradient)
    return np.asarray(step * min(1.0, 2.0 / max(float(np.abs(step / prior.deviations).max()), 1e-12)))


def explained(source: Scene, reference: Scene, parameters: Parameters) -> float:
    """Return how much of each picture the other one has under `parameters`, 0 … 1; the smaller of the two shares."""
    rendered = render(parameters, oklab_to_linear_srgb(source.colours))
    kernel = _texture_kernel(source, reference, 0.5) * _colour_kernel(rendered, reference.colours, 0.025)
    here, there = 100 * kernel.mean(axis=1), 100 * kernel.mean(axis=0)
    return float(min((here / (here + 1)).mean(), (there / (there + 1)).mean()))


def _colour_kernel(ours: Colours, theirs: Colours, blur: float) -> NDArray[np.float64]:
    squared = (ours**2).sum(axis=1)[:, None] + (theirs**2).sum(axis=1) - 2 * ours @ theirs.T
    return np.asarray(np.exp(squared / (-2 * blur * blur)))


def _texture_kernel(source: Scene, reference: Scene, width: float) -> NDArray[np.float64]:
    return _colour_kernel(source.textures, reference.textures, width)
