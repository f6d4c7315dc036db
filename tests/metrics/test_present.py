import numpy as np
import pytest

from metrics.present import mean_where_present, share_absent, values_and_presence

VALUES = np.array([[1.0, 2.0, np.nan], [5.0, np.inf, np.nan]])
PRESENT = np.array([[True, True, False], [True, False, False]])


@pytest.mark.parametrize(
    ("axis", "expected"),
    [(None, 8 / 3), (1, [1.5, 5.0]), (0, [3.0, 2.0, np.nan])],
    ids=["over all", "per trial", "per scan"],
)
def test_means_read_only_the_entries_with_an_estimate(axis, expected):
    np.testing.assert_array_equal(mean_where_present(VALUES, PRESENT, axis), expected)


@pytest.mark.parametrize("shape", [(0, 5), (5, 0)])
def test_the_mean_over_nothing_is_nan(shape):
    assert np.isnan(mean_where_present(np.zeros(shape), np.zeros(shape, bool)))


def test_the_share_of_absent_scans_is_counted_over_all_trials():
    assert share_absent(PRESENT) == 0.5
    assert np.isnan(share_absent(np.zeros((0, 4), bool)))


def test_nan_under_a_present_estimate_is_refused_with_its_place():
    with pytest.raises(ValueError, match=r"the value at \(1, 0\) .* is NaN"):
        values_and_presence([[1.0], [np.nan]], [[True], [True]])


def test_presence_must_be_boolean_and_of_the_values_shape():
    with pytest.raises(ValueError, match="bool array, got dtype int64"):
        values_and_presence([[1.0]], np.array([[1]]))
    with pytest.raises(ValueError, match=r"one shape, got \(2, 3\) and \(2, 1\)"):
        values_and_presence(VALUES, PRESENT[:, :1])
