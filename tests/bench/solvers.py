"""Our solvers against those of POT, at the same marginal error."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import ot

from bench.timing import Ratio, compare
from hueferry.transport.costs import squared_distances
from hueferry.transport.entropic import entropic_potentials

BLUR = 0.05
ERROR = 1e-3


def measure_solvers(turns: int) -> Iterator[Ratio]:
    """Compare the entropic potentials at a blur of 5 % of the range with POT's, in the log domain and by kernel."""
    rng = np.random.default_rng(0)
    for size in (500, 1000, 2000):
        source, target = rng.random((size, 3)), rng.random((size, 3)) ** 1.5
        weights = np.full(size, 1 / size)
        cost = squared_distances(source, target)
        epsilon = 2 * BLUR**2

        def ours(weights: np.ndarray = weights, cost: np.ndarray = cost, epsilon: float = epsilon) -> object:
            return entropic_potentials(weights, weights, cost, epsilon=epsilon, tolerance=ERROR)

        def kernel(weights: np.ndarray = weights, cost: np.ndarray = cost, epsilon: float = epsilon) -> object:
            return ot.sinkhorn(weights, weights, cost, epsilon, stopThr=ERROR, numItermax=20_000, warn=False)

        yield compare(f"entropic, N = {size}, over POT's kernel iterations", ours, kernel, turns=turns)
        if size <= 500:

            def in_logs(weights: np.ndarray = weights, cost: np.ndarray = cost, epsilon: float = epsilon) -> object:
                return ot.bregman.sinkhorn_log(
                    weights, weights, cost, epsilon, stopThr=ERROR, numItermax=20_000, warn=False
                )

            yield compare(f"entropic, N = {size}, over POT's log domain", ours, in_logs, turns=2)
