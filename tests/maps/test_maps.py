"""Laws of maps between palettes."""

from __future__ import annotations

import attrs
import numpy as np
import pytest

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.maps.affine import IDENTITY, AffineMap
from hueferry.maps.chain import rising_between
from hueferry.maps.compose import Composed, Partial
from hueferry.maps.entropic import DebiasedMap, SoftMean, fit_entropic
from hueferry.maps.exact import barycentric_projection, fit_exact
from hueferry.maps.gaussian import fit_gaussian
from hueferry.maps.method import Method
from hueferry.maps.methods import FITTERS, fit_map
from hueferry.palettes.palette import Palette
from hueferry.transport.costs import squared_distances
from hueferry.transport.entropic import entropic_potentials, solve_entropic
from hueferry.transport.exact import solve_exact
from hueferry.transport.sliced import sliced_squared

METHODS = list(Method)


def blobs(seed: int, *, count: int = 300) -> Palette:
    """Colours around a few centres, as of a picture with a few surfaces."""
    rng = np.random.default_rng(seed)
    centres = rng.uniform([0.25, -0.10, -0.10], [0.85, 0.10, 0.10], (5, 3))
    colours = centres[rng.integers(0, 5, count)] + rng.normal(0, 0.03, (count, 3))
    return Palette(colours, rng.dirichlet(np.full(count, 2.0)))


SOURCE, TARGET = blobs(1), blobs(2)


def distance(first: Palette, second: Palette) -> float:
    return sliced_squared(first.colours, first.weights, second.colours, second.weights, directions=128).squared ** 0.5


def test_every_method_has_a_fitter() -> None:
    assert set(FITTERS) == set(Method)


@pytest.mark.parametrize("method", METHODS)
def test_a_palette_carried_to_itself_stays(method: Method) -> None:
    map_ = fit_map(SOURCE, SOURCE, method=method)

    moved = delta_e_2000(oklab_to_lab(map_(SOURCE.colours)), oklab_to_lab(SOURCE.colours))

    assert SOURCE.weights @ moved < 0.1


@pytest.mark.parametrize("method", METHODS)
def test_every_method_brings_the_palette_nearer(method: Method) -> None:
    map_ = fit_map(SOURCE, TARGET, method=method)

    after = attrs.evolve(SOURCE, colours=map_(SOURCE.colours))

    limit = {Method.GAUSSIAN: 0.4, Method.CHANNELS: 0.3}.get(method, 0.2)
    assert distance(after, TARGET) < limit * distance(SOURCE, TARGET)


@pytest.mark.parametrize("method", METHODS)
def test_maps_answer_for_every_colour_and_are_pure(method: Method) -> None:
    map_ = fit_map(SOURCE, TARGET, method=method)
    wild = np.random.default_rng(3).uniform([-0.5, -1, -1], [1.5, 1, 1], (500, 3))

    whole = map_(wild)

    assert np.isfinite(whole).all()
    np.testing.assert_allclose(np.concatenate([map_(wild[:77]), map_(wild[77:])]), whole, atol=1e-5)
    np.testing.assert_array_equal(map_(wild), whole)


@pytest.mark.parametrize("method", METHODS)
def test_equal_seeds_give_equal_maps(method: Method) -> None:
    first, second = (fit_map(SOURCE, TARGET, method=method, seed=4) for _ in range(2))

    np.testing.assert_array_equal(first(SOURCE.colours), second(SOURCE.colours))


@pytest.mark.parametrize("method", [Method.ENTROPIC, Method.EXACT, Method.MIXTURE])
def test_far_from_the_palette_the_affine_part_is_followed(method: Method) -> None:
    map_, affine = fit_map(SOURCE, TARGET, method=method), fit_gaussian(SOURCE, TARGET)
    far = np.array([[3.0, 1.0, -1.0], [-2.0, -1.5, 1.0]])

    np.testing.assert_allclose(map_(far), affine(far), atol=0.02)


@pytest.mark.parametrize("method", METHODS)
def test_one_colour_is_carried_to_one_colour(method: Method) -> None:
    single = Palette([[0.4, 0.05, 0.0]], [1.0])
    other = Palette([[0.6, 0.0, 0.05]], [1.0])

    np.testing.assert_allclose(fit_map(single, other, method=method)(single.colours), other.colours, atol=1e-6)


def test_the_gaussian_map_carries_mean_and_covariance() -> None:
    """Pitié & Kokaram (2007): both are matched exactly."""
    after = attrs.evolve(SOURCE, colours=fit_gaussian(SOURCE, TARGET)(SOURCE.colours))

    np.testing.assert_allclose(after.mean, TARGET.mean, atol=1e-12)
    np.testing.assert_allclose(after.covariance, TARGET.covariance, atol=1e-12)


def test_the_entropic_map_on_the_palette_is_the_barycentric_projection_of_its_plan() -> None:
    """Pooladian & Niles-Weed (2021): the out-of-sample map agrees with the plan at the samples."""
    epsilon = 0.01
    cost = squared_distances(SOURCE.colours, TARGET.colours)
    plan = solve_entropic(SOURCE.weights, TARGET.weights, cost, epsilon=epsilon, tolerance=1e-10)

    images, _ = SoftMean(TARGET.colours, TARGET.weights, plan.potentials[1], epsilon).evaluate(SOURCE.colours)

    wanted = barycentric_projection(plan.coupling, TARGET.colours, otherwise=SOURCE.colours)
    np.testing.assert_allclose(images, wanted, atol=2e-4)


def test_the_jacobian_of_an_entropic_map_is_symmetric_and_never_negative() -> None:
    """The map is the gradient of a convex function (Brenier 1991; its Jacobian is 2/ε times a covariance)."""
    epsilon, step = 0.01, 2e-3
    cost = squared_distances(SOURCE.colours, TARGET.colours)
    found = entropic_potentials(SOURCE.weights, TARGET.weights, cost, epsilon=epsilon)
    soft = SoftMean(TARGET.colours, TARGET.weights, found.g, epsilon)
    points = SOURCE.colours[:60]

    jacobian = np.stack(
        [
            (soft.evaluate(points + step * axis)[0] - soft.evaluate(points - step * axis)[0]) / (2 * step)
            for axis in np.eye(3)
        ],
        axis=2,
    )

    assert np.abs(jacobian - jacobian.transpose(0, 2, 1)).max() < 0.02 * np.abs(jacobian).max()
    assert np.linalg.eigvalsh((jacobian + jacobian.transpose(0, 2, 1)) / 2).min() > -0.02


def test_debiasing_gives_back_the_spread_that_blur_takes() -> None:
    """The entropic map alone shrinks a palette (Janati et al. 2020); less its own shrinkage it hardly does."""
    wide = Palette(TARGET.colours, TARGET.weights)
    epsilon = 0.02
    cost = squared_distances(SOURCE.colours, wide.colours)
    found = entropic_potentials(SOURCE.weights, wide.weights, cost, epsilon=epsilon)
    blurred = attrs.evolve(
        SOURCE, colours=SoftMean(wide.colours, wide.weights, found.g, epsilon).evaluate(SOURCE.colours)[0]
    )
    debiased = attrs.evolve(SOURCE, colours=fit_entropic(SOURCE, wide, blur=0.1)(SOURCE.colours))

    assert np.trace(blurred.covariance) < 0.8 * np.trace(wide.covariance)
    assert np.trace(debiased.covariance) == pytest.approx(np.trace(wide.covariance), rel=0.12)


def test_trust_is_full_on_the_palette_and_fades_away_from_it() -> None:
    composed = fit_entropic(SOURCE, TARGET)
    inner = composed.second
    assert isinstance(inner, DebiasedMap)

    on = inner.trust(composed.first(SOURCE.colours))
    away = inner.trust(composed.first(SOURCE.colours) + np.array([1.0, 0, 0]))

    assert np.median(on) > 0.9
    assert away.max() < 0.1


def test_the_exact_map_follows_its_plan_where_colours_are_dense() -> None:
    source, target = blobs(5, count=60), blobs(6, count=60)
    affine = fit_gaussian(source, target)
    start = affine(source.colours)
    plan = solve_exact(source.weights, target.weights, squared_distances(start, target.colours))
    wanted = barycentric_projection(plan.coupling, target.colours, otherwise=start)

    images = fit_exact(source, target, bandwidth=2e-3)(source.colours)

    # Two colours in a hundred lie beyond the level of full trust, and a few have a neighbour within the bandwidth.
    error = np.linalg.norm(images - wanted, axis=1)
    assert np.quantile(error, 0.9) < 1e-3


def test_a_rising_function_carries_quantiles_and_never_falls() -> None:
    rng = np.random.default_rng(7)
    x, y = rng.normal(0, 1, 4000), rng.gamma(2.0, 1.0, 4000)
    shares = np.full(4000, 1 / 4000)

    rising = rising_between(x, shares, y, shares, knots=64, steepest=50.0)

    levels = [0.1, 0.25, 0.5, 0.75, 0.9]
    np.testing.assert_allclose(rising(np.quantile(x, levels)), np.quantile(y, levels), atol=0.05)
    assert (np.diff(rising(np.linspace(-6, 6, 2000))) >= 0).all()


def test_part_of_the_way_is_a_straight_line() -> None:
    """The displacement interpolation (McCann 1997)."""
    map_ = AffineMap(np.diag([1.2, 0.8, 1.1]), np.array([0.1, 0.0, -0.1]))
    x = SOURCE.colours

    np.testing.assert_allclose(Partial(map_, 0.25)(x), 0.75 * x + 0.25 * map_(x), atol=1e-12)
    np.testing.assert_array_equal(Partial(map_, 0.0)(x), x)
    np.testing.assert_array_equal(IDENTITY(x), x)


def test_one_map_after_another() -> None:
    first, second = AffineMap(2 * np.eye(3), np.ones(3)), AffineMap(np.eye(3), -np.ones(3))

    np.testing.assert_allclose(Composed(first, second)(SOURCE.colours), 2 * SOURCE.colours, atol=1e-12)


@pytest.mark.parametrize("method", [Method.ENTROPIC, Method.EXACT])
def test_a_third_of_the_range_away_the_palette_has_no_more_say(method: Method) -> None:
    map_, affine = fit_map(SOURCE, TARGET, method=method), fit_gaussian(SOURCE, TARGET)
    near, away = SOURCE.colours, SOURCE.colours + np.array([0.0, 0.35, 0.35])

    said = np.linalg.norm(map_(near) - affine(near), axis=1).mean()
    left = np.linalg.norm(map_(away) - affine(away), axis=1).mean()

    assert left < 0.15 * said


@pytest.mark.parametrize("method", [method for method in METHODS if method is not Method.SLICED])
def test_grain_of_a_gray_picture_is_not_stretched_into_colour(method: Method) -> None:
    """A gray ramp with a little chroma noise, towards a colourful palette: none is stretched a hundredfold.

    Not so the sliced chain, whose slopes multiply: there the gain cap of the table has to hold.
    """
    rng = np.random.default_rng(9)
    gray = Palette(
        np.stack([rng.uniform(0.2, 0.9, 300), *rng.normal(0, 1e-4, (2, 300))], axis=1), np.full(300, 1 / 300)
    )

    map_ = fit_map(gray, TARGET, method=method)
    step = np.array([0.0, 1e-3, 0.0])
    stretched = np.linalg.norm(map_(gray.colours + step) - map_(gray.colours), axis=1) / 1e-3

    assert np.median(stretched) < 100
