"""Making tables safe: nothing folds, nothing exceeds the cap, good tables stay as they are, and it always ends."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hueferry.tables.build import build_table, sample_table
from hueferry.tables.cells import Occupied
from hueferry.tables.certificate import certify
from hueferry.tables.folds import determinants
from hueferry.tables.gains import gains
from hueferry.tables.lookup import look_up
from hueferry.tables.make import make_table
from hueferry.tables.ramps import read_ramps
from hueferry.tables.regularise import make_safe
from hueferry.tables.table import Table
from tables.encodings import Display


def nodes(size: int) -> np.ndarray:
    even = np.linspace(0, 1, size)
    return np.stack(np.meshgrid(even, even, even, indexing="ij"), axis=-1)


def scattered(seed: int = 0, low: float = 0.1, high: float = 0.9) -> Occupied:
    return Occupied(np.random.default_rng(seed).uniform(low, high, (400, 3)), np.full(400, 1 / 400))


def is_safe(table: Table, occupied: Occupied, max_gain: float) -> bool:
    return certify(table, occupied=occupied, encoding=Display(), max_gain=max_gain).safe


def test_a_safe_table_comes_back_as_it_was() -> None:
    table = sample_table(lambda codes: 0.9 * codes + 0.05, size=17)

    found, how = make_safe(table, occupied=scattered(), encoding=Display(), max_gain=2.5)

    assert found is table
    assert not how.needed
    assert how.sentences() == ()


def test_one_spoiled_node_is_mended_where_it_is_and_nowhere_else() -> None:
    lattice = nodes(17)
    lattice[5, 9, 7] += 0.3
    table = Table(lattice)

    found, how = make_safe(table, occupied=scattered(), encoding=Display(), max_gain=2.5)

    assert (determinants(table.lattice) < 0).any()
    assert is_safe(found, scattered(), 2.5)
    assert how.kept == 1.0
    changed = np.argwhere((found.lattice != table.lattice).any(axis=-1))
    assert np.abs(changed - [5, 9, 7]).max() <= 5
    assert "smoothed" in how.sentences()[0]


def test_a_stretch_beyond_the_cap_everywhere_is_drawn_back_to_just_the_cap() -> None:
    table = sample_table(lambda codes: 3 * (codes - 0.5) + 0.5, size=17)
    middle = Occupied(np.random.default_rng(1).uniform(0.4, 0.6, (400, 3)), np.full(400, 1 / 400))

    found, how = make_safe(table, occupied=middle, encoding=Display(), max_gain=2.0)

    largest = gains(found, middle.cells(found))[0].max()
    assert 1.85 < largest <= 2.0
    assert how.rounds > 0
    assert "limited its slope" in how.sentences()[0]


@settings(max_examples=10, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), noise=st.floats(0.0, 0.5), max_gain=st.floats(1.05, 4.0))
def test_any_table_at_all_comes_out_safe(seed: int, noise: float, max_gain: float) -> None:
    rng = np.random.default_rng(seed)
    table = Table(nodes(7) @ rng.normal(0, 1, (3, 3)) + rng.normal(0, noise, (7, 7, 7, 3)))

    found, _ = make_safe(table, occupied=scattered(seed), encoding=Display(), max_gain=max_gain)

    assert is_safe(found, scattered(seed), max_gain)


def test_a_mirrored_table_ends_at_something_safe() -> None:
    found, how = make_safe(Table(nodes(9)[..., [1, 0, 2]]), occupied=scattered(), encoding=Display(), max_gain=2.5)

    assert is_safe(found, scattered(), 2.5)
    assert how.needed


def test_a_jump_in_a_ramp_is_found_and_smoothed() -> None:
    def step(codes: np.ndarray) -> np.ndarray:
        return codes * 0.8 + 0.2 / (1 + np.exp(-(codes - 0.5) * 200))

    table = sample_table(step, size=33)

    found, _ = make_safe(table, occupied=scattered(0, 0.0, 0.3), encoding=Display(), max_gain=2.5)

    assert not all(ramp.rises for ramp in read_ramps(table, Display(), Display()))
    assert all(ramp.rises for ramp in read_ramps(found, Display(), Display()))


def test_what_was_moved_is_told_in_codes() -> None:
    lattice = nodes(17)
    lattice[5, 9, 7] += 0.3
    table = Table(lattice)
    occupied = scattered()

    found, how = make_safe(table, occupied=occupied, encoding=Display(), max_gain=2.5)

    moved = np.abs(look_up(found, occupied.codes) - look_up(table, occupied.codes)).max(axis=1).mean()
    assert how.moved == pytest.approx(moved)


def test_a_gentle_map_needs_the_small_table_only_and_a_bent_one_gets_the_large() -> None:
    muted = scattered(0, 0.3, 0.7)

    def ripple(colours: np.ndarray) -> np.ndarray:
        return colours + 0.006 * np.sin(100 * colours[:, :1]) * [1, 0, 0]

    gentle = make_table(lambda colours: colours * [0.97, 1.1, 1.1], Display(), occupied=muted, max_gain=2.5)
    bent = make_table(ripple, Display(), occupied=muted, max_gain=2.5)

    assert gentle.table.size == 33
    assert bent.table.size == 65
    assert gentle.certificate.safe
    assert bent.certificate.safe
    assert gentle.certificate.error is not None
    assert gentle.certificate.error.high < 1


def test_ramps_of_no_change_rise_by_even_steps() -> None:
    for ramp in read_ramps(build_table(lambda c: c, Display()), Display(), Display()):
        assert ramp.falls == 0
        assert ramp.step < 1.5


def test_limiting_keeps_the_slope_where_nothing_offends_and_the_mean_of_the_colours() -> None:
    def steep_in_the_dark(codes: np.ndarray) -> np.ndarray:
        return np.where(codes < 0.25, 4 * codes, 1.0 + (codes - 0.25)) * 0.5

    table = sample_table(steep_in_the_dark, size=17)
    occupied = scattered(3, 0.02, 0.98)

    found, how = make_safe(table, occupied=occupied, encoding=Display(), max_gain=1.5)

    assert how.rounds > 0
    assert how.kept == 1.0
    bright = np.s_[10:, 10:, 10:]
    slope = np.diff(found.lattice[bright][..., 0], axis=0) * 16
    middle, most = np.quantile(np.abs(slope - 0.5), [0.5, 0.95])
    assert middle < 0.01
    assert most < 0.15
    drift = occupied.weights @ (look_up(found, occupied.codes) - look_up(table, occupied.codes))
    assert drift == pytest.approx([0, 0, 0], abs=2e-3)  # half an 8-bit code, lost to the last smoothing
