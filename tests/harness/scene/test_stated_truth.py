"""Truth along legs, at irregular scans, and priors drawn around it."""

import math

import numpy as np
import pytest
from scipy.stats import kstest

from filters.random_numbers import numbers_of
from harness.scene.models import models_of
from harness.scene.priors import prior_means
from harness.scene.simulate import draw_scenes
from harness.scene.truth import draw_truth, prior_of
from harness.study.legs import states_along
from harness.study.schema import Scene

SEED = 20260505
LEGS = (
    {"kind": "turn", "duration_s": 20.0, "turn_rate_deg_per_s": 3.0},
    {"kind": "straight", "duration_s": 15.0},
    {"kind": "speed-change", "duration_s": 10.0, "to_speed_m_per_s": 20.0},
)
STRAIGHT_MOTION = {
    "motion": "nearly-constant-velocity",
    "acceleration_psd_m2_per_s3": 0.3,
    "start_position_m": (-40.0, 25.0),
    "start_velocity_m_per_s": (30.0, -10.0),
    "start_position_sd_m": (8.0, 5.0),
    "start_velocity_sd_m_per_s": (0.5, 1.0),
}
TURNING_MOTION = STRAIGHT_MOTION | {
    "motion": "coordinated-turn",
    "turn_rate_psd_deg2_per_s3": 0.1,
    "start_turn_rate_deg_per_s": 1.0,
    "start_turn_rate_sd_deg_per_s": 2.0,
}


def scene(target=STRAIGHT_MOTION, legs=LEGS, **keys):
    times = {} if "scan_times_s" in keys else {"scans": 25, "scan_interval_s": 2.0}
    sensor = {
        "kind": "position",
        "noise_sd_m": 4.0,
        "detection_probability": 0.8,
        "clutter_per_scan": 3.0,
        "region_m": ((-2000.0, 2000.0), (-2000.0, 2000.0)),
    }
    return Scene(**times | {"target": target, "sensor": sensor, "legs": legs} | keys)


def means_told(stated, assumed=None, trials=500):
    numbers = numbers_of(SEED)
    states = draw_truth(stated, numbers, 0, trials)
    return prior_means(stated, assumed or stated, states, numbers, 0)


# Truth


def test_along_legs_every_trial_is_the_same_from_the_starts_mean():
    stated = scene()
    states = draw_truth(stated, numbers_of(SEED), 5, 3)
    np.testing.assert_array_equal(states[0, 0, :4], [-40.0, 25.0, 30.0, -10.0])
    np.testing.assert_array_equal(states, states[:1].repeat(3, axis=0))
    expected = states_along(
        stated.legs, np.array([-40.0, 25.0]), np.array([30.0, -10.0]), 2.0 * np.arange(25)
    )
    np.testing.assert_array_equal(states[0], expected)


def test_legs_begin_at_the_first_scan_whatever_its_time():
    times = (100.0, 101.5, 107.0)
    states = draw_truth(scene(scan_times_s=times), numbers_of(SEED), 0, 1)
    from_zero = draw_truth(scene(scan_times_s=(0.0, 1.5, 7.0)), numbers_of(SEED), 0, 1)
    np.testing.assert_array_equal(states, from_zero)


def test_detections_of_a_path_are_those_of_its_positions():
    batch = draw_scenes(scene(), numbers_of(SEED), 0, 100)
    own = batch.scans.offsets[:, :-1] + batch.scans.origins
    detected = batch.scans.origins >= 0
    noise = (batch.scans.detections[own[detected]] - batch.truth.position[detected]) / 4.0
    for column in noise.T:
        assert kstest(column, "norm").pvalue > 1e-5


def test_strategies_are_told_the_motion_and_know_nothing_of_legs():
    told = models_of(scene()).motion, prior_of(scene())
    plain = models_of(scene(legs=None)).motion, prior_of(scene(legs=None))
    for ours, theirs in zip(told, plain, strict=True):
        for one, other in zip(ours, theirs, strict=True):
            np.testing.assert_array_equal(one, other)


def test_irregular_scans_that_are_regular_after_all_give_the_same_scenes():
    regular, stated = (
        draw_scenes(one, numbers_of(SEED), 0, 4)
        for one in (
            scene(legs=None),
            scene(legs=None, scan_times_s=tuple(float(t) for t in range(0, 50, 2))),
        )
    )
    np.testing.assert_array_equal(regular.truth.states, stated.truth.states)
    np.testing.assert_array_equal(regular.scans.detections, stated.scans.detections)
    np.testing.assert_array_equal(regular.scans.intervals, stated.scans.intervals)


def test_the_motion_runs_over_the_intervals_between_irregular_scans():
    """Without noise, positions are those of constant velocity at the stated times."""
    times = (3.0, 3.5, 10.0, 10.25, 40.0)
    still = STRAIGHT_MOTION | {"acceleration_psd_m2_per_s3": 0.0}
    stated = scene(still, None, scan_times_s=times)
    assert stated.scan_count == 5
    states = draw_truth(stated, numbers_of(SEED), 0, 3)
    since = (np.array(times) - 3.0)[:, None]
    expected = states[:, :1, :2] + since * states[:, :1, 2:]
    np.testing.assert_allclose(states[..., :2], expected, rtol=1e-12)
    np.testing.assert_array_equal(stated.scan_intervals(), [0.0, 0.5, 6.5, 0.25, 29.75])
    assert stated.with_first_scans(2).scan_times_s == (3.0, 3.5)


# Priors around it


def test_where_the_truth_is_drawn_the_prior_is_the_assumed_one():
    stated = scene(legs=None)
    keys = stated.model_dump()
    keys["target"]["start_position_m"] = (1.0, 2.0)
    means = means_told(stated, Scene(**keys), 3)
    np.testing.assert_array_equal(means, [[1.0, 2.0, 30.0, -10.0]] * 3)


def test_priors_are_drawn_around_a_stated_truth_with_the_scenes_spread():
    """2,000 trials: each entry normal about the truth, at level 1e-5, and uncorrelated."""
    means = means_told(scene(), trials=2000)
    white = (means - [-40.0, 25.0, 30.0, -10.0]) / [8.0, 5.0, 0.5, 1.0]
    for column in white.T:
        assert kstest(column, "norm").pvalue > 1e-5
    assert np.abs(np.corrcoef(white.T) - np.eye(4)).max() < 4.5 / math.sqrt(2000)


def test_priors_use_the_numbers_that_would_have_drawn_the_truth():
    offsets = means_told(scene(), trials=5) - prior_of(scene()).mean
    drawn = draw_truth(scene(legs=None), numbers_of(SEED), 0, 5)[:, 0] - prior_of(scene()).mean
    np.testing.assert_allclose(offsets, drawn, atol=1e-12)


def test_a_wrong_assumed_mean_moves_priors_and_a_wrong_spread_does_not():
    stated = scene()
    keys = stated.model_dump()
    keys["target"] |= {"start_position_m": (-30.0, 25.0), "start_position_sd_m": (1.0, 1.0)}
    moved = means_told(stated, Scene(**keys), 20) - means_told(stated, trials=20)
    np.testing.assert_allclose(moved, np.tile([10.0, 0.0, 0.0, 0.0], (20, 1)), atol=1e-12)


def test_what_only_the_assumed_state_holds_is_as_stated():
    stated = scene()
    keys = stated.model_dump() | {"target": TURNING_MOTION, "legs": None}
    means = means_told(stated, Scene(**keys), 20)
    np.testing.assert_array_equal(means[:, :4], means_told(stated, trials=20))
    np.testing.assert_allclose(means[:, 4], math.radians(1.0))


def test_what_the_scenes_own_state_holds_is_drawn_around_the_true_turn():
    """The path turns by 3 degrees a second from the start, whatever the motion's mean."""
    means = means_told(scene(TURNING_MOTION), trials=2000)
    white = (np.degrees(means[:, 4]) - 3.0) / 2.0
    assert kstest(white, "norm").pvalue > 1e-5


def test_an_acceleration_in_the_state_is_drawn_around_the_true_one():
    """The first leg turns: 3 degrees a second at (30, -10) m/s is (0.5236, 1.5708) m/s2."""
    target = STRAIGHT_MOTION | {
        "motion": "singer",
        "acceleration_sd_m_per_s2": 2.0,
        "manoeuvre_time_s": 20.0,
        "start_acceleration_m_per_s2": (0.0, 0.0),
        "start_acceleration_sd_m_per_s2": (0.5, 0.5),
    }
    target.pop("acceleration_psd_m2_per_s3")
    means = means_told(scene(target), trials=2000)
    white = (means[:, 4:] - math.radians(3.0) * np.array([10.0, 30.0])) / 0.5
    for column in white.T:
        assert kstest(column, "norm").pvalue > 1e-5


@pytest.mark.parametrize("legs", [None, LEGS])
def test_priors_of_a_trial_do_not_depend_on_its_batch(legs):
    stated, numbers = scene(legs=legs), numbers_of(SEED)
    together = prior_means(stated, stated, draw_truth(stated, numbers, 3, 5), numbers, 3)
    alone = prior_means(stated, stated, draw_truth(stated, numbers, 6, 1), numbers, 6)
    np.testing.assert_array_equal(alone[0], together[3])
