"""What one reference says about the change, and how several are heard together."""

from __future__ import annotations

from collections.abc import Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.colour.spaces import oklab_to_linear_srgb
from hueferry.evidence.camera import SIZE, Parameters, render
from hueferry.evidence.evidence import Basis
from hueferry.evidence.pairs import Pairs
from hueferry.evidence.prior import Prior
from hueferry.evidence.refine import Correction

Precision = NDArray[np.float64]

ALIKE = 0.1
"""How far references that mean the same may differ, as a share of the prior's deviation; caps each one's precision."""

_LEAST_DISTANCE = 0.008
"""Oklab; references whose maps differ by less are one opinion."""


@attrs.frozen(eq=False, kw_only=True)
class Witness:
    """What one reference says.

    Attributes:
        basis: what it rests on; `none` says nothing.
        parameters: (15,) most plausible change by this reference and the prior.
        precision: (15, 15) what the data alone say, as an inverse covariance; 0 says nothing.
        reason: why it says nothing or little, as a clause.
        pairs: the pairs, where there are any.
        judged: mean ΔE00 before and after on pairs that the judged fit had not seen.
        correction: what the pairs say beyond the camera-like family, where they judge it better.
    """

    basis: Basis
    parameters: Parameters = attrs.field(factory=lambda: np.zeros(SIZE), converter=read_only)
    precision: Precision = attrs.field(factory=lambda: np.zeros((SIZE, SIZE)), converter=read_only)
    reason: str = ""
    pairs: Pairs | None = None
    judged: tuple[float, float] | None = None
    correction: Correction | None = None


@attrs.frozen(eq=False)
class Verdict:
    """What all references say together.

    Attributes:
        parameters: (15,) most plausible change.
        covariance: (15, 15) of it.
        influence: share of each reference in what the data say; sums to 1, or is all 0.
        data_share: share of what is known that came from data rather than from the prior, 0 … 1.
    """

    parameters: Parameters = attrs.field(converter=read_only)
    covariance: Precision = attrs.field(converter=read_only)
    influence: tuple[float, ...]
    data_share: float


def combine(witnesses: Sequence[Witness], prior: Prior, colours: Colours) -> Verdict:
    """Hear all witnesses, each by its precision and by how near it stands to the others.

    Args:
        witnesses: one a reference, at least one.
        prior: what is known before looking.
        colours: (n, 3) Oklab colours of the source, on which distances between opinions are measured.

    References:
        DerSimonian & Laird (1986) for the random spread between witnesses; the reweighting is that of a Student
        likelihood (Lange, Little & Taylor 1989), started from the witness nearest to all others.
    """
    if len(witnesses) == 1:
        return _alone(witnesses[0], prior)
    precisions = [_capped(w.precision, prior) for w in witnesses]
    informations = [precision @ _data_estimate(w, prior) for precision, w in zip(precisions, witnesses, strict=True)]
    weights = _agreement(witnesses, precisions, prior, colours)
    total = prior.precision + np.einsum("k,kij->ij", weights, np.array(precisions))
    covariance = np.linalg.inv(total)
    parameters = covariance @ (prior.precision @ prior.mean + weights @ np.array(informations))
    says = np.array([w * np.trace(covariance @ p) for w, p in zip(weights, precisions, strict=True)])
    influence = tuple(float(share) for share in says / says.sum()) if says.sum() > 0 else (0.0,) * len(says)
    return Verdict(parameters, covariance, influence, float(says.sum() / len(total)))


def _alone(witness: Witness, prior: Prior) -> Verdict:
    covariance = np.linalg.inv(witness.precision + prior.precision)
    share = float(np.trace(covariance @ witness.precision) / len(covariance))
    return Verdict(witness.parameters, covariance, (1.0,), share)


def _capped(precision: Precision, prior: Prior) -> Precision:
    """Parallel sum with the cap: what is left of a precision once references may differ by `ALIKE`."""
    cap = prior.precision / ALIKE**2
    return np.asarray(cap @ np.linalg.solve(cap + precision, precision))


def _data_estimate(witness: Witness, prior: Prior) -> Parameters:
    """Return a parameter vector whose product with the precision is what the data alone say."""
    posterior = witness.precision + prior.precision
    information = posterior @ witness.parameters - prior.precision @ prior.mean
    return np.asarray(np.linalg.lstsq(witness.precision, information, rcond=1e-10)[0])


def _agreement(
    witnesses: Sequence[Witness], precisions: Sequence[Precision], prior: Prior, colours: Colours
) -> NDArray[np.float64]:
    """Return (k,) weights, 1 in the middle of the opinions and falling with the square of the distance from it."""
    light = oklab_to_linear_srgb(colours)
    opinions = np.array([render(w.parameters, light) for w in witnesses])
    says = np.array([np.trace(np.linalg.solve(p + prior.precision, p)) for p in precisions]) + 1e-9
    distances = np.sqrt(((opinions[:, None] - opinions[None]) ** 2).sum(axis=3).mean(axis=2))
    middle = opinions[np.argmin(distances @ says)]
    weights = np.ones(len(witnesses))
    for _ in range(10):
        away = np.sqrt(((opinions - middle) ** 2).sum(axis=2).mean(axis=1))
        scale = max(_weighted_median(away, says), _LEAST_DISTANCE)
        weights = 1 / (1 + (away / (1.5 * scale)) ** 4)
        middle = np.einsum("k,knc->nc", weights * says / (weights @ says), opinions)
    return np.asarray(weights)


def _weighted_median(values: NDArray[np.float64], weights: NDArray[np.float64]) -> float:
    order = np.argsort(values)
    total = np.cumsum(weights[order])
    return float(values[order][np.searchsorted(total, total[-1] / 2)])
