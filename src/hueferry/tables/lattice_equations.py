"""Linear equations on the nodes of a lattice with free ends, solved in the eigenbasis of cosines.

References:
    Strang (1999), The discrete cosine transform; Hestenes & Stiefel (1952), Methods of conjugate gradients.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Field = NDArray[np.float64]
"""(n, n, n, 3): three channels at every node."""


def integrate(edges: list[Field]) -> Field:
    """Return the field of mean zero whose differences along the edges are nearest to those given (least squares).

    Args:
        edges: wanted differences from node to node along each of the three axes: (n − 1, n, n, 3), (n, n − 1, n, 3),
            (n, n, n − 1, 3).
    """
    size = edges[0].shape[1]
    divergence = np.zeros((size, size, size, 3))
    for axis, edge in enumerate(edges):
        line, steps = np.moveaxis(divergence, axis, 0), np.moveaxis(edge, axis, 0)
        line[1:] += steps
        line[:-1] -= steps
    return _solve_even(divergence, anchor=0.0, stiffness=1.0)


def smooth_through(field: Field, weights: NDArray[np.float64], *, stiffness: float, rounds: int = 16) -> Field:
    """Return the field that is smooth, and near to the given one where that has weight.

    It minimises Σ weights |new − field|² + stiffness Σ |differences of new|².

    Args:
        field: what to stay near to.
        weights: (n, n, n), > 0.
        stiffness: how much smoothness counts; > 0.
        rounds: of conjugate gradients.
    """
    w = weights[..., None]
    anchor = float(np.sqrt(weights.mean() * np.median(weights)))
    found = field - field.mean(axis=(0, 1, 2))
    offset = field - found
    residual = w * found - (w * found + stiffness * _second_differences(found))
    ready = _solve_even(residual, anchor=anchor, stiffness=stiffness)
    direction, power = ready, float((residual * ready).sum())
    for _ in range(rounds):
        if power <= 1e-18:
            break
        pushed = w * direction + stiffness * _second_differences(direction)
        step = power / float((direction * pushed).sum())
        found = found + step * direction
        residual = residual - step * pushed
        ready = _solve_even(residual, anchor=anchor, stiffness=stiffness)
        power, before = float((residual * ready).sum()), power
        direction = ready + power / before * direction
    return np.asarray(found + offset)


def _second_differences(field: Field) -> Field:
    result = np.zeros_like(field)
    for axis in range(3):
        line, steps = np.moveaxis(result, axis, 0), np.diff(np.moveaxis(field, axis, 0), axis=0)
        line[:-1] -= steps
        line[1:] += steps
    return result


def _solve_even(right: Field, *, anchor: float, stiffness: float) -> Field:
    """Solve (anchor + stiffness · second differences) x = right; without an anchor the mean is left at zero."""
    size = right.shape[0]
    basis, values = _cosines(size)
    total = anchor + stiffness * (values[:, None, None] + values[None, :, None] + values[None, None, :])
    if anchor == 0.0:
        total[0, 0, 0] = np.inf
    return _transformed(_transformed(right, basis.T) / total[..., None], basis)


def _cosines(size: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Eigenvectors, as columns, and eigenvalues of the second difference along a line of nodes with free ends."""
    wave = np.arange(size)
    basis = np.cos(np.pi * wave[None, :] * (wave[:, None] + 0.5) / size)
    basis /= np.linalg.norm(basis, axis=0)
    return basis, 2 - 2 * np.cos(np.pi * wave / size)


def _transformed(field: Field, matrix: NDArray[np.float64]) -> Field:
    size = field.shape[0]
    for _ in range(3):
        # Each pass transforms the first axis and puts it behind the other two.
        field = (matrix @ field.reshape(size, -1)).reshape(size, size, size, 3).transpose(1, 2, 0, 3)
    return np.ascontiguousarray(field)
