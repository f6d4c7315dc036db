import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from metrics.track_loss import loss_scan

HELD = -1


def loss_scan_of(above: str, for_scans: int) -> int:
    """One trial written as x (above 50 m), . (below) and - (no track)."""
    error = np.array([[{"x": 60.0, ".": 40.0, "-": np.nan}[mark] for mark in above]])
    present = np.array([[mark != "-" for mark in above]], bool)
    return int(loss_scan(error, present, 50.0, for_scans)[0])


@pytest.mark.parametrize(
    ("above", "for_scans", "expected"),
    [
        ("......", 3, HELD),
        ("xxx...", 3, 0),
        ("..xxx.", 3, 2),
        ("x.xx.xxxx", 3, 5),
        ("x--...", 3, 0),
        ("---...", 3, 0),
        ("...xxx", 3, 3),
        ("....xx", 3, HELD),
        ("xx", 3, HELD),
        ("", 3, HELD),
        (".x.", 1, 1),
        ("xxx....xxx", 3, 0),
    ],
    ids=[
        "never above",
        "from the start",
        "stays lost although the error falls again",
        "shorter runs do not count",
        "no track continues a run",
        "no track alone",
        "a run that ends with the trial",
        "a run cut short by the end",
        "fewer scans than the rule asks",
        "no scans",
        "one scan suffices",
        "the first of two runs",
    ],
)
def test_a_track_is_lost_at_the_first_scan_of_its_first_run(above, for_scans, expected):
    assert loss_scan_of(above, for_scans) == expected


def test_an_error_equal_to_the_limit_is_not_above_it():
    present = np.ones((1, 2), bool)
    assert loss_scan([[50.0, 50.0]], present, 50.0, 2) == [HELD]


def first_run(above: list[bool], for_scans: int) -> int:
    for scan in range(len(above) - for_scans + 1):
        if all(above[scan : scan + for_scans]):
            return scan
    return HELD


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    state=arrays(
        np.int8, st.tuples(st.integers(0, 5), st.integers(0, 12)), elements=st.integers(0, 2)
    ),
    for_scans=st.integers(1, 5),
)
def test_loss_scan_equals_a_plain_loop_over_the_definition(state, for_scans):
    error = np.choose(state, [1.0, 9.0, np.nan])
    lost_from = loss_scan(error, state < 2, 5.0, for_scans)
    assert lost_from.tolist() == [first_run(list(row > 0), for_scans) for row in state]


def test_the_limit_may_differ_by_trial_and_scan():
    error = np.full((2, 4), 30.0)
    present = np.ones((2, 4), bool)
    assert loss_scan(error, present, [[20.0], [40.0]], 2).tolist() == [0, HELD]
    assert loss_scan(error, present, [40.0, 20.0, 20.0, 40.0], 2).tolist() == [1, 1]


def test_a_trial_forced_out_is_lost_from_there_or_earlier():
    error = np.array([[1.0, 1, 1, 1], [1, 9, 9, 9], [9, 9, 1, 1], [1, 1, 1, 1]])
    lost_from = loss_scan(error, np.ones((4, 4), bool), 5.0, 2, forced_from=[3, 0, 2, -1])
    assert lost_from.tolist() == [3, 0, 0, HELD]


def test_an_unfit_rule_is_refused():
    error, present = np.ones((2, 4)), np.ones((2, 4), bool)
    with pytest.raises(ValueError, match="for_scans must be at least 1, got 0"):
        loss_scan(error, present, 5.0, 0)
    with pytest.raises(ValueError, match="error_above must not be NaN"):
        loss_scan(error, present, [5.0, 5.0, np.nan, 5.0], 2)
    for forced_from in ([1], [4, -1], [-2, 0]):
        with pytest.raises(
            ValueError, match="one scan index from -1 to 3 for each of the 2 trials"
        ):
            loss_scan(error, present, 5.0, 2, forced_from)


def test_nan_under_a_present_estimate_is_refused_and_not_held():
    with pytest.raises(ValueError, match="is NaN although an estimate is present"):
        loss_scan([[np.nan, 1.0]], [[True, True]], 5.0, 2)
