"""The certificate against closed forms: affine maps have known determinants and singular values."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hueferry.palettes.palette import Palette
from hueferry.tables.build import build_table, input_curves, sample_table
from hueferry.tables.cells import Occupied, jacobians, widened
from hueferry.tables.certificate import certify, neutral_drift, newly_clipped, table_error
from hueferry.tables.folds import determinants
from hueferry.tables.gains import gains
from hueferry.tables.table import Table
from tables.encodings import Display, Light

EVERYWHERE = np.ones((4, 4, 4), dtype=bool)


def nodes(size: int) -> np.ndarray:
    even = np.linspace(0, 1, size)
    return np.stack(np.meshgrid(even, even, even, indexing="ij"), axis=-1)


def occupied(codes: np.ndarray) -> Occupied:
    return Occupied(codes, np.full(len(codes), 1 / len(codes)))


@given(seed=st.integers(0, 2**32 - 1))
def test_an_affine_table_has_the_determinant_and_singular_values_of_its_matrix(seed: int) -> None:
    matrix = np.eye(3) + np.random.default_rng(seed).uniform(-0.5, 0.5, (3, 3))
    # Powers of two keep the lattice exact in float32, so the closed form is met to rounding.
    matrix = np.round(matrix * 1024) / 4096
    table = Table((nodes(5) - 0.5) @ matrix.T + 0.5)

    largest, smallest = gains(table, EVERYWHERE)

    singular = np.linalg.svd(matrix, compute_uv=False)
    assert determinants(table.lattice) == pytest.approx(np.linalg.det(matrix), abs=1e-6)
    assert largest == pytest.approx(singular[0], abs=1e-6)
    assert smallest == pytest.approx(singular[2], abs=1e-6)


def test_determinants_and_jacobians_of_a_random_table_agree_with_linear_algebra() -> None:
    """NumPy's LAPACK determinant and singular values of the same matrices."""
    table = Table(nodes(5) + np.random.default_rng(3).normal(0, 0.1, (5, 5, 5, 3)))

    matrices = jacobians(table, EVERYWHERE)

    wanted = np.linalg.det(matrices).reshape(6, 4, 4, 4)
    found = determinants(table.lattice)
    assert found[np.abs(wanted) > 1e-4] == pytest.approx(wanted[np.abs(wanted) > 1e-4], abs=1e-9)
    largest, smallest = gains(table, EVERYWHERE)
    assert largest == pytest.approx(np.linalg.svd(matrices, compute_uv=False)[..., 0], abs=1e-9)
    assert smallest == pytest.approx(np.linalg.svd(matrices, compute_uv=False)[..., 2], abs=1e-6)


def test_one_node_pushed_past_its_neighbour_is_found() -> None:
    lattice = nodes(33)
    assert not (determinants(lattice.astype(np.float32)) <= 0).any()

    lattice[7, 20, 11, 0] += 1.2 / 32

    negative = np.argwhere((determinants(lattice.astype(np.float32)) < 0).any(axis=0))
    assert len(negative) > 0
    assert (np.abs(negative - [7, 20, 11]) <= 1).all()


def test_a_mirrored_table_folds_everywhere_and_a_gray_one_is_flat_and_folds_nowhere() -> None:
    mirrored = determinants(nodes(9)[..., [1, 0, 2]].astype(np.float32))
    gray = determinants(np.repeat(nodes(9).mean(axis=-1, keepdims=True), 3, axis=-1).astype(np.float32))

    assert (mirrored < 0).all()
    assert (gray == 0).all()


@given(axes=st.permutations(range(3)))
def test_naming_the_channels_in_another_order_changes_no_figure(axes: list[int]) -> None:
    lattice = nodes(6) + np.random.default_rng(4).normal(0, 0.03, (6, 6, 6, 3))
    turned = lattice.transpose(*axes, 3)[..., axes]

    first = np.sort(determinants(lattice.astype(np.float32)).ravel())
    second = np.sort(determinants(turned.astype(np.float32)).ravel())

    assert first == pytest.approx(second, abs=1e-12)


def test_gain_behind_an_input_curve_is_that_of_the_composition() -> None:
    """Linear light with its own input curve: halving codes has gain ½ in every cell, whatever the nodes' places."""
    table = sample_table(lambda codes: codes / 2, size=9, curves=input_curves(Light(), 9))
    cells = np.ones((8, 8, 8), dtype=bool)

    largest, smallest = gains(table, cells)

    assert largest == pytest.approx(0.5, abs=1e-5)
    assert smallest == pytest.approx(0.5, abs=1e-5)


def test_a_channel_that_is_clipped_away_does_not_count_as_a_gain() -> None:
    table = Table(nodes(5) * [1.0, 1.0, 6.0] - [0.0, 0.0, 3.0])

    largest, smallest = gains(table, EVERYWHERE)

    largest = largest.reshape(6, 4, 4, 4)
    assert largest[..., 0] == pytest.approx(1.0)  # blue stays below 0 up to code 1/4 …
    assert largest[..., 2] == pytest.approx(6.0)  # … and is inside from 1/2 to 2/3
    assert smallest == pytest.approx(1.0)


def test_a_curve_that_bends_within_a_cell_gives_bounds_that_hold() -> None:
    knots = np.linspace(0, 1, 65)
    curves = np.stack([knots**0.7, knots**1.5, knots]).astype(np.float32)
    table = sample_table(lambda codes: codes**1.2, size=5, curves=curves)
    rng = np.random.default_rng(8)
    codes = rng.uniform(0.02, 0.97, (3000, 3))
    step = rng.normal(size=(3000, 3))
    step *= 1e-4 / np.linalg.norm(step, axis=1, keepdims=True)

    from hueferry.tables.lookup import look_up

    stretch = np.linalg.norm(look_up(table, codes + step) - look_up(table, codes), axis=1) / 1e-4
    largest, smallest = gains(table, EVERYWHERE)

    assert stretch.max() <= largest.max() + 1e-3
    assert stretch.min() >= smallest.min() - 1e-3


def test_the_share_newly_clipped_counts_what_was_inside_before() -> None:
    table = Table(nodes(2) * 1.25)
    codes = np.array([[0.5, 0.5, 0.5], [0.9, 0.2, 0.2], [1.0, 0.2, 0.2], [0.7, 0.7, 0.7]])

    assert newly_clipped(table, Occupied(codes, np.array([0.4, 0.3, 0.2, 0.1]))) == pytest.approx(0.3)


def test_neutral_drift_is_the_chroma_of_grays() -> None:
    """White without blue is sRGB's yellow: L*a*b* 97.6074, −15.7479, 93.3913 relative to D50 (colour-science)."""
    assert neutral_drift(Table(nodes(5)), Display()) == pytest.approx(0, abs=0.02)
    assert neutral_drift(Table(nodes(2) * [1, 1, 0]), Display()) == pytest.approx(np.hypot(15.7479, 93.3913), abs=0.01)


def test_the_error_of_a_table_is_that_of_linear_interpolation() -> None:
    """A parabola between nodes h apart lies at most h²/4 below its chord (the classical error bound, f'' = 2)."""
    table = sample_table(lambda codes: codes**2, size=17)
    codes = occupied((np.arange(16)[:, None] + 0.5) / 16 * np.ones(3))

    error = table_error(table, lambda c: c**2, codes, encoding=Display())

    assert error.mean == pytest.approx(255 * (1 / 16) ** 2 / 4, rel=1e-4)
    assert error.high == pytest.approx(255 * (1 / 16) ** 2 / 4, rel=1e-4)


def test_the_certificate_of_no_change_is_perfect() -> None:
    codes = np.random.default_rng(0).random((500, 3))

    found = certify(build_table(lambda c: c, Display()), occupied=occupied(codes), encoding=Display(), max_gain=2.5)

    assert found.safe
    assert (found.folds, found.flat, found.tetrahedra) == (0, 0, 6 * 32**3)
    assert found.largest_gain == pytest.approx(1, abs=1e-5)
    assert found.smallest_gain == pytest.approx(1, abs=1e-5)
    assert found.newly_clipped == 0
    json.dumps(found.as_dict(), allow_nan=False)
    assert "no fold" in found.sentences()[0]


def test_the_certificate_does_not_depend_on_the_order_of_the_colours() -> None:
    rng = np.random.default_rng(1)
    table = Table(nodes(9) + rng.normal(0, 0.02, (9, 9, 9, 3)))
    codes = rng.random((200, 3))

    first = certify(table, occupied=occupied(codes), encoding=Display()).as_dict()
    second = certify(table, occupied=occupied(codes[::-1]), encoding=Display()).as_dict()

    assert first.pop("newly_clipped") == pytest.approx(second.pop("newly_clipped"))
    assert first == second


def test_a_palette_occupies_the_cells_of_its_colours() -> None:
    palette = Palette(np.array([[0.5999, 0.0, 0.0], [1.0, 0.0, 0.0]]), np.array([0.5, 0.5]))

    found = Occupied.of_palette(palette, Display())

    assert found.codes == pytest.approx(np.array([[128 / 255] * 3, [1.0] * 3]), abs=2e-4)  # Ottosson (2020): 0.599871
    assert np.argwhere(found.cells(Table(nodes(5)), margin=0)).tolist() == [[2, 2, 2], [3, 3, 3]]


def test_a_margin_reaches_that_many_cells_in_every_direction() -> None:
    cells = np.zeros((9, 9, 9), dtype=bool)
    cells[4, 4, 0] = True

    assert widened(cells, 2).sum() == 5 * 5 * 3
    assert np.array_equal(widened(widened(cells, 1), 1), widened(cells, 2))
