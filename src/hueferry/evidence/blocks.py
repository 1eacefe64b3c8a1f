"""What content alone does: one picture's halves, held against each other.

Nothing but content differs between two halves of one picture, so whatever change of light is found between them is
an error, and how much of each the other explains is what "the same scene" looks like. Both are measured with the very
estimator that is used between pictures.
"""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import read_only
from hueferry.evidence.camera import SIZE
from hueferry.evidence.prior import Prior, no_change
from hueferry.evidence.registration import explained, register
from hueferry.evidence.scene import FEWEST, Scene

_VAGUE = 4.0
"""How many imagined halvings the assumed spread is worth beside the measured ones."""

_ASSUMED = 0.05
"""Assumed variance of what content does, in units of the prior's variance."""


@attrs.frozen(eq=False)
class Content:
    """What content alone does to one picture.

    Attributes:
        scatter: (15, 15) sum of squares of the changes found between halves, in units of the prior's deviations.
        halvings: how many halvings were registered; 0 where the picture is too plain or too small.
        likeness: mean share that halves explain of each other.
    """

    scatter: NDArray[np.float64] = attrs.field(converter=read_only)
    halvings: int
    likeness: float


def content_of(scene: Scene) -> Content:
    """Register the four halvings of a scene."""
    prior = no_change()
    whiten = whitener(prior)
    changes, shares = [], []
    for first, second in scene.halvings():
        if min(len(first), len(second)) < FEWEST // 2:
            continue
        found = register(first, second, prior)
        changes.append(whiten @ found)
        shares.append(explained(first, second, found))
    if not changes:
        return Content(np.zeros((SIZE, SIZE)), 0, 0.0)
    stacked = np.array(changes)
    return Content(stacked.T @ stacked, len(changes), float(np.mean(shares)))


def whitener(prior: Prior) -> NDArray[np.float64]:
    """Return the (15, 15) matrix that turns a change into units of the prior's deviations."""
    return np.asarray(np.linalg.cholesky(prior.precision).T)


def content_covariance(first: Content, second: Content) -> NDArray[np.float64]:
    """Return the (15, 15) covariance of what content does between two pictures, in units of the prior's."""
    count = first.halvings + second.halvings
    return (first.scatter + second.scatter + _VAGUE * _ASSUMED * np.eye(SIZE)) / (count + _VAGUE)
