"""How distinguishable two histograms are: divergences in nats, and the Fisher–Rao distance.

All functions take two arrays of shares over the same bins. They depend on the shares alone, so no change of units, of
the order of bins or of what the bins stand for changes a number.

A Kullback–Leibler divergence is infinite where the first histogram has pixels in a bin in which the second has none.
It is returned as infinity and never smoothed away.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Weights
from hueferry.errors import InputError

Ratios = NDArray[np.float64]
Generator = Callable[[Ratios], Ratios]


def f_divergence(p: Weights, q: Weights, generator: Generator, *, at_infinity: float) -> float:
    """Return the f-divergence Σ q f(p / q) for a convex generator with f(1) = 0.

    Args:
        p: (n,) shares, summing to 1; zeros are allowed.
        q: (n,) shares, summing to 1; zeros are allowed.
        generator: f, for ratios >= 0; must give f(0) as a limit, finite or infinite.
        at_infinity: the limit of f(t) / t as t grows, which weighs bins that q does not have; may be infinite.

    Raises:
        InputError: an argument is not a histogram.

    References:
        Csiszár (1967); Ali & Silvey (1966); Liese & Vajda (2006), On divergences and informations, section III.
    """
    p, q = _pair(p, q)
    shared = q > 0
    value = float(q[shared] @ generator(p[shared] / q[shared]))
    alone = float(p[~shared].sum())
    return value + (at_infinity * alone if alone > 0 else 0.0)


def kullback_leibler(p: Weights, q: Weights) -> float:
    """Return KL(p | q) = Σ p ln(p / q) in nats (Kullback & Leibler 1951); infinite where q lacks a bin of p."""
    return max(f_divergence(p, q, _t_log_t, at_infinity=np.inf), 0.0)


def jeffreys(p: Weights, q: Weights) -> float:
    """Return KL(p | q) + KL(q | p) in nats (Jeffreys 1946); infinite unless both have the same bins."""
    return kullback_leibler(p, q) + kullback_leibler(q, p)


def jensen_shannon(p: Weights, q: Weights) -> float:
    """Return the Jensen–Shannon divergence in nats, 0 … ln 2: not its square root (Lin 1991)."""
    p, q = _pair(p, q)
    middle = (p + q) / 2
    return (kullback_leibler(p, middle) + kullback_leibler(q, middle)) / 2


def hellinger(p: Weights, q: Weights) -> float:
    """Return the Hellinger distance √(½ Σ (√p − √q)²), 0 … 1; without loss of digits for equal histograms."""
    p, q = _pair(p, q)
    return float(np.sqrt(np.sum((np.sqrt(p) - np.sqrt(q)) ** 2) / 2))


def overlap(p: Weights, q: Weights) -> float:
    """Return the Bhattacharyya coefficient Σ √(p q), 0 … 1."""
    p, q = _pair(p, q)
    return float(np.sqrt(p) @ np.sqrt(q))


def bhattacharyya(p: Weights, q: Weights) -> float:
    """Return the Bhattacharyya distance −ln Σ √(p q) in nats (Bhattacharyya 1943); infinite for disjoint histograms."""
    shared = overlap(p, q)
    return float("inf") if shared <= 0 else abs(float(np.log(min(shared, 1.0))))


def fisher_rao(p: Weights, q: Weights) -> float:
    """Return the Fisher–Rao distance 2 arccos Σ √(p q) between histograms, 0 … π.

    Computed as 4 arcsin(H / √2) from the Hellinger distance H, which keeps its digits where arccos loses them.

    References:
        Rao (1945), Information and the accuracy attainable in the estimation of statistical parameters; the metric
        is Σ dp² / p, and square roots carry it onto a sphere of radius 2.
    """
    return float(4 * np.arcsin(min(hellinger(p, q) / np.sqrt(2), np.sqrt(0.5))))


def _t_log_t(ratios: Ratios) -> Ratios:
    return np.where(ratios > 0, ratios * np.log(np.where(ratios > 0, ratios, 1.0)), 0.0) - ratios + 1


def _pair(p: Weights, q: Weights) -> tuple[Weights, Weights]:
    p, q = np.asarray(p, dtype=np.float64), np.asarray(q, dtype=np.float64)
    if p.shape != q.shape or p.ndim != 1:
        raise InputError(f"histograms must have the same bins, not {p.shape} and {q.shape}")
    for shares in (p, q):
        if not np.isfinite(shares).all() or (shares < 0).any() or abs(float(shares.sum()) - 1) > 1e-9:
            raise InputError("a histogram's shares must be finite, not negative, and sum to 1")
    return p, q
