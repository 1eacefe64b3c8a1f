"""Divergences between histograms against published formulas and SciPy."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.distance import jensenshannon
from scipy.stats import entropy

from hueferry.errors import InputError
from hueferry.measure import divergences as d

SKEW, EVEN = np.array([0.9, 0.1]), np.array([0.5, 0.5])
FALLING, RISING = np.array([0.5, 0.3, 0.2]), np.array([0.2, 0.3, 0.5])


def shares(size: int) -> st.SearchStrategy[np.ndarray]:
    return st.lists(st.floats(1e-3, 1), min_size=size, max_size=size).map(lambda v: np.array(v) / np.sum(v))


def test_kl_of_two_coins() -> None:
    """Formula: Kullback & Leibler 1951, nats; values: by hand, ½ ln(.5/.9) + ½ ln(.5/.1)."""
    assert d.kullback_leibler(EVEN, SKEW) == pytest.approx(0.5108256238, abs=1e-10)
    assert d.kullback_leibler(SKEW, EVEN) == pytest.approx(0.3680642072, abs=1e-10)


def test_kl_is_not_symmetric_and_jeffreys_is() -> None:
    assert d.kullback_leibler(EVEN, SKEW) != pytest.approx(d.kullback_leibler(SKEW, EVEN), rel=0.1)
    assert d.jeffreys(EVEN, SKEW) == d.jeffreys(SKEW, EVEN) == pytest.approx(0.5108256238 + 0.3680642072, abs=2e-10)


def test_kl_of_three_bins() -> None:
    """0.3 ln 2.5 either way."""
    assert d.kullback_leibler(FALLING, RISING) == pytest.approx(0.2748872196, abs=1e-10)
    assert d.kullback_leibler(RISING, FALLING) == pytest.approx(0.2748872196, abs=1e-10)


def test_kl_is_infinite_where_the_second_lacks_a_bin_of_the_first_and_only_there() -> None:
    p, q = np.array([0.5, 0.5, 0.0]), np.array([0.5, 0.25, 0.25])

    assert d.kullback_leibler(q, p) == np.inf
    assert d.kullback_leibler(p, q) == pytest.approx(0.5 * np.log(2), abs=1e-15)
    assert d.jeffreys(p, q) == np.inf


def test_jensen_shannon_is_the_divergence_and_not_its_root() -> None:
    """Lin 1991. SciPy's function returns the square root, under the divergence's name."""
    assert d.jensen_shannon(FALLING, RISING) == pytest.approx(0.0664143144, abs=1e-10)
    assert d.jensen_shannon(EVEN, SKEW) == pytest.approx(0.1017492251, abs=1e-10)
    assert d.jensen_shannon(EVEN, SKEW) == pytest.approx(jensenshannon(EVEN, SKEW) ** 2, abs=1e-12)


def test_jensen_shannon_of_disjoint_histograms_is_ln_2() -> None:
    assert d.jensen_shannon(np.array([1.0, 0.0]), np.array([0.0, 1.0])) == pytest.approx(0.6931471806, abs=1e-10)


@pytest.mark.parametrize(
    ("p", "q", "overlap", "hellinger", "bhattacharyya"),
    [
        (FALLING, RISING, 0.9324555320, 0.2598931857, 0.0699338154),
        (EVEN, SKEW, 0.8944271910, 0.3249196962, 0.1115717757),
    ],
)
def test_overlap_hellinger_and_bhattacharyya(p, q, overlap, hellinger, bhattacharyya) -> None:
    """Bhattacharyya 1943: BC = Σ √(pq), H = √(1 − BC), −ln BC."""
    assert d.overlap(p, q) == pytest.approx(overlap, abs=1e-10)
    assert d.hellinger(p, q) == pytest.approx(hellinger, abs=1e-10)
    assert d.bhattacharyya(p, q) == pytest.approx(bhattacharyya, abs=1e-10)


@pytest.mark.parametrize(
    ("p", "q", "distance"),
    [
        (FALLING, RISING, 0.7392907102),
        (EVEN, SKEW, 0.9272952180),
        (np.array([1.0, 0.0]), np.array([0.0, 1.0]), np.pi),
        (np.full(3, 1 / 3), np.array([1.0, 0, 0]), 1.9106332362),
    ],
)
def test_fisher_rao_of_histograms(p, q, distance) -> None:
    """Rao 1945: 2 arccos Σ √(pq)."""
    assert d.fisher_rao(p, q) == pytest.approx(distance, abs=1e-10)


def test_fisher_rao_keeps_its_digits_for_near_neighbours() -> None:
    """The metric is Σ dp² / p; at a step of 1e-9, arccos of a number that rounds to 1 would give 0."""
    step = np.array([1e-9, -1e-9])

    assert d.fisher_rao(EVEN, EVEN + step) == pytest.approx(np.sqrt((step**2 / EVEN).sum()), rel=1e-6)


@given(p=shares(6), q=shares(6))
def test_f_divergences_with_known_generators_are_the_named_ones(p, q) -> None:
    """Csiszár 1967: (√t − 1)² gives 2H², (t − 1)² gives χ², |t − 1| / 2 the total variation, −ln t the reverse KL."""
    chi = d.f_divergence(p, q, lambda t: (t - 1) ** 2, at_infinity=np.inf)
    variation = d.f_divergence(p, q, lambda t: np.abs(t - 1) / 2, at_infinity=0.5)

    assert d.f_divergence(p, q, lambda t: (np.sqrt(t) - 1) ** 2, at_infinity=1.0) == pytest.approx(
        2 * d.hellinger(p, q) ** 2, abs=1e-12
    )
    assert d.f_divergence(p, q, lambda t: -np.log(t), at_infinity=0.0) == pytest.approx(entropy(q, p), abs=1e-12)
    assert chi == pytest.approx(((p - q) ** 2 / q).sum(), rel=1e-9, abs=1e-12)
    assert variation == pytest.approx(np.abs(p - q).sum() / 2, abs=1e-12)


def test_bins_that_the_second_lacks_count_by_the_generators_slope_at_infinity() -> None:
    """Total variation of disjoint histograms is 1, half of it from each side."""
    p, q = np.array([1.0, 0.0]), np.array([0.0, 1.0])

    assert d.f_divergence(p, q, lambda t: np.abs(t - 1) / 2, at_infinity=0.5) == 1.0


@given(p=shares(5), q=shares(5))
def test_the_inequalities_that_tie_them_together_hold(p, q) -> None:
    """Pinsker: KL ≥ 2 TV² (.32 for the coins); H² ≤ TV ≤ √2 H; −2 ln BC ≤ KL; JS ≤ ln 2."""
    variation = np.abs(p - q).sum() / 2

    assert d.kullback_leibler(p, q) >= 2 * variation**2 - 1e-12
    assert d.hellinger(p, q) ** 2 <= variation + 1e-12
    assert variation <= np.sqrt(2) * d.hellinger(p, q) + 1e-12
    assert 2 * d.bhattacharyya(p, q) <= d.kullback_leibler(p, q) + 1e-12
    assert 0 <= d.jensen_shannon(p, q) <= np.log(2) + 1e-12


@given(p=shares(5), q=shares(5), r=shares(5))
def test_distances_satisfy_the_triangle_inequality(p, q, r) -> None:
    for distance in (d.hellinger, d.fisher_rao, lambda a, b: np.sqrt(d.jensen_shannon(a, b))):
        assert distance(p, r) <= distance(p, q) + distance(q, r) + 1e-9


@given(p=shares(6), q=shares(6), order=st.permutations(range(6)))
def test_neither_order_nor_merging_of_alike_bins_changes_a_number(p, q, order) -> None:
    """Sufficiency (Chentsov): splitting bins in the same proportion in both histograms adds no information."""
    split_p, split_q = np.concatenate([p * 0.3, p * 0.7]), np.concatenate([q * 0.3, q * 0.7])

    for divergence in (d.kullback_leibler, d.jensen_shannon, d.hellinger, d.bhattacharyya, d.fisher_rao):
        value = divergence(p, q)
        assert divergence(p[order], q[order]) == pytest.approx(value, abs=1e-9)
        assert divergence(split_p, split_q) == pytest.approx(value, abs=1e-9)


@pytest.mark.parametrize("bad", [[0.5, 0.6], [1.5, -0.5], [np.nan, 1.0], [np.inf, 0.0]])
def test_what_is_no_histogram_is_refused(bad) -> None:
    with pytest.raises(InputError, match="a histogram's shares"):
        d.kullback_leibler(np.array(bad), EVEN)


def test_histograms_over_different_bins_are_refused() -> None:
    with pytest.raises(InputError, match="the same bins"):
        d.hellinger(EVEN, FALLING)
