"""No strength is no change: every bit of every pixel, at every depth, stays."""

from __future__ import annotations

import numpy as np
import pytest

import hueferry as hf
from hueferry.applying.engine import Engine
from hueferry.colour.encoding import SRGB
from hueferry.tables.build import input_curves, sample_table
from hueferry.tables.identity import is_identity
from hueferry.tables.table import Table


def every_float() -> np.ndarray:
    """Float pixels of all kinds: in range, beyond, subnormal, minus zero and not finite."""
    rng = np.random.default_rng(2)
    pixels = rng.uniform(-0.5, 1.5, (40, 50, 3)).astype(np.float32)
    pixels[0, :6] = np.array([-0.0, 1e-42, np.nan, np.inf, -np.inf, 3e38], dtype=np.float32)[:, None]
    return pixels


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16, np.float32])
@pytest.mark.parametrize("method", ["gaussian", "sliced"])
def test_matching_with_no_strength_returns_the_very_bits(dtype: type, method: str) -> None:
    rng = np.random.default_rng(1)
    top = 1 if dtype is np.float32 else np.iinfo(dtype).max
    pixels = (rng.random((48, 48, 3)) * top).astype(dtype)
    darker = (pixels * 0.7).astype(dtype)

    result = hf.match(pixels, darker, aim="adopt", method=method, strength=0.0)

    assert result.tobytes() == pixels.tobytes()
    assert hf.match(pixels, darker, aim="adopt", method=method).tobytes() != pixels.tobytes()


@pytest.mark.parametrize("size", [2, 33])
def test_an_idle_table_leaves_floats_alone(size: int) -> None:
    for curves in (None, input_curves(SRGB, size)):
        table = sample_table(lambda codes: codes, size=size, curves=curves)
        assert Engine(table, np.float32, 32).apply(every_float()).tobytes() == every_float().tobytes()


def test_a_table_that_moves_one_node_by_a_little_is_not_idle() -> None:
    lattice = sample_table(lambda codes: codes, size=9).lattice.copy()
    assert is_identity(Table(lattice))
    lattice[4, 4, 4, 1] += 1e-5
    assert not is_identity(Table(lattice))


def test_a_table_that_bends_between_its_nodes_is_not_idle() -> None:
    knots = np.linspace(0, 1, 5)
    bent = Table(sample_table(lambda codes: codes, size=3).lattice, np.stack([knots**2 * 2 * (1.5 - knots)] * 3) / 1.0)
    assert not is_identity(bent)
