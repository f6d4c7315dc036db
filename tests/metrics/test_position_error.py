import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from metrics.position_error import mean_squared_error, rmse, rmse_per_scan, squared_error

SIGMA = 10.0  # m, per axis


def circular_gaussian_errors(trials: int, scans: int, seed: int) -> np.ndarray:
    truth = np.zeros((trials, scans, 2))
    estimate = np.random.default_rng(seed).normal(scale=SIGMA, size=truth.shape)
    return squared_error(truth, estimate, np.ones((trials, scans), bool))


def test_squared_error_is_the_squared_euclidean_distance():
    truth = [[[1.0, 2.0], [0.0, 0.0]]]
    estimate = [[[4.0, 6.0], [0.0, -2.0]]]
    np.testing.assert_array_equal(squared_error(truth, estimate, [[True, True]]), [[25.0, 4.0]])


def test_what_stands_in_place_of_an_absent_estimate_is_never_read():
    truth = np.zeros((1, 3, 2))
    present = np.array([[True, False, False]])
    estimate = np.array([[[3.0, 4.0], [np.nan, np.nan], [7.0, np.inf]]])
    squared = squared_error(truth, estimate, present)
    np.testing.assert_array_equal(squared, [[25.0, np.nan, np.nan]])
    assert mean_squared_error(squared, present) == [25.0]
    assert rmse(squared, present) == 5.0
    np.testing.assert_array_equal(rmse_per_scan(squared, present), [5.0, np.nan, np.nan])


def test_a_trial_without_any_estimate_has_no_mean_and_leaves_the_rmse_alone():
    squared = np.array([[4.0, 16.0], [np.nan, np.nan]])
    present = np.array([[True, True], [False, False]])
    np.testing.assert_array_equal(mean_squared_error(squared, present), [10.0, np.nan])
    assert rmse(squared, present) == np.sqrt(10.0)


def test_rmse_of_no_trials_is_nan():
    assert np.isnan(rmse(np.zeros((0, 7)), np.zeros((0, 7), bool)))


@settings(deadline=None, derandomize=True, max_examples=50)
@given(st.integers(0, 2**32 - 1), st.integers(1, 6), st.integers(1, 8))
def test_rmse_squared_is_the_mean_of_trial_means_weighted_by_their_scans(seed, trials, scans):
    rng = np.random.default_rng(seed)
    squared = rng.exponential(size=(trials, scans))
    present = rng.random((trials, scans)) < 0.7
    present[0, 0] = True
    weights = present.sum(axis=1)
    some = weights > 0
    means = mean_squared_error(squared, present)
    assert np.array_equal(np.isnan(means), ~some)
    expected = np.average(means[some], weights=weights[some])
    np.testing.assert_allclose(rmse(squared, present) ** 2, expected, rtol=1e-12)


def test_rmse_of_circular_gaussian_errors_is_root_two_sigma():
    """Closed form: the squared error is sigma² chi-square(2), so N independent errors give a
    relative standard error of 1 / sqrt(2 n N), n = 2 axes. 4.5 of them: 7e-6 by chance."""
    squared = circular_gaussian_errors(trials=200, scans=50, seed=1)
    present = np.ones_like(squared, bool)
    relative = rmse(squared, present) / (np.sqrt(2) * SIGMA) - 1
    assert abs(relative) < 4.5 / np.sqrt(2 * 2 * squared.size)


def test_rmse_per_scan_of_circular_gaussian_errors_is_root_two_sigma_at_every_scan():
    """As above at 20 scans of 2,000 trials each, 5 standard errors: 1e-5 by chance."""
    squared = circular_gaussian_errors(trials=2000, scans=20, seed=2)
    relative = rmse_per_scan(squared, np.ones_like(squared, bool)) / (np.sqrt(2) * SIGMA) - 1
    assert np.all(np.abs(relative) < 5 / np.sqrt(2 * 2 * 2000))


def test_circular_gaussian_errors_have_the_median_and_95_percent_point_of_rayleigh():
    """Rayleigh quantiles sigma sqrt(-2 ln(1 - q)): 1.177410 and 2.447747 sigma (closed form).
    4.5 binomial standard errors: 1.4e-5 by chance for the two."""
    error = np.sqrt(circular_gaussian_errors(trials=200, scans=50, seed=3)) / SIGMA
    for share, quantile in ((0.5, 1.177410), (0.95, 2.447747)):
        tolerance = 4.5 * np.sqrt(share * (1 - share) / error.size)
        assert abs(np.mean(error <= quantile) - share) < tolerance


def test_errors_scale_with_the_unit():
    rng = np.random.default_rng(4)
    truth, estimate = rng.normal(size=(2, 3, 4, 2))
    present = np.ones((3, 4), bool)
    metres = rmse(squared_error(truth, estimate, present), present)
    feet = rmse(squared_error(truth / 0.3048, estimate / 0.3048, present), present)
    np.testing.assert_allclose(metres, 0.3048 * feet, rtol=1e-13)


def test_shapes_that_disagree_are_refused():
    with pytest.raises(ValueError, match=r"got \(2, 3, 2\), \(2, 3, 3\) and \(2, 3\)"):
        squared_error(np.zeros((2, 3, 2)), np.zeros((2, 3, 3)), np.ones((2, 3), bool))
    with pytest.raises(ValueError, match=r"got \(2, 3, 2\), \(2, 3, 2\) and \(3,\)"):
        squared_error(np.zeros((2, 3, 2)), np.zeros((2, 3, 2)), np.ones(3, bool))
