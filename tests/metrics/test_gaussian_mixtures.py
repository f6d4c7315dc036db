import numpy as np
import pytest
from scipy.stats import multivariate_normal, norm

import metrics.gaussian_mixtures as module
from metrics.gaussian_mixtures import (
    distribution,
    draw,
    gaussian_mixtures,
    log_density,
    marginal,
)


def random_mixtures(rng, batch, components, n):
    weights = rng.random((*batch, components))
    roots = rng.normal(size=(*batch, components, n, n + 2))
    return (
        weights / weights.sum(axis=-1, keepdims=True),
        3 * rng.normal(size=(*batch, components, n)),
        roots @ roots.swapaxes(-1, -2),
    )


def scipy_density(weights, means, covariances, points):
    parts = zip(weights, means, covariances, strict=True)
    return sum(w * multivariate_normal.pdf(points, mean, spread) for w, mean, spread in parts)


@pytest.mark.parametrize(("components", "n"), [(1, 1), (3, 2), (7, 4)])
def test_the_density_is_that_of_scipy(components, n):
    rng = np.random.default_rng(n)
    parts = random_mixtures(rng, (2, 3), components, n)
    points = 3 * rng.normal(size=(2, 3, 5, n))
    found = log_density(gaussian_mixtures(*parts), points)
    for place in np.ndindex(2, 3):
        expected = scipy_density(*(part[place] for part in parts), points[place])
        np.testing.assert_allclose(np.exp(found[place]), expected, rtol=1e-10)


def test_many_points_in_blocks_are_the_same_as_few(monkeypatch):
    rng = np.random.default_rng(1)
    mixture = gaussian_mixtures(*random_mixtures(rng, (), 3, 2))
    points = rng.normal(size=(100, 2))
    expected = log_density(mixture, points)
    monkeypatch.setattr(module, "BLOCK", 20)
    np.testing.assert_allclose(log_density(mixture, points), expected, rtol=1e-13)


def test_the_logarithm_stays_finite_where_the_density_leaves_the_range_of_numbers():
    """1e9 standard deviations away: ln p = ln w - d²/2 - ln sqrt(2 pi) of the nearer component."""
    mixture = gaussian_mixtures([0.25, 0.75], [[0.0], [-10.0]], np.ones((2, 1, 1)))
    found = log_density(mixture, [[1e9]])[0]
    assert found == pytest.approx(-0.5 * 1e18, rel=1e-12)
    near = log_density(mixture, [[40.0]])[0]
    assert near == pytest.approx(np.log(0.25) + norm.logpdf(40.0), abs=1e-12)


def test_a_nearly_singular_covariance_keeps_its_digits():
    """Deviations 1e3 and 1e-3 along turned axes; a point two of each away.

    Rounding of numbers of 1e6 leaves the thin axis's variance of 1e-6 four digits.
    """
    angle = 0.3
    axes = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    spread = axes @ np.diag([1e6, 1e-6]) @ axes.T
    mixture = gaussian_mixtures([1.0], [[5.0, 7.0]], [spread])
    point = np.array([5.0, 7.0]) + axes @ np.array([2e3, 2e-3])
    expected = -0.5 * 8 - np.log(2 * np.pi) - np.log(1e3 * 1e-3)
    assert log_density(mixture, point[None])[0] == pytest.approx(expected, abs=1e-3)


def test_components_not_in_use_are_never_read_and_absent_posteriors_are_nan():
    weights, means, covariances = random_mixtures(np.random.default_rng(2), (3,), 2, 2)
    room = np.full((3, 4), 0.0), np.full((3, 4, 2), np.nan), np.full((3, 4, 2, 2), np.nan)
    for wide, part in zip(room, (weights, means, covariances), strict=True):
        wide[:, [3, 1]] = part
    room[0][2] = 0.0
    points = np.zeros((3, 1, 2))
    padded, plain = gaussian_mixtures(*room), gaussian_mixtures(weights, means, covariances)
    found, expected = log_density(padded, points), log_density(plain, points)
    np.testing.assert_allclose(found[:2], expected[:2], rtol=1e-13)
    assert np.isnan(found[2, 0])
    below = distribution(padded, points[:, 0])
    np.testing.assert_allclose(below[:2], distribution(plain, points[:, 0])[:2], rtol=1e-13)
    assert np.isnan(below[2]).all()


def test_the_distribution_of_each_coordinate_is_the_sum_of_scipys():
    weights, means, covariances = random_mixtures(np.random.default_rng(3), (), 3, 2)
    point = np.array([0.3, -1.0])
    spread = np.sqrt(np.diagonal(covariances, axis1=1, axis2=2))
    expected = weights @ norm.cdf(point, means, spread)
    mixture = gaussian_mixtures(weights, means, covariances)
    np.testing.assert_allclose(distribution(mixture, point), expected, rtol=1e-12)


def test_the_marginal_is_the_density_with_the_rest_integrated_out():
    mixture = gaussian_mixtures(*random_mixtures(np.random.default_rng(4), (), 2, 3))
    z = np.linspace(-40.0, 40.0, 4001)
    place = np.array([0.5, -0.2])
    points = np.column_stack([np.tile(place, (len(z), 1)), z])
    expected = np.exp(log_density(mixture, points)).sum() * (z[1] - z[0])
    found = np.exp(log_density(marginal(mixture, slice(2)), place[None])[0])
    assert found == pytest.approx(expected, rel=1e-9)


def test_draws_have_the_moments_of_the_mixture():
    """20,000 draws; five numbers at 4.5 standard errors fail by chance once in 30,000 seeds."""
    rng = np.random.default_rng(5)
    weights, means, covariances = random_mixtures(rng, (), 3, 2)
    points = draw(gaussian_mixtures(weights, means, covariances), 20_000, rng)
    mean = weights @ means
    offsets = means - mean
    spread = np.einsum("c,cij->ij", weights, covariances)
    spread = spread + np.einsum("c,ci,cj->ij", weights, offsets, offsets)
    products = [points[:, 0], points[:, 1]]
    expected = [mean[0], mean[1]]
    for i, j in ((0, 0), (0, 1), (1, 1)):
        products.append((points[:, i] - mean[i]) * (points[:, j] - mean[j]))
        expected.append(spread[i, j])
    error = np.std(products, axis=1) / np.sqrt(len(points))
    assert np.all(np.abs(np.mean(products, axis=1) - expected) < 4.5 * error)


@pytest.mark.parametrize(
    ("weights", "means", "covariances", "message"),
    [
        ([0.5, 0.6], np.zeros((2, 1)), np.ones((2, 1, 1)), r"weights at \(\) must not be"),
        ([1.5, -0.5], np.zeros((2, 1)), np.ones((2, 1, 1)), "must not be negative and sum to one"),
        ([np.nan, 1.0], np.zeros((2, 1)), np.ones((2, 1, 1)), "sum to one"),
        ([0.5, 0.5], [[0.0], [np.nan]], np.ones((2, 1, 1)), r"weight at \(1,\) is not finite"),
        ([0.5, 0.5], np.zeros((2, 1)), [[[1.0]], [[np.inf]]], r"weight at \(1,\) is not finite"),
        ([0.5, 0.5], np.zeros((2, 1)), [[[1.0]], [[-1.0]]], r"at \(1,\) is not positive definite"),
        ([1.0], np.zeros((2, 1)), np.ones((2, 1, 1)), r"shapes must be \(\.\.\., C\)"),
        ([1.0], np.zeros((1, 2)), np.ones((1, 2, 1)), r"shapes must be \(\.\.\., C\)"),
    ],
)
def test_what_is_no_mixture_is_refused_with_its_place(weights, means, covariances, message):
    with pytest.raises(ValueError, match=message):
        gaussian_mixtures(weights, means, covariances)


def test_points_of_another_shape_are_refused():
    mixture = gaussian_mixtures([[1.0]], [[[0.0, 0.0]]], [[np.eye(2)]])
    with pytest.raises(ValueError, match=r"points must be \(\.\.\., M, n\)"):
        log_density(mixture, np.zeros((1, 3)))
    with pytest.raises(ValueError, match=r"points must be \(\.\.\., M, n\)"):
        log_density(mixture, np.zeros((2, 1, 2)))
    with pytest.raises(ValueError, match=r"the point must be \(\.\.\., n\)"):
        distribution(mixture, np.zeros(2))
