from __future__ import annotations

import numpy as np
import pytest

from harness.evidence.best import best_in
from harness.evidence.case_scores import CaseScores, add_in_tree, join_spans
from harness.evidence.summary import scan_rows, summary_row
from harness.trials.score import SCAN_COLUMNS, TRIAL_COLUMNS, SpanScores
from harness.trials.task import Span, SpanResult
from metrics.intervals import wilson_interval

SCANS = 20


def scores_of(trials, **given):
    """Scores in a plane, every trial held with unit errors but for what is given."""
    trial = {name: np.zeros(trials) for name in TRIAL_COLUMNS}
    trial |= {
        "lost_at": np.full(trials, -1),
        "failed": np.zeros(trials, bool),
        "estimates": np.full(trials, SCANS),
        "position_square": np.ones(trials),
        "velocity_square": np.ones(trials),
        "nees": np.full(trials, 4.0),
        "nis": np.full(trials, np.nan),
        "gospa_localisation": np.ones(trials),
    }
    scan = {name: np.full(SCANS, float(trials)) for name in SCAN_COLUMNS}
    scan["scan_nees"] = np.full(SCANS, 4.0 * trials)
    return SpanScores(**{**trial, **scan, **given})


def case_of(trials=100, **given):
    return CaseScores(scores_of(trials, **given), 1.0, axes=2, window=slice(0, None), order=2)


def flags(trials, *places):
    found = np.zeros(trials, bool)
    found[list(places)] = True
    return found


def test_a_failed_trial_is_not_lost_and_counts_in_no_rate():
    """10 lost of 90 that did not fail."""
    lost_at = np.full(100, -1)
    lost_at[:10] = 7
    failed = flags(100, *range(90, 100))
    row = summary_row(case_of(lost_at=lost_at, failed=failed), 2, counts_hypotheses=True)
    assert (row["trials"], row["lost"], row["failed"]) == (100, 10, 10)
    assert row["track_loss_rate"] == 10 / 90
    low, high = wilson_interval(10, 90)
    assert (row["track_loss_rate_low"], row["track_loss_rate_high"]) == (low, high)


def test_errors_are_over_held_trials_and_rmse_all_over_every_trial_not_failed():
    square = np.full(100, 9.0)
    square[:20] = 400.0
    lost_at = np.where(np.arange(100) < 20, 5, -1)
    row = summary_row(case_of(position_square=square, lost_at=lost_at), 2, True)
    assert row["rmse_position"] == 3.0
    assert row["rmse_position_all"] == pytest.approx(np.sqrt(0.2 * 400 + 0.8 * 9))


def test_a_trial_weighs_by_its_scans_with_an_estimate():
    """RMSE is the root of the mean over scans: 1 m2 over 20 scans and 4 m2 over 10."""
    row = summary_row(
        case_of(2, position_square=np.array([1.0, 4.0]), estimates=np.array([20, 10])), 2, True
    )
    assert row["rmse_position"] == pytest.approx(np.sqrt((20 * 1 + 10 * 4) / 30))
    assert row["no_estimate"] == pytest.approx(10 / 40)


def test_anees_of_a_consistent_filter_is_one():
    row = summary_row(case_of(), 2, True)
    assert row["anees"] == 1.0
    assert row["nees_inside"] == 1.0


def test_all_tracks_lost_leaves_errors_empty_and_raises_nothing():
    row = summary_row(case_of(lost_at=np.zeros(100, int)), 2, True)
    assert row["track_loss_rate"] == 1.0
    assert np.isnan(row["rmse_position"])
    assert np.isnan(row["anees"])
    assert np.isfinite(row["gospa"])


def test_all_trials_failed_leaves_everything_but_counts_empty():
    nothing = np.full(100, np.nan)
    row = summary_row(
        case_of(
            failed=np.ones(100, bool), position_square=nothing, gospa_localisation=nothing,
            nees=nothing, estimates=np.zeros(100, int), scan_estimates=np.zeros(SCANS, int),
        ),
        2, True,
    )  # fmt: skip
    assert row["failed"] == 100
    for name in ("track_loss_rate", "rmse_position", "anees", "gospa", "no_estimate"):
        assert np.isnan(row[name]), name


def test_hypotheses_are_empty_where_they_are_no_measure():
    assert np.isnan(summary_row(case_of(), 2, counts_hypotheses=False)["hypotheses_per_scan"])


def test_share_lost_grows_from_the_scan_of_each_loss():
    lost_at = np.full(10, -1)
    lost_at[0], lost_at[1] = 3, 10
    rows = scan_rows(case_of(10, lost_at=lost_at), np.arange(SCANS, dtype=float))
    assert rows["lost"][:3].tolist() == [0, 0, 0]
    assert rows["lost"][3:10].tolist() == [0.1] * 7
    assert rows["lost"][10:].tolist() == [0.2] * 10


def test_the_tree_of_sums_is_fixed_by_the_number_of_spans_alone():
    parts = [np.array([10.0**e]) for e in (16, 0, -3, 8, 2)]
    expected = ((parts[0] + parts[1]) + (parts[2] + parts[3])) + parts[4]
    assert add_in_tree(parts) == expected


def test_spans_join_in_their_order():
    spans = [
        SpanResult("case", Span(i, 100), scores_of(100, position_square=np.full(100, i + 1.0)), us)
        for i, us in enumerate([3.0, 1.0, 2.0])
    ]
    case = join_spans(spans, axes=2, window=slice(0, None), order=2)
    assert case.trials == 300
    assert case.scores.position_square[[0, 100, 200]].tolist() == [1, 2, 3]
    assert np.all(case.scores.scan_estimates == 300)
    assert case.us_per_scan == 2.0
    assert join_spans([], 2, slice(0, None), 2) is None


def test_the_best_are_all_that_a_paired_test_does_not_tell_apart():
    noise = np.random.default_rng(8).normal(1.0, 0.3, 200) ** 2
    cases = {
        "good": case_of(200, position_square=noise),
        "as good": case_of(200, position_square=noise[::-1].copy()),
        "slightly worse in every trial": case_of(200, position_square=noise * 1.02),
    }
    best = best_in(cases)
    assert "rmse_position" in best["good"]
    assert "rmse_position" in best["as good"]
    assert "rmse_position" not in best["slightly worse in every trial"]


def test_losing_significantly_more_tracks_bars_from_the_best_on_error():
    """10 against 0 discordant trials: p = 0.002 (exact McNemar)."""
    lost_at = np.where(np.arange(200) < 10, 5, -1)
    cases = {
        "loses few": case_of(200, position_square=np.full(200, 4.0)),
        "loses more": case_of(200, position_square=np.full(200, 1.0), lost_at=lost_at),
    }
    best = best_in(cases)
    assert "track_loss_rate" in best["loses few"]
    assert "rmse_position" in best["loses few"]
    assert best["loses more"].count("rmse_position") == 0
    assert "track_loss_rate" not in best["loses more"]


def test_five_lost_trials_more_are_not_told_apart():
    """5 against 0 discordant trials: p = 0.0625 (exact McNemar)."""
    lost_at = np.where(np.arange(200) < 5, 5, -1)
    best = best_in({"a": case_of(200), "b": case_of(200, lost_at=lost_at)})
    assert "track_loss_rate" in best["a"]
    assert "track_loss_rate" in best["b"]
