from itertools import chain, combinations

import numpy as np
import pytest
from scipy.stats import binomtest

from metrics.intervals import root_mean_interval
from metrics.paired import exact_mcnemar, holm_adjust, loss_rate_difference, root_mean_ratio


# Sums of binomial(b + c, 1/2) probabilities, in full by hand for the short ones: twice 1/1024,
# 11/1024, 56/1024, 1/64, 1/32.
@pytest.mark.parametrize(
    ("only_first", "only_second", "p_value"),
    [
        (10, 0, 2 / 1024),
        (9, 1, 22 / 1024),
        (8, 2, 112 / 1024),
        (6, 0, 2 / 64),
        (5, 0, 2 / 32),
        (5, 5, 1.0),
        (0, 0, 1.0),
        (9, 2, 0.0654297),
        (20, 8, 0.0356981),
    ],
)
def test_exact_mcnemar_is_the_two_sided_binomial_tail(only_first, only_second, p_value):
    assert exact_mcnemar(only_first, only_second) == pytest.approx(p_value, abs=5e-8)
    assert exact_mcnemar(only_second, only_first) == exact_mcnemar(only_first, only_second)


def test_exact_mcnemar_stands_beside_the_published_chi_square_version():
    """Agresti (1990) p. 350, approval ratings, 150 against 86: chi-square p 3.099e-05, with
    continuity correction 4.115e-05 (as printed by R's mcnemar.test). The exact p lies between."""
    assert 3.099e-05 < exact_mcnemar(150, 86) < 4.115e-05


def test_exact_mcnemar_agrees_with_scipys_binomial_test_for_arrays():
    only_first, only_second = np.meshgrid([0, 1, 4, 30, 500], [1, 6, 29, 480])
    p_values = exact_mcnemar(only_first, only_second)
    for index in np.ndindex(p_values.shape):
        b, c = int(only_first[index]), int(only_second[index])
        assert p_values[index] == pytest.approx(binomtest(b, b + c).pvalue, rel=1e-9)


def test_the_interval_of_a_difference_is_the_published_one():
    """Cavo et al. (2012), 161 pairs, 6 and 16 discordant: -0.0621 (-0.1195 to -0.0032), from the
    tests of the R package contingencytables, which accompanies Fagerland, Lydersen & Laake,
    Statistical Analysis of Contingency Tables, ch. 8."""
    result = loss_rate_difference(6, 16, trials=59 + 6 + 16 + 80)
    assert result.estimate == pytest.approx(-0.0621, abs=5e-5)
    assert result.interval == pytest.approx((-0.1195, -0.0032), abs=5.01e-5)
    assert (result.p_value, result.pairs) == (exact_mcnemar(6, 16), 161)


def test_the_interval_of_a_difference_is_that_of_its_authors_package():
    """R package statpsych (Bonett), help page of ci.prop.ps: 12, 4, 26 and 6 give 0.2548067 to
    0.6251933."""
    result = loss_rate_difference(26, 4, trials=12 + 4 + 26 + 6)
    assert result.interval == pytest.approx((0.2548067, 0.6251933), abs=5e-8)


def test_the_difference_turns_its_sign_with_the_strategies():
    there, back = loss_rate_difference(3, 9, 50), loss_rate_difference(9, 3, 50)
    assert there.estimate == -back.estimate
    assert there.interval == pytest.approx((-back.interval.high, -back.interval.low))


def test_equal_losses_leave_an_interval_around_zero_and_no_trials_none():
    low, high = loss_rate_difference(0, 0, 100).interval
    assert low < 0 < high
    empty = loss_rate_difference(0, 0, 0)
    assert np.isnan([empty.estimate, *empty.interval, empty.p_value]).all()


def test_the_interval_of_a_difference_stays_between_minus_one_and_one():
    assert loss_rate_difference(3, 0, 3, level=0.9999).interval.high == 1.0


@pytest.mark.parametrize("trials", [100, 1000])
@pytest.mark.parametrize(("first", "second"), [(0.02, 0.02), (0.02, 0.06), (0.1, 0.05)])
def test_the_interval_of_a_difference_covers_near_its_level(trials, first, second):
    """`first` and `second` are probabilities of a discordant trial. The interval leans to
    the safe side, so 0.94 less 4.5 standard errors of 4,000 draws is a floor: below 4e-6 by
    chance where the coverage is 0.94 or more."""
    rng = np.random.default_rng(41)
    counts = rng.multinomial(trials, [first, second, 1 - first - second], size=4000)
    outcomes, repeats = np.unique(counts[:, :2], axis=0, return_counts=True)
    hits = 0
    for (b, c), times in zip(outcomes, repeats, strict=True):
        low, high = loss_rate_difference(int(b), int(c), trials).interval
        hits += times * (low <= first - second <= high)
    assert hits / 4000 > 0.94 - 4.5 * np.sqrt(0.94 * 0.06 / 4000)


def test_counts_beyond_the_trials_are_refused():
    with pytest.raises(ValueError, match="not exceed the trials, got 3 and 2 of 4"):
        loss_rate_difference(3, 2, 4)
    with pytest.raises(ValueError, match="counts must not be negative"):
        exact_mcnemar(-1, 2)


def paired_powers(rng: np.random.Generator, trials: int, ratio: float) -> tuple[np.ndarray, ...]:
    """Mean squared errors of two strategies that share most of what makes a trial hard."""
    shared = rng.chisquare(16, trials)
    first, second = ((shared + rng.chisquare(4, trials)) / 20 for _ in range(2))
    return ratio**2 * first, second


def test_the_ratio_of_identical_errors_is_one_without_doubt():
    values = np.random.default_rng(42).exponential(size=30)
    result = root_mean_ratio(values, values, order=2)
    assert (result.estimate, *result.interval, result.p_value) == (1.0, 1.0, 1.0, 1.0)


def test_a_fixed_multiple_of_the_errors_is_certain():
    values = np.array([1.0, 2.0, 4.0, 8.0])
    result = root_mean_ratio(4 * values, values, order=2)
    assert (result.estimate, result.p_value) == (pytest.approx(2.0), 0.0)


def test_the_ratio_to_a_constant_has_the_interval_of_the_root_mean():
    values = np.random.default_rng(43).exponential(size=30)
    against_nine = root_mean_ratio(values, np.full(30, 9.0), order=2).interval
    expected = np.array(root_mean_interval(values, order=2)) / 3
    np.testing.assert_allclose(against_nine, expected, rtol=1e-12)


def test_the_ratio_inverts_with_the_strategies():
    first, second = paired_powers(np.random.default_rng(44), 50, ratio=1.1)
    there, back = root_mean_ratio(first, second, order=2), root_mean_ratio(second, first, order=2)
    assert there.estimate == pytest.approx(1 / back.estimate)
    assert there.interval == pytest.approx((1 / back.interval.high, 1 / back.interval.low))
    assert there.p_value == pytest.approx(back.p_value)


def test_the_p_value_is_one_minus_the_level_at_which_the_interval_touches_one():
    first, second = paired_powers(np.random.default_rng(45), 40, ratio=1.05)
    p_value = root_mean_ratio(first, second, order=2).p_value
    low = root_mean_ratio(first, second, order=2, level=1 - p_value).interval.low
    assert low == pytest.approx(1.0, rel=1e-9)


def test_the_standard_error_of_the_log_ratio_is_that_of_the_jackknife():
    """Independent derivation, with weights; the two agree up to terms of order 1/N."""
    rng = np.random.default_rng(46)
    values = np.array(paired_powers(rng, 300, ratio=1.1))
    weights = rng.integers(10, 41, size=(2, 300))

    def log_ratio(kept):
        means = [np.average(x[kept], weights=w[kept]) for x, w in zip(values, weights, strict=True)]
        return np.log(means[0] / means[1]) / 2

    left_out = np.array([log_ratio(np.arange(300) != i) for i in range(300)])
    jackknife = np.sqrt(299 / 300 * np.sum((left_out - left_out.mean()) ** 2))
    result = root_mean_ratio(*values, 2, 0.95, *weights)
    assert np.log(result.estimate) == pytest.approx(log_ratio(np.arange(300)), rel=1e-10)
    half = np.log(result.interval.high / result.interval.low) / 2
    assert half / 1.967930 == pytest.approx(jackknife, rel=0.01)  # t quantile .975, 299 degrees


def test_only_trials_with_both_values_count():
    first, second = [1.0, 4.0, np.nan, 2.0, 6.0], [2.0, np.nan, 3.0, 3.0, 5.0]
    weights = [5, 5, 5, 5, 0]
    both = root_mean_ratio(first, second, order=2)
    assert both == root_mean_ratio([1.0, 2.0, 6.0], [2.0, 3.0, 5.0], order=2)
    assert both.pairs == 3
    assert root_mean_ratio(first, second, order=2, first_weights=weights).pairs == 2


@pytest.mark.parametrize(
    ("first", "second"),
    [([], []), ([1.0], [2.0]), ([0.0, 0.0], [1.0, 2.0]), ([np.nan] * 3, [1.0] * 3)],
)
def test_too_few_pairs_or_a_mean_of_zero_give_no_ratio(first, second):
    result = root_mean_ratio(first, second, order=2)
    assert np.isnan([result.estimate, *result.interval, result.p_value]).all()


def test_columns_of_different_length_are_refused():
    with pytest.raises(ValueError, match=r"must all have the shape \(trials,\)"):
        root_mean_ratio([1.0, 2.0], [1.0, 2.0, 3.0], order=2)
    with pytest.raises(ValueError, match=r"must all have the shape \(trials,\)"):
        root_mean_ratio([1.0, 2.0], [1.0, 2.0], order=2, second_weights=[1])


def test_the_interval_of_a_ratio_covers_and_its_test_errs_at_the_level():
    """2,000 repetitions of 100 pairs with a true ratio of 1.1, and of 1 for the test; 4.5
    standard errors each: 1.4e-5 by chance."""
    rng = np.random.default_rng(47)
    covered = rejected = 0
    for _ in range(2000):
        low, high = root_mean_ratio(*paired_powers(rng, 100, ratio=1.1), order=2).interval
        covered += low <= 1.1 <= high
        rejected += root_mean_ratio(*paired_powers(rng, 100, ratio=1.0), order=2).p_value < 0.05
    tolerance = 4.5 * np.sqrt(0.95 * 0.05 / 2000)
    assert abs(covered / 2000 - 0.95) < tolerance
    assert abs(rejected / 2000 - 0.05) < tolerance


def test_holm_multiplies_by_the_tests_that_remain_and_never_falls():
    """Steps 4 × .005, 3 × .01, 2 × .02, then 1 × .03, which may not fall below the .04 before."""
    np.testing.assert_allclose(holm_adjust([0.01, 0.02, 0.03, 0.005]), [0.03, 0.04, 0.04, 0.02])


def test_holm_is_the_closed_test_of_bonferroni():
    """Marcus, Peritz & Gabriel (1976): a test is rejected where every intersection that holds it
    is, so its adjusted p is the largest of size × smallest p over those."""
    rng = np.random.default_rng(48)
    for size in (1, 2, 5):
        p_values = rng.random(size) ** 3
        subsets = list(
            chain.from_iterable(combinations(range(size), k) for k in range(1, size + 1))
        )
        expected = [
            max(min(1.0, len(s) * p_values[list(s)].min()) for s in subsets if i in s)
            for i in range(size)
        ]
        np.testing.assert_allclose(holm_adjust(p_values), expected, rtol=1e-13)


def test_holm_leaves_out_tests_without_a_p_value():
    adjusted = holm_adjust([0.04, np.nan, 0.01])
    np.testing.assert_allclose(adjusted, [0.04, np.nan, 0.02])
    assert holm_adjust([]).shape == (0,)
