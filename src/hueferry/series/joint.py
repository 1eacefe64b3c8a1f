"""All maps of a series at once: every picture's camera map, so that linked surfaces come out alike everywhere.

Unknown are fifteen numbers a picture. A link asks that a surface, carried over from either of its two pictures, comes
out the same. One number more, common to all, says how lenses darken corners: left out, it would make a chain of
overlapping pictures drift. References are fixed. All links are heard together, so an error in one is outvoted by the
loops around it, and nothing adds up along a chain.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Linear, Weights, read_only
from hueferry.colour.spaces import oklab_to_linear_srgb
from hueferry.evidence.camera import NAMES, SIZE, Parameters, render
from hueferry.evidence.prior import Prior
from hueferry.evidence.sensitivities import sensitivities
from hueferry.series.candidates import Pair
from hueferry.series.links import Link

if TYPE_CHECKING:
    from scipy.sparse import csc_array

Planes = NDArray[np.float64]

HEAVY = 4.0
"""Degrees of freedom of the Student likelihood of a pair of colours."""

LEAST_SCALE = 0.006
"""Oklab; what rounding and sharpness leave at best."""

_SCALES = (0.06, 0.04, 0.025, 0.015, 0.01, *(LEAST_SCALE,) * 12)
"""Smallest scale in each step, from wide to narrow."""

_SETTLED = 0.02
"""Largest step, in deviations of the prior, after which nothing moves any more."""

STIFF = 0.05
"""Share of its usual deviation that the knee keeps: it and the shoulder do alike, and the two would seesaw."""

FALLOFF = 0.03
"""Deviation of the falloff of light towards the corners, as a share of Oklab lightness."""

MOST_FALLOFF = 0.3
"""Largest falloff that is thought of, either way."""

_STEP = 1e-4
_FARTHEST = 3.0
"""Deviations by which a colour is moved towards its partner at most, when slopes are read."""


@attrs.frozen(eq=False)
class JointFit:
    """The camera maps of a series.

    Attributes:
        parameters: (n, 15) of each picture.
        scales: (links,) robust deviation between the two sides of each link, Oklab, a channel.
        trust: (links,) how far each link was believed, 0 … 1.
        falloff: how much darker the corners of all pictures are than the middle, as a share of Oklab lightness.
        precision: (n, 15, 15) of each picture's parameters, its partners being right: links and prior.
        steps: steps taken.
    """

    parameters: Parameters = attrs.field(converter=read_only)
    scales: NDArray[np.float64] = attrs.field(converter=read_only)
    trust: NDArray[np.float64] = attrs.field(converter=read_only)
    falloff: float
    precision: Planes = attrs.field(converter=read_only)
    steps: int


@attrs.frozen(eq=False)
class _Side:
    """What one picture has in all its links: light (m, 3), and which rows belong to which link and end."""

    light: Linear
    spans: tuple[tuple[int, int, slice], ...]


@attrs.frozen(eq=False)
class _Gaps:
    """Of every link: its (n, 3) gap, the (15, 3 n) slopes of both ends, and the (n, 3) slope of the falloff."""

    gaps: Sequence[Planes]
    slopes: Sequence[Sequence[Planes]]
    lifted: Sequence[Planes]


def solve_joint(links: Mapping[Pair, Link], priors: Sequence[Prior], fixed: Mapping[int, Parameters]) -> JointFit:
    """Solve the camera maps of all pictures together.

    Iterated reweighting with Gauss-Newton steps on the sparse normal equations. Slopes are read halfway between the
    two sides of a pair: read at a noisy colour they would favour maps that shrink the noise, link by link.

    Args:
        links: by (i, j), i < j.
        priors: of each picture: what is known of its map before looking.
        fixed: (15,) parameters of pictures that stay: the references. Every group of linked pictures should have one.

    References:
        Lange, Little & Taylor (1989) for the Student likelihood; Triggs et al. (2000), Bundle adjustment: a modern
        synthesis, section 6 (sparse normal equations), section 9 (gauge); Fuller (1987), Measurement error models,
        section 2.4 (slopes and errors that do not know of each other); Goldman (2010), Vignette and exposure
        calibration and compensation (the falloff).
    """
    ends, found = list(links), list(links.values())
    priors = [_stiffened(prior) for prior in priors]
    sides = _sides(len(priors), ends, found)
    parameters = np.array([fixed.get(index, prior.mean) for index, prior in enumerate(priors)])
    trust = np.ones(len(ends))
    scales = np.full(len(ends), _SCALES[0])
    falloff, taken = 0.0, 0
    for blur in _SCALES:
        read = _read(sides, parameters, scales, found, falloff)
        weights, scales = _weigh(read.gaps, found, blur)
        trust = _believe(scales)
        normal = _normal_equations(read, _weighted(weights, scales, trust), ends, parameters, priors)
        step, lift = _step(normal, priors, fixed, falloff)
        parameters, falloff = parameters + step, float(np.clip(falloff + lift, -MOST_FALLOFF, MOST_FALLOFF))
        taken += 1
        largest = max(float(np.abs(one / prior.deviations).max()) for one, prior in zip(step, priors, strict=True))
        if blur == LEAST_SCALE and largest < _SETTLED:
            break
    return JointFit(parameters, scales, trust, falloff, normal.diagonal, taken)


def _stiffened(prior: Prior) -> Prior:
    factor = np.ones(SIZE)
    factor[NAMES.index("knee")] = 1 / STIFF
    return Prior(prior.mean, prior.precision * np.outer(factor, factor))


def _sides(count: int, ends: Sequence[Pair], links: Sequence[Link]) -> list[_Side]:
    colours: list[list[Colours]] = [[] for _ in range(count)]
    spans: list[list[tuple[int, int, slice]]] = [[] for _ in range(count)]
    filled = [0] * count
    for number, (pair, link) in enumerate(zip(ends, links, strict=True)):
        for end, (index, seen) in enumerate(zip(pair, (link.first, link.second), strict=True)):
            colours[index].append(seen)
            spans[index].append((number, end, slice(filled[index], filled[index] + len(seen))))
            filled[index] += len(seen)
    return [
        _Side(oklab_to_linear_srgb(np.concatenate(some)) if some else np.empty((0, 3)), tuple(span))
        for some, span in zip(colours, spans, strict=True)
    ]


def _read(
    sides: Sequence[_Side], parameters: Parameters, scales: Planes, links: Sequence[Link], falloff: float
) -> _Gaps:
    """Carry all colours over, lift them by `falloff`, and read gaps and slopes."""
    carried: list[list[Planes]] = [[np.empty(0)] * 2 for _ in links]
    slopes: list[list[Planes]] = [[np.empty(0)] * 2 for _ in links]
    linked = [(side, own) for side, own in zip(sides, parameters, strict=True) if side.spans]
    for side, own in linked:
        out = render(own, side.light)
        for number, end, rows in side.spans:
            carried[number][end] = out[rows]
    lifts = [1 / (1 - falloff * link.out) for link in links]
    gaps = [second * lift[:, 1:] - first * lift[:, :1] for (first, second), lift in zip(carried, lifts, strict=True)]
    for side, own in linked:
        wanted = np.concatenate([_halfway(gaps[number], end, scales[number]) for number, end, _ in side.spans])
        slope = sensitivities(own, move_light(own, side.light, wanted))[1]
        for number, end, rows in side.spans:
            slopes[number][end] = (slope[:, :, rows] * lifts[number][:, end]).reshape(SIZE, -1)
    lifted = [
        (first * lift[:, :1] + second * lift[:, 1:]) / 2 * np.diff(link.out * lift, axis=1)
        for (first, second), lift, link in zip(carried, lifts, links, strict=True)
    ]
    return _Gaps(gaps, slopes, lifted)


def _halfway(gap: Planes, end: int, scale: float) -> Planes:
    half = gap / 2 if end == 0 else gap / -2
    limit = _FARTHEST * scale
    return np.asarray(half * np.minimum(1.0, limit / np.maximum(np.linalg.norm(half, axis=1, keepdims=True), 1e-12)))


def move_light(own: Parameters, light: Linear, wanted: Planes) -> Linear:
    """Move (n, 3) light so that its image moves by (n, 3) `wanted`, to first order."""
    step = _STEP + 0.01 * np.abs(light)
    base = render(own, light)
    columns = [(render(own, light + step * axis) - base) / step[:, [k]] for k, axis in enumerate(np.eye(3))]
    jacobian = np.stack(columns, axis=2)
    shift = np.linalg.solve(jacobian + 1e-6 * np.eye(3), wanted[:, :, None])[:, :, 0]
    limit = 0.5 * (np.abs(light).max(axis=1, keepdims=True) + 0.01)
    return np.asarray(light + np.clip(shift, -limit, limit))


def _weigh(gaps: Sequence[Planes], links: Sequence[Link], blur: float) -> tuple[list[Weights], NDArray[np.float64]]:
    """Return the weight of every pair of colours, and the scale of every link."""
    weights, scales = [], np.empty(len(gaps))
    for number, (gap, link) in enumerate(zip(gaps, links, strict=True)):
        squared = (gap**2).sum(axis=1)
        scales[number] = max(_spread(squared, link.weights), blur)
        weights.append(link.weights * (HEAVY + 3) / (HEAVY + squared / scales[number] ** 2))
    return weights, scales


def _spread(squared: Planes, weights: Weights) -> float:
    """Weighted median of squared distances as a deviation a channel (a chi-square of 3 has median 2.366)."""
    order = np.argsort(squared, kind="stable")
    total = np.cumsum(weights[order])
    return float(np.sqrt(squared[order][np.searchsorted(total, total[-1] / 2)] / 2.366))


def _believe(scales: NDArray[np.float64]) -> NDArray[np.float64]:
    """Believe links less whose two sides stay farther apart than those of most."""
    if not len(scales):
        return scales
    usual = max(float(np.median(scales)), LEAST_SCALE)
    return np.asarray(1 / (1 + (scales / (2.5 * usual)) ** 4))


def _weighted(weights: Sequence[Weights], scales: Planes, trust: Planes) -> list[Weights]:
    return [weight * (t / s**2) for weight, s, t in zip(weights, scales, trust, strict=True)]


@attrs.frozen(eq=False)
class _Normal:
    """Normal equations.

    Attributes:
        diagonal: (n, 15, 15) blocks.
        across: (15, 15) blocks by pair.
        right: (n, 15) right side.
        border: (n, 15) what ties each picture to the falloff.
        corner: what the links know of the falloff, and its right side.
    """

    diagonal: Planes
    across: Mapping[Pair, Planes]
    right: Planes
    border: Planes
    corner: tuple[float, float]


def _normal_equations(
    read: _Gaps, weights: Sequence[Weights], ends: Sequence[Pair], parameters: Parameters, priors: Sequence[Prior]
) -> _Normal:
    diagonal = np.array([prior.precision for prior in priors])
    right = np.array([p.precision @ (p.mean - own) for p, own in zip(priors, parameters, strict=True)])
    border, across, corner = np.zeros_like(right), {}, np.zeros(2)
    for (i, j), gap, (first, second), lifted, weight in zip(
        ends, read.gaps, read.slopes, read.lifted, weights, strict=True
    ):
        say, lack, lift = np.tile(weight, 3), gap.T.ravel(), lifted.T.ravel()
        ours, theirs = first * say, second * say
        diagonal[i] += ours @ first.T
        diagonal[j] += theirs @ second.T
        right[i] += ours @ lack
        right[j] -= theirs @ lack
        border[i] -= ours @ lift
        border[j] += theirs @ lift
        across[i, j] = -ours @ second.T
        corner += (lift * say) @ np.column_stack([lift, -lack])
    return _Normal(diagonal, across, right, border, (float(corner[0]), float(corner[1])))


def _step(
    normal: _Normal, priors: Sequence[Prior], fixed: Mapping[int, Parameters], falloff: float
) -> tuple[Parameters, float]:
    """Solve the normal equations for the (n, 15) step, bounded, 0 for what is fixed; and for that of the falloff."""
    from scipy.sparse.linalg import splu

    free = np.ones((len(priors), 1))
    free[list(fixed)] = 0.0
    solver = splu(_matrix(normal, fixed), permc_spec="MMD_AT_PLUS_A", options={"SymmetricMode": True})
    right, border = (normal.right * free).ravel(), (normal.border * free).ravel()
    alone, along = solver.solve(right), solver.solve(border)
    known, wanted = normal.corner[0] + FALLOFF**-2, normal.corner[1] - falloff * FALLOFF**-2
    lift = float((wanted - border @ alone) / (known - border @ along))
    step = (alone - lift * along).reshape(len(priors), SIZE)
    reach = np.array([np.abs(one / prior.deviations).max() for one, prior in zip(step, priors, strict=True)])
    return np.asarray(step * np.minimum(1.0, 4.0 / np.maximum(reach, 1e-12))[:, None]), lift


def _matrix(normal: _Normal, fixed: Mapping[int, Parameters]) -> csc_array:
    """Return the sparse matrix of the normal equations, columns first; what is fixed stands apart."""
    from scipy.sparse import bsr_array

    count = len(normal.right)
    diagonal = normal.diagonal.copy()
    diagonal[list(fixed)] = np.eye(SIZE)
    across = {pair: block for pair, block in normal.across.items() if not fixed.keys() & set(pair)}
    rows = np.array([*range(count), *(i for i, _ in across), *(j for _, j in across)])
    columns = np.array([*range(count), *(j for _, j in across), *(i for i, _ in across)])
    blocks = np.array([*diagonal, *across.values(), *(block.T for block in across.values())])
    order = np.lexsort((columns, rows))
    starts = np.searchsorted(rows[order], np.arange(count + 1))
    return bsr_array((blocks[order], columns[order], starts), shape=(count * SIZE, count * SIZE)).tocsc()
