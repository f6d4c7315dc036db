import numpy as np
import pytest
from scipy.stats import binom, binomtest, t, ttest_1samp

from metrics.intervals import (
    clopper_pearson_interval,
    clopper_pearson_upper,
    effective_sample_size,
    mean_influence,
    mean_interval,
    root_mean_interval,
    wilson_interval,
)

# Newcombe, Statistics in Medicine 17 (1998) 857, Table I, methods 3 (Wilson) and 5
# (Clopper-Pearson), as quoted in public test suites.
NEWCOMBE = [
    (81, 263, (0.2553, 0.3662), (0.2527, 0.3676)),
    (15, 148, (0.0624, 0.1605), (0.0578, 0.1617)),
    (0, 20, (0.0, 0.1611), (0.0, 0.1684)),
    (1, 29, (0.0061, 0.1718), (0.0009, 0.1776)),
]


@pytest.mark.parametrize(("count", "trials", "wilson", "clopper_pearson"), NEWCOMBE)
def test_intervals_of_a_rate_are_those_newcombe_printed(count, trials, wilson, clopper_pearson):
    assert wilson_interval(count, trials) == pytest.approx(wilson, abs=5.01e-5)
    assert clopper_pearson_interval(count, trials) == pytest.approx(clopper_pearson, abs=5.01e-5)


@pytest.mark.parametrize("level", [0.8, 0.95, 0.999])
@pytest.mark.parametrize(
    ("ours", "method"), [(wilson_interval, "wilson"), (clopper_pearson_interval, "exact")]
)
def test_intervals_of_a_rate_agree_with_scipy_for_arrays_of_counts(ours, method, level):
    trials = np.array([1, 7, 29, 1000])
    count = np.stack([0 * trials, trials // 3, trials])
    low, high = ours(count, trials, level)
    for index in np.ndindex(count.shape):
        test = binomtest(int(count[index]), int(trials[index[1]]))
        expected = test.proportion_ci(level, method)
        assert (low[index], high[index]) == pytest.approx(expected, rel=1e-9, abs=1e-12)


@pytest.mark.parametrize("interval", [wilson_interval, clopper_pearson_interval])
def test_a_rate_of_none_or_all_has_exact_ends(interval):
    assert interval(0, 50).low == 0.0
    assert interval(50, 50).high == 1.0


@pytest.mark.parametrize("interval", [wilson_interval, clopper_pearson_interval])
def test_a_rate_of_no_trials_has_no_interval(interval):
    low, high = interval([0, 1], [0, 2])
    assert np.isnan([low[0], high[0]]).all()
    assert np.isfinite([low[1], high[1]]).all()


@pytest.mark.parametrize(
    ("trials", "bound"),
    [
        (10, 0.258866),
        (30, 0.095034),
        (50, 0.058155),
        (100, 0.029513),
        (300, 0.009936),
        (1000, 0.002991),
    ],
)
def test_no_loss_in_n_trials_bounds_the_rate_near_three_over_n(trials, bound):
    """Closed form 1 - 0.05^(1/n); the rule of three is common practice."""
    assert clopper_pearson_upper(0, trials) == pytest.approx(bound, abs=5e-7)
    assert clopper_pearson_upper(0, trials) == pytest.approx(1 - 0.05 ** (1 / trials), rel=1e-10)
    assert clopper_pearson_upper(0, trials) < 3 / trials


@pytest.mark.parametrize(("rate", "trials"), [(0.05, 59), (0.01, 299), (0.001, 2995)])
def test_the_fewest_loss_free_trials_that_show_a_rate(rate, trials):
    """Closed form: the smallest whole number above ln 0.05 / ln(1 - rate)."""
    assert clopper_pearson_upper(0, trials) < rate < clopper_pearson_upper(0, trials - 1)


def test_the_upper_bound_is_where_so_few_losses_become_improbable():
    """By its definition: P(at most count | bound) = 1 - level."""
    count, trials = np.array([0, 1, 5, 40]), np.array([30, 30, 200, 41])
    bound = clopper_pearson_upper(count, trials, level=0.9)
    np.testing.assert_allclose(binom.cdf(count, trials, bound), 0.1, rtol=1e-9)
    assert clopper_pearson_upper(30, 30) == 1.0
    assert np.isnan(clopper_pearson_upper(0, 0))


def exact_coverage(covers: np.ndarray, rates: np.ndarray, trials: int) -> np.ndarray:
    """Probability of a count whose interval covers, covers (rates, counts)."""
    return np.sum(binom.pmf(np.arange(trials + 1), trials, rates[:, None]) * covers, axis=1)


@pytest.mark.parametrize("trials", [20, 100])
def test_clopper_pearson_covers_at_least_at_its_level_and_wilson_on_average(trials):
    """Enumeration, no chance in it. That Clopper-Pearson never falls short is a theorem; the mean
    of Wilson near the level: Brown, Cai & DasGupta, Statistical Science 16 (2001) 101."""
    rates = (np.arange(400) + 0.5)[:, None] / 400
    counts = np.arange(trials + 1)

    low, high = clopper_pearson_interval(counts, trials)
    assert exact_coverage((low <= rates) & (rates <= high), rates[:, 0], trials).min() >= 0.95
    upper = clopper_pearson_upper(counts, trials)
    assert exact_coverage(rates <= upper, rates[:, 0], trials).min() >= 0.95
    low, high = wilson_interval(counts, trials)
    mean = exact_coverage((low <= rates) & (rates <= high), rates[:, 0], trials).mean()
    assert mean == pytest.approx(0.95, abs=0.01)


@pytest.mark.parametrize(("count", "trials"), [(5, 4), (-1, 4), (np.nan, 4)])
def test_impossible_counts_are_refused(count, trials):
    for interval in (wilson_interval, clopper_pearson_interval, clopper_pearson_upper):
        with pytest.raises(ValueError, match="counts must lie between 0 and trials"):
            interval(count, trials)


@pytest.mark.parametrize("level", [0.0, 1.0, 95])
def test_a_level_outside_zero_to_one_is_refused(level):
    for interval in (wilson_interval, clopper_pearson_interval, clopper_pearson_upper):
        with pytest.raises(ValueError, match="level must lie between 0 and 1"):
            interval(1, 4, level)
    with pytest.raises(ValueError, match="level must lie between 0 and 1"):
        mean_interval([1.0, 2.0], level)


def sample_with(mean: float, standard_deviation: float, size: int) -> np.ndarray:
    values = np.random.default_rng(31).normal(size=size)
    values = (values - values.mean()) / values.std(ddof=1)
    return mean + standard_deviation * values


def test_the_interval_of_a_mean_is_the_one_nist_printed():
    """NIST/SEMATECH e-Handbook 1.3.5.2, heat flow meter: mean 9.261460, standard deviation
    0.022789, 195 values: 9.258242 to 9.264679."""
    values = sample_with(9.261460, 0.022789, 195)
    assert mean_interval(values) == pytest.approx((9.258242, 9.264679), abs=1e-6)


def test_the_interval_of_a_mean_agrees_with_scipy():
    values = np.random.default_rng(32).exponential(size=17)
    expected = ttest_1samp(values, 0.0).confidence_interval(0.9)
    assert mean_interval(values, 0.9) == pytest.approx((expected.low, expected.high), rel=1e-12)


def test_the_interval_of_a_root_mean_is_the_delta_method_on_its_logarithm():
    """ln RMSE = ln(mean) / 2 with standard error s / (2 mean sqrt N)."""
    values = np.random.default_rng(33).chisquare(20, size=50)
    error = values.std(ddof=1) / (2 * values.mean() * np.sqrt(50))
    half = t.ppf(0.975, 49) * error
    expected = np.exp(np.log(values.mean()) / 2 + np.array([-half, half]))
    assert root_mean_interval(values, order=2) == pytest.approx(expected, rel=1e-12)


def test_the_interval_of_a_root_is_the_root_of_the_interval():
    values = np.random.default_rng(34).exponential(size=40)
    mean = np.array(root_mean_interval(values, order=1))
    np.testing.assert_allclose(root_mean_interval(values, order=3), mean ** (1 / 3), rtol=1e-12)


def test_equal_weights_change_nothing():
    values, weights = np.random.default_rng(35).exponential(size=30), np.full(30, 7)
    assert mean_interval(values, weights=weights) == pytest.approx(mean_interval(values))
    weighted = root_mean_interval(values, 2, weights=weights)
    assert weighted == pytest.approx(root_mean_interval(values, 2))
    weighted = effective_sample_size(values, weights)
    assert weighted == pytest.approx(effective_sample_size(values))


def test_the_standard_error_of_a_weighted_mean_is_that_of_the_jackknife():
    """Independent derivation; the two agree up to terms of order 1/N."""
    rng = np.random.default_rng(36)
    weights = rng.integers(20, 61, size=400)
    values = rng.exponential(size=400) * weights / 40
    mean, influence = mean_influence(values, weights)
    assert mean == pytest.approx(np.average(values, weights=weights), rel=1e-13)
    left_out = np.array(
        [np.average(np.delete(values, i), weights=np.delete(weights, i)) for i in range(400)]
    )
    jackknife = np.sqrt(399 / 400 * np.sum((left_out - left_out.mean()) ** 2))
    assert influence.std(ddof=1) / np.sqrt(400) == pytest.approx(jackknife, rel=0.01)


def test_trials_without_a_value_are_left_out():
    values, weights = np.array([1.0, np.nan, 3.0, 5.0]), np.array([2, 0, 4, 0])
    assert mean_interval(values) == mean_interval([1.0, 3.0, 5.0])
    assert root_mean_interval(values, 2, weights=weights) == root_mean_interval(
        [1.0, 3.0], 2, weights=[2, 4]
    )


@pytest.mark.parametrize("values", [[], [4.0], [np.nan, 4.0]])
def test_fewer_than_two_trials_have_no_interval(values):
    assert np.isnan(mean_interval(values)).all()
    assert np.isnan(root_mean_interval(values, 2)).all()


def test_a_mean_of_zero_has_an_interval_without_width_and_its_root_none():
    assert mean_interval([0.0, 0.0, 0.0]) == (0.0, 0.0)
    assert np.isnan(root_mean_interval([0.0, 0.0, 0.0], 2)).all()


def test_two_trials_at_a_high_level_leave_the_root_mean_unbounded():
    assert root_mean_interval([0.0, 1.0], order=2, level=0.9999).high == np.inf


def test_the_effective_sample_size_counts_the_trials_that_carry_the_mean():
    assert effective_sample_size(np.full(40, 3.0)) == pytest.approx(40)
    assert effective_sample_size([0.0, 0.0, 9.0]) == 1.0
    assert effective_sample_size([1.0, 3.0]) == 1.6
    assert effective_sample_size([1.0, 1.0], weights=[1, 3]) == 1.6
    assert np.isnan(effective_sample_size([]))
    assert np.isnan(effective_sample_size([0.0, 0.0]))


def test_shapes_that_disagree_are_refused():
    with pytest.raises(ValueError, match=r"got \(3,\) and \(2,\)"):
        mean_interval([1.0, 2.0, 3.0], weights=[1, 1])
    with pytest.raises(ValueError, match=r"got \(1, 2\)"):
        root_mean_interval([[1.0, 2.0]], 2)


def coverage(interval, draw, truth: float, repetitions: int, seed: int) -> float:
    rng = np.random.default_rng(seed)
    hits = 0
    for _ in range(repetitions):
        low, high = interval(*draw(rng))
        hits += low <= truth <= high
    return hits / repetitions


# 4.5 standard errors of a share of 0.95 in 2,000 repetitions: 7e-6 by chance.
REPETITIONS = 2000
TOLERANCE = 4.5 * np.sqrt(0.95 * 0.05 / REPETITIONS)


def test_the_interval_of_a_mean_covers_at_its_level_for_gaussian_values():
    share = coverage(mean_interval, lambda rng: [rng.normal(3.0, 2.0, 10)], 3.0, REPETITIONS, 37)
    assert abs(share - 0.95) < TOLERANCE


@pytest.mark.parametrize("order", [1, 2])
def test_the_interval_of_a_root_mean_covers_at_its_level_for_light_tails(order):
    """Chi-square(20) / 20 in each of 200 trials, where the delta method holds to 0.3 %."""
    share = coverage(
        lambda values: root_mean_interval(values, order),
        lambda rng: [rng.chisquare(20, 200) / 20],
        1.0,
        REPETITIONS,
        38,
    )
    assert abs(share - 0.95) < TOLERANCE


def test_the_weighted_interval_covers_the_root_mean_over_all_scans():
    """Trials of 5 to 40 scans, the longer the worse: value chi-square(20) / 20 times scans. Over
    all scans the mean is E[scans²] / E[scans], which a mean over trials would miss."""
    scans = np.arange(5, 41)
    truth = np.sqrt(np.mean(scans**2) / np.mean(scans))

    def draw(rng):
        weights = rng.choice(scans, 200)
        return rng.chisquare(20, 200) / 20 * weights, weights

    share = coverage(
        lambda values, weights: root_mean_interval(values, 2, weights=weights),
        draw,
        truth,
        REPETITIONS,
        39,
    )
    assert abs(share - 0.95) < TOLERANCE
