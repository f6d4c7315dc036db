from __future__ import annotations

import numpy as np
import pytest

from filters.random_numbers import numbers_of
from filters.track import room_for_tracks
from harness.scene.simulate import draw_scenes
from harness.trials.score import failed_trials, score_span


@pytest.fixture
def batch(make_task):
    return draw_scenes(make_task().scene, numbers_of(5), 0, 6)


@pytest.fixture
def perfect(batch):
    """Tracks that equal the truth, with unit covariances."""
    tracks = room_for_tracks(batch.scans, 4)
    tracks.means[:] = batch.truth.states
    tracks.covariances[:] = np.eye(4)
    tracks.present[:] = True
    tracks.scans_run[:] = 12
    tracks.hypotheses[:] = 24
    return tracks


def test_a_perfect_track_has_no_error(batch, perfect, make_task):
    scores = score_span(batch.truth, perfect, None, make_task().rules)
    assert np.all(scores.lost_at == -1)
    assert np.all(scores.position_square == 0)
    assert np.all(scores.gospa_localisation + scores.gospa_missed + scores.gospa_false == 0)
    assert np.all(scores.hypotheses == 2)
    assert np.all(scores.estimates == 11)  # the window leaves out the first scan
    assert np.all(scores.scan_estimates == 6)


def test_a_lost_trial_enters_no_sum_over_scans_but_its_own_row(batch, perfect, make_task):
    perfect.means[2, 5:, 0] += 1000.0
    scores = score_span(batch.truth, perfect, None, make_task().rules)
    assert scores.lost_at.tolist() == [-1, -1, 5, -1, -1, -1]
    assert np.all(scores.scan_estimates == 5)
    assert np.all(scores.scan_position_square == 0)
    assert scores.position_square[2] == pytest.approx(1e6 * 7 / 11)
    assert scores.nees[2] == pytest.approx(1e6 * 7 / 11)
    # beyond the cut-off of 40 m: one missed and one false, each of 40^2 / 2
    assert scores.gospa_missed[2] == pytest.approx(800 * 7 / 11)
    assert scores.gospa_false[2] == pytest.approx(800 * 7 / 11)


def test_no_track_counts_as_missed_and_as_lost(batch, perfect, make_task):
    perfect.present[1, 4:] = False
    perfect.means[1, 4:] = np.nan
    perfect.covariances[1, 4:] = np.nan
    scores = score_span(batch.truth, perfect, None, make_task().rules)
    assert scores.lost_at[1] == 4
    assert scores.estimates[1] == 3
    assert scores.position_square[1] == 0
    assert scores.gospa_missed[1] == pytest.approx(800 * 8 / 11)
    assert scores.gospa_false[1] == 0


@pytest.mark.parametrize(
    "spoil",
    [
        lambda tracks: tracks.means.__setitem__((3, 7, 1), np.nan),
        lambda tracks: tracks.covariances.__setitem__((3, 7, 0, 0), np.inf),
        lambda tracks: tracks.covariances.__setitem__((3, 7, 0, 0), -1.0),
    ],
    ids=["mean not finite", "covariance not finite", "covariance not positive definite"],
)
def test_a_failed_trial_is_not_lost_and_enters_nothing(spoil, batch, perfect, make_task):
    spoil(perfect)
    assert failed_trials(perfect).tolist() == [False, False, False, True, False, False]
    scores = score_span(batch.truth, perfect, None, make_task().rules)
    assert scores.failed[3]
    assert scores.lost_at[3] == -1
    assert np.isnan(scores.position_square[3])
    assert np.isnan(scores.gospa_localisation[3])
    assert np.all(scores.scan_estimates == 5)
