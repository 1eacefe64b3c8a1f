"""From map to table: the identity, input curves, clipped pixels."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hueferry.arrays import Codes, Colours
from hueferry.errors import InputError
from hueferry.picture import Encoding
from hueferry.tables.build import build_table, code_function, input_curves, sample_table
from hueferry.tables.cells import curve_slopes
from hueferry.tables.clipped import hold_clipped
from hueferry.tables.lookup import look_up, node_codes
from tables.encodings import Display, Light


def unchanged(colours: Colours) -> Colours:
    return colours


@pytest.mark.parametrize("encoding", [Display(), Light()])
@pytest.mark.parametrize("size", [2, 33, 65, 129])
def test_the_table_of_no_change_changes_nothing(encoding: Encoding, size: int) -> None:
    table = build_table(unchanged, encoding, size=size)
    codes = np.random.default_rng(1).random((5000, 3))

    assert look_up(table, codes) == pytest.approx(codes, abs=1e-6)


def test_input_curves_spend_nodes_on_shadows() -> None:
    display, light = node_codes(33, input_curves(Display(), 33))[0], node_codes(33, input_curves(Light(), 33))[0]

    assert np.diff(display)[[0, -1]] * 32 == pytest.approx([0.5, 1.5], abs=0.03)
    assert light[8] < 0.05  # a quarter of the nodes lies below 5 % of the light


@pytest.mark.parametrize("encoding", [Display(), Light()])
def test_every_cell_of_an_input_curve_has_one_slope(encoding: Encoding) -> None:
    """Then a table is affine in every tetrahedron, and its certificate exact, also behind input curves."""
    table = build_table(unchanged, encoding)

    least, most = curve_slopes(table)

    assert np.array_equal(least, most)


def test_nodes_are_sampled_where_the_curves_put_them() -> None:
    curves = np.stack([np.array([0.0, 0.5, 0.75, 0.9, 1.0])] * 3).astype(np.float32)

    table = sample_table(lambda codes: codes**2, size=3, curves=curves)

    assert table.lattice[1, 0, 2] == pytest.approx([0.25**2, 0.0, 1.0])


def test_a_table_too_large_or_a_function_without_an_answer_is_an_error() -> None:
    with pytest.raises(InputError, match="2 … 129 nodes"):
        sample_table(unchanged, size=130)
    with pytest.raises(InputError, match="finite"):
        sample_table(lambda codes: codes * np.nan, size=2)


@given(seed=st.integers(0, 2**32 - 1))
def test_clipped_white_and_black_stay_neutral(seed: int) -> None:
    rng = np.random.default_rng(seed)
    gains, lift = rng.uniform(0.6, 1.3, 3), rng.uniform(-0.05, 0.05, 3)
    held = hold_clipped(lambda codes: codes * gains + lift)

    ends = 255 * np.clip(held(np.array([[0.0] * 3, [1.0] * 3])), 0, 1)

    assert np.ptp(ends, axis=1) == pytest.approx([0, 0], abs=1)


def test_holding_clipped_pixels_leaves_midtones_alone() -> None:
    def warm(codes: Codes) -> Codes:
        return codes * [1.1, 1.0, 0.9]

    codes = np.random.default_rng(2).uniform(0.0, 0.74, (1000, 3))

    assert np.array_equal(hold_clipped(warm)(codes)[codes.max(axis=1) > 0.07], warm(codes)[codes.max(axis=1) > 0.07])


def test_holding_clipped_pixels_never_reverses_a_channel() -> None:
    held = hold_clipped(lambda codes: codes * [0.7, 1.2, 0.95] + [0.03, -0.02, 0.0])
    ramp = np.repeat(np.linspace(0, 1, 4097)[:, None], 3, axis=1)

    assert (np.diff(held(ramp), axis=0) > 0).all()


def test_the_code_function_is_the_map_in_the_encoding() -> None:
    def lighter(colours: Colours) -> Colours:
        return colours * [1.05, 1.0, 1.0]

    codes = np.array([[0.4, 0.5, 0.45]])
    light = code_function(lighter, Light())(Light().from_xyz(Display().to_xyz(codes)))

    display = code_function(lighter, Display())(codes)

    assert Light().to_xyz(light) == pytest.approx(Display().to_xyz(display), abs=1e-9)
