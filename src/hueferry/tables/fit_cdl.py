"""The decision list nearest to a table, over the colours of a picture."""

from __future__ import annotations

from collections.abc import Callable

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Weights
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import xyz_to_lab
from hueferry.picture import Encoding
from hueferry.tables.cdl import DecisionList
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

_ITERATIONS = 60
_STEP = 1e-6


@attrs.frozen
class FittedList:
    """A decision list and how far it is from the table.

    Attributes:
        grade: the list.
        mean: weighted mean distance over the colours, ΔE00.
        largest: largest distance, ΔE00.
    """

    grade: DecisionList
    mean: float
    largest: float


def fit_decision_list(table: Table, codes: Codes, weights: Weights, encoding: Encoding) -> FittedList:
    """Find the decision list nearest to a table, by damped Gauss–Newton steps on CIELAB differences.

    With errors of equal variance the steps are those of Fisher scoring.

    Args:
        table: the table.
        codes: (n, 3) colours that matter, in the table's encoding.
        weights: (n,) their shares.
        encoding: what the codes mean.

    References:
        Levenberg (1944), A method for the solution of certain non-linear problems in least squares.
    """
    wanted = xyz_to_lab(encoding.to_xyz(np.clip(look_up(table, codes), 0.0, 1.0)))
    share = np.sqrt(weights)[:, None]

    def residual(numbers: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.asarray((share * (xyz_to_lab(encoding.to_xyz(_graded(numbers)(codes))) - wanted)).ravel())

    numbers = _solve(residual)
    grade = _graded(numbers)
    error = delta_e_2000(xyz_to_lab(encoding.to_xyz(grade(codes))), wanted)
    return FittedList(grade, float(weights @ error), float(error.max()))


def _graded(numbers: NDArray[np.float64]) -> DecisionList:
    """Slope, power and saturation are exponentials, so that they stay positive."""
    positive = np.exp(np.clip(numbers, -5.0, 5.0)).tolist()
    offset = np.clip(numbers[3:6], -2.0, 2.0).tolist()
    return DecisionList(tuple(positive[:3]), tuple(offset), tuple(positive[6:9]), positive[9])


def _solve(residual: Callable[[NDArray[np.float64]], NDArray[np.float64]]) -> NDArray[np.float64]:
    numbers, damping = np.zeros(10), 1e-3
    now = residual(numbers)
    for _ in range(_ITERATIONS):
        slopes = np.stack([(residual(numbers + _STEP * unit) - now) / _STEP for unit in np.eye(10)], axis=1)
        normal = slopes.T @ slopes
        step = np.linalg.solve(normal + damping * np.diag(np.diag(normal) + 1e-9), -slopes.T @ now)
        trial = residual(numbers + step)
        if trial @ trial < now @ now:
            gained = 1 - (trial @ trial) / (now @ now)
            numbers, now, damping = numbers + step, trial, damping / 5
            if gained < 1e-9:
                break
        else:
            damping *= 8
    return numbers
