"""What textbooks say of the strategies in clutter, on scenes where PDA loses a tenth of its tracks.

Common practice: Bar-Shalom and Li (1995), Multitarget-Multisensor Tracking, chapter 3 (nearest
neighbour takes wrong detections for certain and so claims too much; PDA does not), Salmond (1990),
SPIE 1305 (a mixture loses fewer tracks than its one-component limit, PDA).
"""

import numpy as np
import pytest
from scipy.stats import binomtest

from filters.random_numbers import numbers_of
from filters.strategies import (
    GaussianMixture,
    KnownAssociation,
    NearestNeighbour,
    ProbabilisticDataAssociation,
)
from filters.strategies.strategy import Assumptions
from harness.scene.models import models_of
from harness.scene.simulate import draw_scenes
from harness.scene.truth import prior_of
from harness.study.schema import Scene
from metrics.consistency import chi_square_mean_bounds, nees
from metrics.track_loss import loss_scan

TRIALS, SCANS, FROM_SCAN = 400, 60, 10
# Acceleration sd times T^2 over the noise sd is 0.1; one false detection in a hundred squared sds.
DENSE = Scene(
    scans=SCANS,
    scan_interval_s=1.0,
    target={
        "motion": "piecewise-constant-acceleration",
        "acceleration_sd_m_per_s2": 1.0,
        "start_position_m": (0.0, 0.0),
        "start_velocity_m_per_s": (0.0, 0.0),
        "start_position_sd_m": (10.0, 10.0),
        "start_velocity_sd_m_per_s": (10.0, 10.0),
    },
    sensor={
        "kind": "position",
        "noise_sd_m": 10.0,
        "detection_probability": 0.9,
        "clutter_density_per_m2": 1e-4,
        "region_m": ((-1300.0, 1300.0), (-1300.0, 1300.0)),
    },
)
STRATEGIES = {
    "nearest neighbour": NearestNeighbour(kind="nearest-neighbour"),
    "pda": ProbabilisticDataAssociation(kind="pda"),
    "mixture": GaussianMixture(kind="gaussian-mixture"),
    "known association": KnownAssociation(kind="known-association"),
}


@pytest.fixture(scope="module")
def outcomes():
    """For each strategy: lost tracks (trials,), and mean NEES and squared error of each trial."""
    numbers = numbers_of(4107)
    batch = draw_scenes(DENSE, numbers, 0, TRIALS)
    assumptions = Assumptions(models_of(DENSE), prior_of(DENSE), 2)
    found = {}
    for name, strategy in STRATEGIES.items():
        scans = batch.scans if strategy.is_told_origins else batch.scans_without_origins
        tracks = strategy.run(assumptions, scans, numbers, 0)
        error = tracks.means - batch.truth.states
        distance = np.linalg.norm(error[..., :2], axis=2)
        lost = loss_scan(distance, tracks.present, 100.0, 3) >= 0
        consistency = nees(error, tracks.covariances)[:, FROM_SCAN:].mean(axis=1)
        found[name] = (lost, consistency, np.mean(distance[:, FROM_SCAN:] ** 2, axis=1))
    return found


def assert_loses_more(first, second):
    """Exact McNemar test on the trials that only one of the two lost, at level 1e-4."""
    only_first, only_second = np.sum(first & ~second), np.sum(second & ~first)
    test = binomtest(int(only_first), int(only_first + only_second), 0.5, alternative="greater")
    assert test.pvalue < 1e-4


def test_pda_loses_some_tracks_here(outcomes):
    """Otherwise the comparisons below would compare nothing."""
    assert 0.02 < outcomes["pda"][0].mean() < 0.3


def test_nearest_neighbour_loses_more_tracks_than_pda(outcomes):
    assert_loses_more(outcomes["nearest neighbour"][0], outcomes["pda"][0])


def test_a_mixture_loses_fewer_tracks_than_pda(outcomes):
    assert_loses_more(outcomes["pda"][0], outcomes["mixture"][0])


def test_known_association_loses_the_fewest(outcomes):
    """Only the scene's own start, vague in velocity, takes it beyond 100 m now and then."""
    assert outcomes["known association"][0].mean() < 0.02
    assert_loses_more(outcomes["pda"][0], outcomes["known association"][0])


def test_nearest_neighbour_claims_too_much_even_where_it_holds_its_track(outcomes):
    """Mean NEES over held trials: beyond 4 by 4 standard errors, and beyond its bounds."""
    lost, consistency, _ = outcomes["nearest neighbour"]
    held = consistency[~lost]
    standard_error = held.std(ddof=1) / np.sqrt(len(held))
    assert held.mean() - 4 * standard_error > 4.0
    assert held.mean() > chi_square_mean_bounds(4, len(held)).high


@pytest.mark.parametrize("strategy", ["pda", "mixture"])
def test_pda_and_the_mixture_claim_about_right_where_they_hold_their_tracks(outcomes, strategy):
    """Mean NEES of held trials about 4, or a little below: the hard trials are gone."""
    lost, consistency, _ = outcomes[strategy]
    held = consistency[~lost]
    standard_error = held.std(ddof=1) / np.sqrt(len(held))
    assert 3.5 < held.mean() < 4.0 + 4 * standard_error


def test_known_association_is_consistent(outcomes):
    """Mean NEES of all trials within 4 standard errors of 4, the size of the state."""
    _, consistency, _ = outcomes["known association"]
    standard_error = consistency.std(ddof=1) / np.sqrt(TRIALS)
    assert abs(consistency.mean() - 4.0) < 4 * standard_error


@pytest.mark.parametrize("strategy", ["nearest neighbour", "pda", "mixture"])
def test_known_association_errs_least_on_trials_that_both_held(outcomes, strategy):
    """Paired differences of mean squared errors, above zero by 4 standard errors."""
    lost, _, square = outcomes[strategy]
    lost_known, _, square_known = outcomes["known association"]
    gap = (square - square_known)[~lost & ~lost_known]
    assert gap.mean() > 4 * gap.std(ddof=1) / np.sqrt(len(gap))
