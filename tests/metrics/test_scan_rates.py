import numpy as np
import pytest
from scipy.stats import binomtest

from metrics.scan_rates import rate_of_counts, scan_rate


def test_one_scan_a_trial_gives_the_interval_of_clopper_and_pearson():
    """81 of 263: .2527 to .3676 in Newcombe (1998), Table I, as quoted in public test suites."""
    hits = np.arange(263)[:, None] < 81
    rate, interval = scan_rate(hits, np.ones_like(hits))
    assert rate == 81 / 263
    np.testing.assert_allclose(np.round(interval, 4), [0.2527, 0.3676])
    exact = binomtest(81, 263).proportion_ci(0.95, "exact")
    np.testing.assert_allclose(interval, [exact.low, exact.high], atol=1e-9)


def test_scans_that_repeat_each_other_count_as_one():
    """The number of trials, shortened by the longer tails of Student's t with few of them."""
    hits = np.repeat(np.arange(263)[:, None] < 81, 50, axis=1)
    _, interval = scan_rate(hits, np.ones_like(hits))
    np.testing.assert_allclose(interval, [0.2527, 0.3676], atol=5e-4)


def test_independent_scans_count_as_many():
    """2,000 trials of 5: half widths as of 10,000, within the spread of an estimated variance."""
    rng = np.random.default_rng(1)
    hits = rng.random((2000, 5)) < 0.3
    _, interval = scan_rate(hits, np.ones_like(hits))
    exact = binomtest(int(hits.sum()), hits.size).proportion_ci(0.95, "exact")
    ratio = (interval.high - interval.low) / (exact.high - exact.low)
    assert abs(ratio - 1) < 4.5 / np.sqrt(2 * 2000)


def test_scans_that_do_not_count_are_not_read():
    rng = np.random.default_rng(2)
    hits, counted = rng.random((2, 40, 6)) < 0.5
    counted[3] = False
    found = scan_rate(hits, counted)
    other = scan_rate(np.where(counted, hits, ~hits), counted)
    assert found == other
    assert found[0] == hits[counted].mean()


@pytest.mark.parametrize(("value", "ends"), [(False, (0.0, 0.1684)), (True, (0.8316, 1.0))])
def test_where_all_scans_agree_a_trial_counts_as_one(value, ends):
    """0 of 20: 0 to .1684 (Newcombe 1998, as above), however many scans a trial has."""
    hits = np.full((20, 30), value)
    _, interval = scan_rate(hits, np.ones_like(hits))
    np.testing.assert_allclose(np.round(interval, 4), ends)


def test_trials_all_alike_inside_count_scan_by_scan():
    hits = np.tile([True, False], (30, 1))
    rate, interval = scan_rate(hits, np.ones_like(hits))
    exact = binomtest(30, 60).proportion_ci(0.95, "exact")
    assert rate == 0.5
    np.testing.assert_allclose(interval, [exact.low, exact.high], atol=1e-9)


def test_too_few_trials_have_a_rate_but_no_interval():
    rate, interval = scan_rate(np.array([[True, False]]), np.ones((1, 2), bool))
    assert rate == 0.5
    assert np.isnan(interval).all()
    rate, interval = scan_rate(np.ones((3, 2), bool), np.zeros((3, 2), bool))
    assert np.isnan([rate, *interval]).all()


def test_arrays_that_do_not_fit_are_refused():
    with pytest.raises(ValueError, match=r"one shape \(trials, scans\), got \(3, 2\) and \(3, 1\)"):
        scan_rate(np.ones((3, 2), bool), np.ones((3, 1), bool))
    with pytest.raises(ValueError, match="must be a bool array"):
        scan_rate(np.ones((3, 2)), np.ones((3, 2), bool))


def test_counts_by_trial_say_what_their_scans_say():
    rng = np.random.default_rng(3)
    hits, counted = rng.random((40, 7)) < 0.4, rng.random((40, 7)) < 0.8
    of_counts = rate_of_counts((hits & counted).sum(axis=1), counted.sum(axis=1))
    assert of_counts == scan_rate(hits, counted)
    with pytest.raises(ValueError, match="hits from 0 to scans"):
        rate_of_counts([3, 1], [2, 2])
