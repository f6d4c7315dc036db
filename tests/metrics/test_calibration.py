import numpy as np
import pytest
from scipy.special import ndtr
from scipy.stats import chi2, kstest, multivariate_normal, norm

from metrics.calibration import (
    central_level,
    coordinate_transform,
    coverage,
    gaussian_region_level,
    log_score,
    log_score_difference,
    mean_level,
    region_level,
    shares_in_bins,
)
from metrics.gaussian_mixtures import draw, gaussian_mixtures, log_density

ALARM = 1e-5  # level of Kolmogorov-Smirnov tests: their rate of failure by chance


def two_modes(batch=(), spread=1.0):
    """Three tenths near the origin, round; the rest a few deviations away, long and thin."""
    covariances = np.array([np.eye(2), [[4.0, 1.8], [1.8, 1.0]]])
    parts = np.array([0.3, 0.7]), np.array([[0.0, 0.0], [5.0, -2.0]]), spread * covariances
    return gaussian_mixtures(*(np.broadcast_to(part, (*batch, *part.shape)) for part in parts))


def truths_of(batch, rng):
    points = draw(two_modes(), int(np.prod(batch)), rng)
    return points.reshape(*batch, 2)


def test_the_level_of_a_gaussians_ellipse_is_chi_squares_distribution():
    rng = np.random.default_rng(1)
    error, root = rng.normal(size=(7, 3)), rng.normal(size=(7, 3, 5))
    covariance = root @ root.swapaxes(-1, -2)
    squares = np.einsum("ti,tij,tj->t", error, np.linalg.inv(covariance), error)
    np.testing.assert_allclose(
        gaussian_region_level(error, covariance), chi2(3).cdf(squares), rtol=1e-9
    )


def test_one_component_in_use_needs_no_draws():
    """Closed form, whatever stands beside it; nothing is drawn."""
    rng = np.random.default_rng(2)
    mixture = gaussian_mixtures(
        [0.0, 1.0], [[np.nan, 0.0], [1.0, 2.0]], [np.full((2, 2), np.nan), np.diag([4.0, 9.0])]
    )
    found = region_level(mixture, [3.0, 5.0], 10, rng)
    assert found == pytest.approx(chi2(2).cdf(2.0))
    assert rng.random() == np.random.default_rng(2).random()


def test_the_sampled_level_is_the_probability_of_a_higher_density():
    """Against a sum over a grid; 10 points at 4.5 binomial standard errors, by chance 7e-5."""
    axis = np.linspace(-12.0, 18.0, 1200)
    x, y = np.meshgrid(axis, axis, indexing="ij")
    log_densities = log_density(two_modes(), np.column_stack([x.ravel(), y.ravel()]))
    mass = np.exp(log_densities) * (axis[1] - axis[0]) ** 2
    rng = np.random.default_rng(3)
    truths = truths_of((10,), rng)
    found = region_level(two_modes((10,)), truths, 5000, rng)
    for level, truth in zip(found, truths, strict=True):
        expected = mass[log_densities > log_density(two_modes(), truth[None])[0]].sum()
        error = np.sqrt(expected * (1 - expected) / 5000) + 1e-3  # and the edge of the grid's cells
        assert abs(level - expected) < 4.5 * error


@pytest.mark.parametrize("draws", [1, 7, 100])
def test_levels_are_exactly_uniform_for_any_number_of_draws(draws):
    rng = np.random.default_rng(draws)
    levels = region_level(two_modes((2000,)), truths_of((2000,), rng), draws, rng)
    assert kstest(levels, "uniform").pvalue > ALARM


def test_a_level_is_the_count_of_higher_draws_and_a_uniform_part():
    """(count + U) / (M + 1): U / (M + 1) at the peak of the density, 1 less that far away."""
    rng = np.random.default_rng(4)
    peak, far = [5.0, -2.0], [80.0, 80.0]
    levels = region_level(two_modes((400, 2)), np.tile([peak, far], (400, 1, 1)), 9, rng)
    assert kstest(10 * levels[:, 0], "uniform").pvalue > ALARM
    assert kstest(10 * levels[:, 1] - 9, "uniform").pvalue > ALARM


def test_a_longer_batch_or_a_wider_table_begins_with_the_same_levels():
    rng = np.random.default_rng(5)
    truths = truths_of((6, 4), rng)
    long = region_level(two_modes((6, 4)), truths, 20, np.random.default_rng(9))
    short = region_level(two_modes((2, 4)), truths[:2], 20, np.random.default_rng(9))
    np.testing.assert_array_equal(long[:2], short)
    narrow = two_modes((6, 4))
    wide = gaussian_mixtures(
        np.concatenate([narrow.weights, np.zeros((6, 4, 3))], axis=-1),
        np.concatenate([narrow.means, np.zeros((6, 4, 3, 2))], axis=-2),
        np.concatenate([narrow.covariances, np.zeros((6, 4, 3, 2, 2))], axis=-3),
    )
    np.testing.assert_array_equal(region_level(wide, truths, 20, np.random.default_rng(9)), long)


def test_scans_without_a_posterior_have_no_values():
    mixture = gaussian_mixtures(
        [[0.5, 0.5], [0.0, 0.0]], np.zeros((2, 2, 1)), np.ones((2, 2, 1, 1))
    )
    truth = np.zeros((2, 1))
    rng = np.random.default_rng(6)
    found = (
        region_level(mixture, truth, 5, rng),
        log_score(mixture, truth),
        coordinate_transform(mixture, truth)[:, 0],
    )
    for values in found:
        assert np.isfinite(values[0])
        assert np.isnan(values[1])


def test_transforms_are_the_probabilities_below_the_truth_and_uniform():
    rng = np.random.default_rng(7)
    truths = truths_of((2000,), rng)
    found = coordinate_transform(two_modes((2000,)), truths)
    expected = 0.3 * ndtr(truths[:, 0]) + 0.7 * ndtr((truths[:, 0] - 5.0) / 2.0)
    np.testing.assert_allclose(found[:, 0], expected, rtol=1e-12)
    for axis in range(2):
        assert kstest(found[:, axis], "uniform").pvalue > ALARM
        assert kstest(central_level(found[:, axis]), "uniform").pvalue > ALARM


def test_the_log_score_is_minus_the_log_density_and_its_differences_have_no_unit():
    rng = np.random.default_rng(8)
    truths = truths_of((30, 5), rng)
    covariances = two_modes().covariances
    expected = 0.3 * multivariate_normal.pdf(truths, [0, 0], covariances[0])
    expected = expected + 0.7 * multivariate_normal.pdf(truths, [5, -2], covariances[1])
    score = log_score(two_modes((30, 5)), truths)
    np.testing.assert_allclose(score, -np.log(expected), rtol=1e-12)

    def in_unit(mixture, factor):
        weights, means, covariances, _ = mixture
        return gaussian_mixtures(weights, factor * means, factor**2 * covariances)

    wide = two_modes((30, 5), spread=2.0)
    metres = log_score_difference(log_score(wide, truths), score)
    feet = log_score_difference(
        *(log_score(in_unit(m, 3.28), 3.28 * truths) for m in (wide, two_modes((30, 5))))
    )
    assert feet.estimate == pytest.approx(metres.estimate, abs=1e-10)
    np.testing.assert_allclose(feet.interval, metres.interval, atol=1e-10)


def test_the_right_posterior_scores_better_by_the_divergence():
    """In one dimension KL(p, q) = ln 2 - 1/2 + 1/8 for q twice as wide; 4.5 standard errors."""
    rng = np.random.default_rng(9)
    truths = rng.normal(size=(4000, 1, 1))
    parts = np.ones((4000, 1, 1)), np.zeros((4000, 1, 1, 1)), np.ones((4000, 1, 1, 1, 1))
    right, wide = gaussian_mixtures(*parts), gaussian_mixtures(*parts[:2], 4 * parts[2])
    found = log_score_difference(log_score(wide, truths), log_score(right, truths))
    error = (found.interval.high - found.estimate) / 1.96
    assert abs(found.estimate - (np.log(2) - 0.5 + 0.125)) < 4.5 * error
    assert found.p_value < 1e-6


def correlated_levels(rng, trials, scans, correlation=0.9):
    """Region levels of honest Gaussians in the plane whose errors change slowly."""
    normals = rng.normal(size=(trials, scans, 2))
    for k in range(1, scans):
        fresh = np.sqrt(1 - correlation**2) * normals[:, k]
        normals[:, k] = correlation * normals[:, k - 1] + fresh
    return chi2(2).cdf(np.sum(normals**2, axis=2))


@pytest.mark.parametrize(
    ("trials", "scans", "highest"), [(20, 10, 0.08), (100, 10, 0.06), (50, 1, 0.05)]
)
def test_dependent_scans_cause_no_more_false_alarms_than_stated(trials, scans, highest):
    """800 repetitions each. Stated: 4.7 to 6 % for the mean; for coverage of 0.9 up to 8 % with 20
    trials, 5 % from 50 on, and at most 5 % with one scan a trial. Allowed are 4.5 binomial standard
    errors more; the naive binomial interval errs in over 25 % for 20 trials of 10 scans."""
    rng = np.random.default_rng(trials)
    repetitions = 800
    mean_alarms = coverage_alarms = 0
    for _ in range(repetitions):
        levels = correlated_levels(rng, trials, scans)
        mean_alarms += mean_level(levels).rejected
        coverage_alarms += coverage(levels, 0.9).rejected
    slack = 4.5 * np.sqrt(0.06 * 0.94 / repetitions)
    assert mean_alarms / repetitions < 0.06 + slack
    assert mean_alarms / repetitions > 0.047 - slack
    assert coverage_alarms / repetitions < highest + slack


@pytest.mark.parametrize("spread", [0.5, 2.0])
def test_posteriors_of_wrong_width_are_found_by_all_that_can_find_them(spread):
    """Half or twice the covariance, 200 trials of 5 scans: far beyond any chance."""
    rng = np.random.default_rng(10)
    truths = truths_of((200, 5), rng)
    posterior = two_modes((200, 5), spread=spread)
    levels = region_level(posterior, truths, 99, rng)
    found, share = mean_level(levels), coverage(levels, 0.9)
    assert found.rejected
    assert share.rejected
    assert (found.estimate > 0.5) == (share.estimate < 0.9) == (spread < 1)
    transform = coordinate_transform(posterior, truths)[..., 1]
    assert coverage(central_level(transform), 0.9).rejected
    assert any(check.rejected for check in shares_in_bins(levels))


def test_a_posterior_too_wide_in_places_and_too_narrow_in_others_passes_the_mean_alone():
    """Half the trials claim 1.6 times the deviation, half as much less that the mean of levels
    stays 1/2: the coverage of 0.9 tells. The mean may fail once in 20 seeds."""
    rng = np.random.default_rng(11)
    errors = rng.normal(size=(400, 5, 2))
    claimed = np.where(np.arange(400) < 200, 1.6**2, 0.36)[:, None, None, None]
    levels = gaussian_region_level(errors, np.broadcast_to(claimed * np.eye(2), (400, 5, 2, 2)))
    assert abs(mean_level(levels).estimate - 0.5) < 0.03
    assert coverage(levels, 0.9).rejected


def test_a_displaced_posterior_shows_in_the_mean_of_its_transform():
    rng = np.random.default_rng(12)
    transform = norm.cdf(rng.normal(0.3, 1.0, size=(100, 4)))
    found = mean_level(transform)
    assert found.rejected
    assert found.estimate > 0.5
    assert not mean_level(norm.cdf(rng.normal(size=(100, 4)))).rejected


def test_the_histogram_counts_every_scan_once():
    values = np.array([[0.0, 0.05, 0.1, np.nan], [0.55, 0.999, 1.0, 0.25]])
    checks = shares_in_bins(values, bins=10)
    counts = np.array([check.estimate for check in checks]) * 7
    np.testing.assert_allclose(counts, [2, 1, 1, 0, 0, 1, 0, 0, 0, 2], atol=1e-12)
    assert all(check.expected == 0.1 for check in checks)


def test_the_interval_of_one_trial_is_absent_and_rejects_nothing():
    check = coverage(np.array([[0.1, 0.99, 0.95]]), 0.9)
    assert check.estimate == pytest.approx(1 / 3)
    assert np.isnan(check.interval).all()
    assert not check.rejected


def test_what_is_no_level_is_refused():
    with pytest.raises(ValueError, match=r"must have the shape \(trials, scans\), got \(3,\)"):
        mean_level([0.1, 0.2, 0.3])
    with pytest.raises(ValueError, match="levels must lie between 0 and 1"):
        coverage([[0.1, 1.2]], 0.9)
    with pytest.raises(ValueError, match="the level to cover must lie between 0 and 1, got 90"):
        coverage([[0.1, 0.2]], 90)
    with pytest.raises(ValueError, match="bins must be at least 2, got 1"):
        shares_in_bins([[0.1, 0.2]], 1)
    with pytest.raises(ValueError, match="draws must be at least 1, got 0"):
        region_level(two_modes(), [0.0, 0.0], 0, np.random.default_rng(0))
