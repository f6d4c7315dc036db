import numpy as np
import pytest
from scipy.stats import ttest_1samp

from metrics.paired import mean_difference


def test_with_all_scans_it_is_students_test_of_the_trials_means():
    rng = np.random.default_rng(1)
    first, second = rng.normal(0.3, 1.0, (25, 8)), rng.normal(0.0, 1.0, (25, 8))
    found = mean_difference(first, second)
    expected = ttest_1samp((first - second).mean(axis=1), 0.0)
    assert found.estimate == pytest.approx(np.mean(first - second))
    assert found.p_value == pytest.approx(expected.pvalue)
    np.testing.assert_allclose(found.interval, expected.confidence_interval(0.95))
    assert found.pairs == 25


def test_only_scans_that_both_have_count():
    rng = np.random.default_rng(2)
    first, second = rng.normal(size=(2, 12, 6))
    first[0] = np.nan
    first[2, 3] = second[4, 1] = second[4, 2] = np.nan
    found = mean_difference(first, second)
    assert found.pairs == 11
    assert found.estimate == pytest.approx(np.nanmean(first - second))
    with_others = mean_difference(first, np.where(np.isnan(first), 1e9, second))
    assert with_others == found


def test_below_two_trials_there_is_no_comparison():
    first = np.array([[1.0, 2.0], [np.nan, np.nan]])
    found = mean_difference(first, np.zeros((2, 2)))
    assert found.pairs == 1
    assert np.isnan([found.estimate, found.p_value, *found.interval]).all()


def test_values_of_different_shapes_are_refused():
    with pytest.raises(ValueError, match=r"shape \(trials, scans\), got \(2, 3\) and \(2, 2\)"):
        mean_difference(np.zeros((2, 3)), np.zeros((2, 2)))
