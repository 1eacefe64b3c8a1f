"""Tables one after another, and backwards: laws that hold within what is stated."""

from __future__ import annotations

import numpy as np
import pytest

from hueferry.applying.engine import apply_table
from hueferry.colour.encoding import SRGB
from hueferry.errors import InputError
from hueferry.picture import Picture
from hueferry.tables.build import sample_table
from hueferry.tables.compose import compose, invert, solve
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

STEPS = np.linspace(0, 1, 4097)
CURVES = np.stack([STEPS**power for power in (0.8, 1.1, 1.3)])
AFFINE = np.array([[0.8, 0.1, 0.05], [0.05, 0.85, 0.05], [0.0, 0.1, 0.8]])


def warm(codes: np.ndarray) -> np.ndarray:
    return codes ** [0.85, 1.0, 1.2]


def soft(codes: np.ndarray) -> np.ndarray:
    mixed = codes @ AFFINE.T + 0.03
    return mixed + 0.02 * np.sin(np.pi * mixed)


def somewhere(count: int = 60_000) -> np.ndarray:
    return np.random.default_rng(8).uniform(0, 1, (count, 3))


@pytest.mark.parametrize("curves", [None, CURVES])
def test_one_composed_table_does_what_two_do(curves: np.ndarray | None) -> None:
    """Within the stated misfit, on colours that it was not found with."""
    first, second = sample_table(warm, size=17, curves=curves), sample_table(soft, size=17)

    both, found = compose([first, second])

    error = 255 * np.abs(look_up(both, somewhere()) - look_up(second, look_up(first, somewhere()))).max(axis=1)
    assert found.high < 0.5
    assert np.quantile(error, 0.999) <= 1.2 * found.high
    assert error.max() <= 2 * found.largest


def test_pictures_through_both_or_through_one_agree() -> None:
    """In 16 bit: within the stated misfit and half a code for each time that codes were rounded."""
    first, second = sample_table(warm, size=17), sample_table(soft, size=17)
    pixels = np.random.default_rng(3).integers(0, 65536, (200, 200, 3), dtype=np.uint16)
    picture = Picture(pixels, SRGB, bits=16)
    both, found = compose([first, second])

    in_turn = apply_table(second, apply_table(first, picture)).pixels.astype(float)
    at_once = apply_table(both, picture).pixels.astype(float)

    assert np.abs(in_turn - at_once).max() <= 257 * 2 * found.largest + 1.5


def test_affine_tables_compose_exactly() -> None:
    """A product of matrices: both results by hand."""
    first = sample_table(lambda codes: codes @ AFFINE.T, size=2)
    both, found = compose([first, first, first])

    np.testing.assert_allclose(look_up(both, somewhere()), somewhere() @ np.linalg.matrix_power(AFFINE, 3).T, atol=3e-7)
    assert found.largest < 255e-6


def test_composing_is_associative_and_has_a_neutral_element() -> None:
    a, b = sample_table(warm, size=9), sample_table(soft, size=9)
    neutral = sample_table(lambda codes: codes, size=9)

    np.testing.assert_allclose(look_up(compose([neutral, a])[0], somewhere()), look_up(a, somewhere()), atol=1e-6)
    left = compose([compose([a, b])[0], neutral])[0]
    right = compose([a, compose([b, neutral])[0]])[0]
    np.testing.assert_allclose(look_up(left, somewhere()), look_up(right, somewhere()), atol=2e-3)


def test_nothing_cannot_be_composed() -> None:
    with pytest.raises(InputError, match="at least one"):
        compose([])


@pytest.mark.parametrize("curves", [None, CURVES])
def test_solving_is_exact(curves: np.ndarray | None) -> None:
    """The table itself says so: what is found is sent to what was asked for."""
    rng = np.random.default_rng(4)
    rough = sample_table(soft, size=17, curves=curves).lattice + rng.normal(0, 0.002, (17, 17, 17, 3))
    table = Table(rough, curves)
    codes = somewhere(20_000)

    np.testing.assert_allclose(look_up(table, solve(table, look_up(table, codes))), look_up(table, codes), atol=1e-8)
    np.testing.assert_allclose(solve(table, look_up(table, codes)), codes, atol=1e-5)


@pytest.mark.parametrize(("function", "curves"), [(soft, None), (warm, CURVES)])
def test_there_and_back_is_within_what_is_stated(function: object, curves: np.ndarray | None) -> None:
    table = sample_table(function, size=17, curves=curves)

    undone = invert(table)

    there = look_up(table, somewhere())
    inside = ((there >= 0) & (there <= 1)).all(axis=1)
    error = 255 * np.abs(look_up(undone.table, there) - somewhere())[inside].max(axis=1)
    assert undone.misfit.high < 1.0
    assert np.quantile(error, 0.999) <= 1.5 * undone.misfit.high


def test_what_is_reached_is_the_volume_of_the_image() -> None:
    """An affine table reaches a share of the cube equal to its determinant, as long as it stays inside."""
    undone = invert(sample_table(lambda codes: codes @ AFFINE.T + 0.03, size=5))

    assert undone.reached == pytest.approx(np.linalg.det(AFFINE), abs=0.015)  # four standard errors of 20,000 draws


def test_tables_that_cannot_be_undone_are_refused() -> None:
    gray = sample_table(lambda codes: np.repeat(codes.mean(axis=1, keepdims=True), 3, axis=1), size=5)
    folded = sample_table(lambda codes: np.abs(codes - [0.5, 0, 0]), size=5)
    still = np.stack([np.maximum(STEPS - 0.5, 0) * 2] * 3)
    with pytest.raises(InputError, match="flat tetrahedra cannot be undone"):
        invert(gray)
    with pytest.raises(InputError, match="folds"):
        invert(folded)
    with pytest.raises(InputError, match="stand still"):
        invert(sample_table(soft, size=5, curves=still.astype(np.float32)))
