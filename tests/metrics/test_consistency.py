import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.distance import mahalanobis
from scipy.stats import chi2, kstest

from metrics.consistency import chi_square_mean_bounds, nees, nees_inside, nis


def random_covariances(rng: np.random.Generator, shape: tuple[int, ...], n: int) -> np.ndarray:
    roots = rng.normal(size=(*shape, n, n + 3))
    return roots @ roots.swapaxes(-1, -2)


@pytest.mark.parametrize("n", [1, 2, 3, 4, 6, 9])
def test_nees_is_the_quadratic_form_of_the_inverse_covariance(n):
    rng = np.random.default_rng(n)
    error = rng.normal(size=(20, 5, n))
    covariance = random_covariances(rng, (20, 5), n)
    solved = np.linalg.solve(covariance, error[..., None])[..., 0]
    expected = np.sum(error * solved, axis=-1)
    np.testing.assert_allclose(nees(error, covariance), expected, rtol=1e-9)
    np.testing.assert_allclose(nis(error, covariance), expected, rtol=1e-9)
    one = mahalanobis(error[3, 2], np.zeros(n), np.linalg.inv(covariance[3, 2])) ** 2
    np.testing.assert_allclose(nees(error[3, 2], covariance[3, 2]), one, rtol=1e-9)


def test_nees_of_a_diagonal_covariance_adds_squared_errors_in_standard_deviations():
    assert nees([3.0, 8.0], np.diag([9.0, 16.0])) == 1.0 + 4.0


@settings(deadline=None, derandomize=True, max_examples=60)
@given(st.integers(0, 2**32 - 1), st.integers(1, 6))
def test_nees_does_not_change_under_an_invertible_change_of_coordinates(seed, n):
    rng = np.random.default_rng(seed)
    error, covariance = rng.normal(size=n), random_covariances(rng, (), n)
    # Singular values between 0.1 and 10 keep the change well conditioned.
    left, right = (np.linalg.qr(rng.normal(size=(n, n)))[0] for _ in range(2))
    change = left @ np.diag(10 ** rng.uniform(-1, 1, n)) @ right
    changed = nees(change @ error, change @ covariance @ change.T)
    np.testing.assert_allclose(changed, nees(error, covariance), rtol=1e-6)


def test_nees_of_honest_gaussian_errors_is_chi_square_with_n_degrees():
    """Kolmogorov-Smirnov on 5,000 draws at level 1e-5, the rate of failure by chance."""
    rng = np.random.default_rng(11)
    root = rng.normal(size=(4, 4)) + 3 * np.eye(4)
    error = rng.normal(size=(5000, 4)) @ root.T
    covariance = np.broadcast_to(root @ root.T, (5000, 4, 4))
    assert kstest(nees(error, covariance), chi2(4).cdf).pvalue > 1e-5


def test_absent_estimates_pass_through_as_nan():
    error = np.array([[1.0, 1.0], [np.nan, np.nan], [2.0, 0.0]])
    covariance = np.stack([np.eye(2), np.full((2, 2), np.nan), np.eye(2)])
    np.testing.assert_array_equal(nees(error, covariance), [2.0, np.nan, 4.0])


def test_nees_of_no_trials_is_empty():
    assert nees(np.zeros((0, 7, 4)), np.zeros((0, 7, 4, 4))).shape == (0, 7)


@pytest.mark.parametrize(
    "bad",
    [[[1.0, 2.0], [2.0, 1.0]], [[1.0, 1.0], [1.0, 1.0]], [[-1.0, 0.0], [0.0, 1.0]]],
    ids=["indefinite", "singular", "negative variance"],
)
def test_a_covariance_that_is_not_positive_definite_is_refused_with_its_place(bad):
    covariance = np.broadcast_to(np.eye(2), (3, 4, 2, 2)).copy()
    covariance[2, 1] = bad
    with pytest.raises(ValueError, match=r"covariance at \(2, 1\) is not positive definite"):
        nees(np.ones((3, 4, 2)), covariance)


@pytest.mark.parametrize(
    ("error_shape", "covariance_shape"),
    [((5, 2), (5, 3, 3)), ((5, 2), (2, 2)), ((5, 0), (5, 0, 0)), ((), (1, 1))],
)
def test_shapes_that_disagree_are_refused(error_shape, covariance_shape):
    with pytest.raises(ValueError, match=r"shapes must be \(\.\.\., n\) and \(\.\.\., n, n\)"):
        nees(np.ones(error_shape), np.ones(covariance_shape))


# NIST/SEMATECH e-Handbook 1.3.6.7.4, table of chi-square critical values, as transcribed in the
# Boost.Math test data test_chi_squared.cpp: upper tails of .10, .05, .025, .01, .001.
UPPER = {
    1: (2.706, 3.841, 5.024, 6.635, 10.828),
    2: (4.605, 5.991, 7.378, 9.210, 13.816),
    4: (7.779, 9.488, 11.143, 13.277, 18.467),
    6: (10.645, 12.592, 14.449, 16.812, 22.458),
    50: (63.167, 67.505, 71.420, 76.154, 86.661),
    100: (118.498, 124.342, 129.561, 135.807, 149.449),
}
# Lower tails, same source.
LOWER = {
    2: (0.211, 0.103, 0.051, 0.020, 0.002),
    4: (1.064, 0.711, 0.484, 0.297, 0.091),
    6: (2.204, 1.635, 1.237, 0.872, 0.381),
    50: (37.689, 34.764, 32.357, 29.707, 24.674),
}
LEVELS = (0.80, 0.90, 0.95, 0.98, 0.998)  # two-sided levels with these tails


@pytest.mark.parametrize("dimension", UPPER)
def test_bounds_of_one_value_are_the_nist_chi_square_table(dimension):
    for column, level in enumerate(LEVELS):
        low, high = chi_square_mean_bounds(dimension, 1, level)
        assert high == pytest.approx(UPPER[dimension][column], abs=5.01e-4)
        if dimension in LOWER:
            assert low == pytest.approx(LOWER[dimension][column], abs=5.01e-4)


@pytest.mark.parametrize(
    ("dimension", "count", "printed", "decimals"),
    [(2, 50, (1.5, 2.6), 1), (1, 50, (0.65, 1.43), 2), (1, 100, (0.74, 1.30), 2)],
)
def test_bounds_round_to_the_printed_examples(dimension, count, printed, decimals):
    """Bar-Shalom, Li & Kirubarajan (2001), ch. 5: NEES and NIS of 50 runs, NIS over 100 scans
    (printed values from memory)."""
    bounds = np.round(chi_square_mean_bounds(dimension, count), decimals)
    assert bounds.tolist() == list(printed)


def test_bounds_agree_with_scipys_distribution_for_any_count():
    counts = np.array([1, 7, 100, 10_000])
    low, high = chi_square_mean_bounds(4, counts, 0.99)
    np.testing.assert_allclose(low, chi2.ppf(0.005, 4 * counts) / counts, rtol=1e-10)
    np.testing.assert_allclose(high, chi2.isf(0.005, 4 * counts) / counts, rtol=1e-10)


def test_bounds_of_no_values_are_nan():
    low, high = chi_square_mean_bounds(4, [0, 10])
    assert np.isnan([low[0], high[0]]).all()
    assert np.isfinite([low[1], high[1]]).all()


def test_bounds_refuse_impossible_arguments():
    with pytest.raises(ValueError, match="level must lie between 0 and 1, got 95"):
        chi_square_mean_bounds(4, 100, 95)
    with pytest.raises(ValueError, match="dimension must be at least 1"):
        chi_square_mean_bounds(0, 100)


def test_the_share_inside_leaves_out_scans_without_an_estimate():
    """95 % bounds, n = 4: [3.2546, 4.8212] of 50 values, [3.4648, 4.5731] of 100 (chi-square)."""
    mean = [3.3, 3.3, 4.7, 4.7, np.nan]
    count = [50, 100, 50, 100, 0]
    assert nees_inside(mean, count, dimension=4) == 0.5
    assert np.isnan(nees_inside([np.nan], [0], dimension=4))
    with pytest.raises(ValueError, match=r"one shape, got \(1,\) and \(2,\)"):
        nees_inside([4.0], [50, 50], dimension=4)


def test_honest_scans_lie_inside_at_the_level_and_overconfident_ones_outside():
    """2,000 independent scans with 20 to 60 estimates each; 4.5 binomial standard errors, so
    7e-6 by chance."""
    rng = np.random.default_rng(12)
    count = rng.integers(20, 61, size=2000)
    mean = rng.chisquare(4 * count) / count
    share = nees_inside(mean, count, dimension=4)
    assert abs(share - 0.95) < 4.5 * np.sqrt(0.95 * 0.05 / 2000)
    assert nees_inside(2 * mean, count, dimension=4) < 0.01
