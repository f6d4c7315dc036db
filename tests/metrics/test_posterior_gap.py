import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm

import metrics.posterior_gap as module
from metrics.gaussian_mixtures import gaussian_mixtures, log_density
from metrics.kernel_density import kernel_mixtures
from metrics.posterior_gap import (
    divergence_at,
    gap_of_overlaps,
    grid_kullback_leibler,
    grid_squared_error,
    kullback_leibler,
    log_overlap,
    normalised_squared_error,
    reference_draws,
)


def scalar_mixture(weights, means, variances):
    return gaussian_mixtures(weights, np.c_[means], np.reshape(variances, (-1, 1, 1)))


# Mixtures and the Gaussians that match their moments; values by quadrature with another program.
TWO_MODES = scalar_mixture([0.5, 0.5], [-1.0, 1.0], [1.0, 1.0])
TWO_MODES_MERGED = scalar_mixture([1.0], [0.0], [2.0])
SKEWED = scalar_mixture([0.75, 0.25], [0.0, 4.0], [1.0, 2.0])
SKEWED_MERGED = scalar_mixture([1.0], [1.0], [4.25])
IN_THE_PLANE = gaussian_mixtures(
    [0.6, 0.4], [[0.0, 0.0], [5.0, -5.0]], [np.diag([1.0, 4.0]), [[2.0, 0.5], [0.5, 1.0]]]
)
IN_THE_PLANE_MERGED = gaussian_mixtures([1.0], [[2.0, -2.0]], [[[7.4, -5.8], [-5.8, 8.8]]])


def squared_error(first, second):
    own = np.exp(log_overlap(first, first)) + np.exp(log_overlap(second, second))
    return own - 2 * np.exp(log_overlap(first, second))


def test_the_overlaps_of_two_modes_and_one_gaussian_are_those_of_quadrature():
    assert np.exp(log_overlap(TWO_MODES, TWO_MODES)) == pytest.approx(0.1929358331, abs=1e-10)
    merged = TWO_MODES_MERGED
    assert np.exp(log_overlap(TWO_MODES, merged)) == pytest.approx(0.1949696557, abs=1e-10)
    assert np.exp(log_overlap(merged, merged)) == pytest.approx(0.1994711402, abs=1e-10)
    assert squared_error(TWO_MODES, merged) == pytest.approx(0.002467661820, abs=1e-11)


@pytest.mark.parametrize(("distance", "expected"), [(1.0, 0.1247982941), (2.0, 0.3566358348)])
def test_the_squared_error_of_two_unit_gaussians_is_that_of_quadrature(distance, expected):
    """And the normalised one is 1 - exp(-d² / 4)."""
    first, second = (scalar_mixture([1.0], [mean], [1.0]) for mean in (0.0, distance))
    assert squared_error(first, second) == pytest.approx(expected, abs=1e-10)
    closed_form = -np.expm1(-(distance**2) / 4)
    assert normalised_squared_error(first, second) == pytest.approx(closed_form, abs=1e-12)


@pytest.mark.parametrize(
    ("first", "second"), [(TWO_MODES, TWO_MODES_MERGED), (SKEWED, SKEWED_MERGED)]
)
def test_the_normalised_error_is_the_integral_of_scipy(first, second):
    def integral(function):
        def integrand(x):
            p, q = (np.exp(log_density(mixture, [[x]])[0]) for mixture in (first, second))
            return function(p, q)

        return quad(integrand, -15, 20, epsabs=1e-13, epsrel=1e-12, limit=200)[0]

    expected = integral(lambda p, q: (p - q) ** 2) / integral(lambda p, q: p**2 + q**2)
    assert normalised_squared_error(first, second) == pytest.approx(expected, abs=1e-11)


def plane_grid(half_width=30.0, points=601):
    axis = np.linspace(-half_width, half_width, points)
    x, y = np.meshgrid(axis, axis, indexing="ij")
    return np.column_stack([x.ravel(), y.ravel()]), (axis[1] - axis[0]) ** 2


def test_in_the_plane_it_is_the_sum_over_a_fine_grid():
    points, _ = plane_grid()
    p, q = (np.exp(log_density(m, points)) for m in (IN_THE_PLANE, IN_THE_PLANE_MERGED))
    expected = np.sum((p - q) ** 2) / np.sum(p**2 + q**2)
    found = normalised_squared_error(IN_THE_PLANE, IN_THE_PLANE_MERGED)
    assert found == pytest.approx(expected, abs=1e-12)


def random_pair(rng, batch, n, components=(3, 5)):
    mixtures = []
    for count in components:
        weights = rng.random((*batch, count))
        roots = rng.normal(size=(*batch, count, n, n + 1))
        mixtures.append(
            gaussian_mixtures(
                weights / weights.sum(axis=-1, keepdims=True),
                rng.normal(size=(*batch, count, n)),
                roots @ roots.swapaxes(-1, -2),
            )
        )
    return mixtures


def test_it_is_symmetric_between_zero_and_one_and_zero_only_for_equals():
    first, second = random_pair(np.random.default_rng(1), (200,), 3)
    found = normalised_squared_error(first, second)
    np.testing.assert_allclose(found, normalised_squared_error(second, first), atol=1e-13)
    assert np.all((found > 1e-4) & (found < 1))
    assert np.all(normalised_squared_error(first, first) < 1e-13)
    split = gaussian_mixtures([0.2, 0.3, 0.5], np.zeros((3, 1)), np.ones((3, 1, 1)))
    assert normalised_squared_error(split, scalar_mixture([1.0], [0.0], [1.0])) < 1e-13


def test_no_unit_or_choice_of_coordinates_changes_it():
    rng = np.random.default_rng(2)
    pair = random_pair(rng, (), 2)
    change, shift = np.array([[1e3, 2.0], [-5.0, 1e-2]]), np.array([1e4, -3.0])
    moved = [
        gaussian_mixtures(m.weights, m.means @ change.T + shift, change @ m.covariances @ change.T)
        for m in pair
    ]
    expected = normalised_squared_error(*pair)
    assert normalised_squared_error(*moved) == pytest.approx(expected, abs=1e-9)


def test_far_apart_it_is_one_and_the_divergence_a_number():
    """1e6 standard deviations apart: the divergence is d² / 2 for equal variances."""
    near, far = scalar_mixture([1.0], [0.0], [1.0]), scalar_mixture([1.0], [1e6], [1.0])
    assert normalised_squared_error(near, far) == 1.0
    assert log_overlap(near, far) == pytest.approx(-0.25 * 1e12, rel=1e-9)
    found = kullback_leibler(near, far, 100, np.random.default_rng(0))
    assert found.estimate == pytest.approx(0.5e12, rel=1e-5)
    assert found.standard_error == pytest.approx(1e6 / 10, rel=0.3)


def test_nearly_singular_mixtures_are_told_apart_along_their_thin_axis():
    """Deviations 1e5 and 1e-5, a shift d of two thin ones: 1 - exp(-d² / 4) = 0.632..."""
    spread = np.diag([1e10, 1e-10])
    first = gaussian_mixtures([1.0], [[0.0, 0.0]], [spread])
    second = gaussian_mixtures([1.0], [[0.0, 2e-5]], [spread])
    found = normalised_squared_error(first, second)
    assert found == pytest.approx(-np.expm1(-1.0), abs=1e-12)
    divergence = kullback_leibler(first, second, 4000, np.random.default_rng(1))
    assert abs(divergence.estimate - 2.0) < 4.5 * divergence.standard_error


@pytest.mark.parametrize(
    ("mixture", "merged", "expected"),
    [
        (TWO_MODES, TWO_MODES_MERGED, 0.0097427699),
        (SKEWED, SKEWED_MERGED, 0.1732331067),
    ],
)
def test_divergences_from_the_merged_gaussian_are_those_of_quadrature(mixture, merged, expected):
    """Sampled: 4.5 standard errors, 7e-6 by chance. On a grid: to the last digit."""
    found = kullback_leibler(mixture, merged, 20_000, np.random.default_rng(3))
    assert abs(found.estimate - expected) < 4.5 * found.standard_error
    assert found.standard_error < 0.01
    x = np.linspace(-15.0, 25.0, 4001)[:, None]
    density = np.exp(log_density(mixture, x))
    assert grid_kullback_leibler(x, 0.01, density, merged) == pytest.approx(expected, abs=1e-9)


def test_standard_errors_are_the_spread_of_repeated_estimates():
    """300 estimates: their deviation is good to 4 %, so 18 % is 4.5 standard errors."""
    batch = [np.broadcast_to(part, (300, *part.shape)) for part in (SKEWED[:3] + SKEWED_MERGED[:3])]
    first, second = gaussian_mixtures(*batch[:3]), gaussian_mixtures(*batch[3:])
    found = kullback_leibler(first, second, 500, np.random.default_rng(4))
    ratio = found.standard_error.mean() / found.estimate.std(ddof=1)
    assert abs(ratio - 1) < 0.18
    error = found.estimate.std(ddof=1) / np.sqrt(300)
    assert abs(found.estimate.mean() - 0.1732331067) < 4.5 * error


def test_a_batch_is_its_mixtures_one_by_one(monkeypatch):
    """Also in small blocks, with components not in use and posteriors that are absent."""
    first, second = random_pair(np.random.default_rng(5), (4, 3), 2)
    weights = first.weights.copy()
    weights[..., 1] = 0.0
    weights /= weights.sum(axis=-1, keepdims=True)
    weights[1, 2] = 0.0
    first = gaussian_mixtures(weights, first.means, first.covariances)
    monkeypatch.setattr(module, "BLOCK", 12)
    found = normalised_squared_error(first, second)
    divergence = kullback_leibler(first, second, 10, np.random.default_rng(6))
    rng = np.random.default_rng(6)
    for place in np.ndindex(4, 3):
        if place == (1, 2):
            assert np.isnan([found[place], *(part[place] for part in divergence)]).all()
            continue
        used = first.weights[place] > 0
        one = gaussian_mixtures(
            first.weights[place][used], first.means[place][used], first.covariances[place][used]
        )
        other = second.at(place)
        assert found[place] == pytest.approx(normalised_squared_error(one, other), abs=1e-13)
        alone = kullback_leibler(one, other, 10, rng)
        assert divergence.estimate[place] == pytest.approx(float(alone.estimate), rel=1e-10)


def test_overlaps_computed_once_serve_every_strategy():
    first, second = random_pair(np.random.default_rng(7), (20,), 2)
    parts = log_overlap(first, first), log_overlap(second, second), log_overlap(first, second)
    np.testing.assert_array_equal(gap_of_overlaps(*parts), normalised_squared_error(first, second))


def test_a_grids_gap_from_a_mixture_is_that_of_the_density_it_holds():
    points, cell = plane_grid(points=401)
    density = np.exp(log_density(IN_THE_PLANE_MERGED, points))
    found = grid_squared_error(points, cell, density, IN_THE_PLANE)
    expected = normalised_squared_error(IN_THE_PLANE_MERGED, IN_THE_PLANE)
    assert found == pytest.approx(expected, abs=1e-12)
    assert grid_squared_error(points, cell, density, IN_THE_PLANE_MERGED) < 1e-12
    far = gaussian_mixtures([1.0], [[1e4, 0.0]], [np.eye(2)])
    assert grid_squared_error(points, cell, density, far) == 1.0


def test_a_grid_with_empty_cells_has_a_divergence():
    """A uniform density on [0, 1] from N(0, 1): ln sqrt(2 pi) + 1/6, by hand."""
    x = (np.arange(-1000, 2000) + 0.5) / 1000
    density = np.where((x > 0) & (x < 1), 1.0, 0.0)
    standard = scalar_mixture([1.0], [0.0], [1.0])
    found = grid_kullback_leibler(x[:, None], 1e-3, density, standard)
    assert found == pytest.approx(-norm.logpdf(0) + 1 / 6, abs=1e-6)


def test_mixtures_that_do_not_match_and_too_few_draws_are_refused():
    with pytest.raises(ValueError, match="agree in all but the number of components"):
        normalised_squared_error(TWO_MODES, IN_THE_PLANE)
    one, two = (
        gaussian_mixtures(np.ones((k, 1)), np.zeros((k, 1, 2)), np.tile(np.eye(2), (k, 1, 1, 1)))
        for k in (1, 2)
    )
    with pytest.raises(ValueError, match="agree in all but the number of components"):
        kullback_leibler(one, two, 10, np.random.default_rng(0))
    with pytest.raises(ValueError, match="draws must be at least 2, got 1"):
        kullback_leibler(one, one, 1, np.random.default_rng(0))


@pytest.fixture
def clouds():
    """Two scans of 30 weighted samples of four numbers, and mixtures of three components."""
    rng = np.random.default_rng(4)
    weights = rng.dirichlet(np.ones(30), 2)
    kernels = kernel_mixtures(weights, rng.normal(size=(2, 30, 4)))
    spreads = np.eye(4) + 0.3 * rng.normal(size=(2, 3, 4, 4)) ** 2
    mixtures = gaussian_mixtures(
        rng.dirichlet(np.ones(3), 2), rng.normal(size=(2, 3, 4)), spreads @ spreads.mT
    )
    return mixtures, kernels


def test_overlaps_with_kernels_are_those_of_any_components(clouds):
    mixtures, kernels = clouds
    plain = gaussian_mixtures(kernels.weights, kernels.means, kernels.covariances.copy())
    for first, second, expected in (
        (mixtures, kernels, log_overlap(mixtures, plain)),
        (kernels, mixtures, log_overlap(plain, mixtures)),
        (kernels, kernels, log_overlap(plain, plain)),
    ):
        np.testing.assert_allclose(log_overlap(first, second), expected, rtol=1e-12)


def test_draws_taken_once_give_every_other_the_divergence_of_draws_of_its_own(clouds):
    mixtures, kernels = clouds
    drawn = reference_draws(mixtures, 40, np.random.default_rng(9))
    for other in (kernels, mixtures):
        alone = kullback_leibler(mixtures, other, 40, np.random.default_rng(9))
        shared = divergence_at(drawn, other)
        np.testing.assert_array_equal(shared.estimate, alone.estimate)
        np.testing.assert_array_equal(shared.standard_error, alone.standard_error)
    with pytest.raises(ValueError, match=r"got draws \(2, 40, 4\) and means"):
        divergence_at(drawn, mixtures.at((0,)))
