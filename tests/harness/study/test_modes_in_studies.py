"""Modes and existence as a study states them: what is wrong with them is said in one line."""

import tomllib

import pytest

from harness.study.mistakes import StudyError
from harness.study.study import study_from

STUDY = """
title = "Coaster off a headland"
question = "Does it turn?"
seed = 5
trials = 100
[scene]
scans = 10
scan_interval_s = 2.0
[scene.target]
motion = "nearly-constant-velocity"
acceleration_psd_m2_per_s3 = 0.1
start_position_m = [0.0, 0.0]
start_velocity_m_per_s = [5.0, 0.0]
start_position_sd_m = [10.0, 10.0]
start_velocity_sd_m_per_s = [1.0, 1.0]
[scene.sensor]
kind = "position"
noise_sd_m = 10.0
detection_probability = 0.8
clutter_density_per_m2 = 1e-4
region_m = [[-500.0, 500.0], [-500.0, 500.0]]
[strategies.both]
kind = "pda"
mode_transition = [[0.9, 0.1], [0.2, 0.8]]
mode_start = [0.5, 0.5]
[strategies.both.modes.steady]
motion = "nearly-constant-velocity"
acceleration_psd_m2_per_s3 = 0.1
[strategies.both.modes.turning]
motion = "constant-turn"
turn_rate_deg_per_s = 5.0
acceleration_psd_m2_per_s3 = 0.1
[strategies.both.existence]
start = 0.5
survival = 0.99
end_below = 0.01
[track_loss]
error_above_m = 60.0
for_scans = 3
[gospa]
cutoff_m = 60.0
"""

MISTAKES = {
    "rows that do not sum to one": (
        ("[0.2, 0.8]]", "[0.2, 0.7]]"),
        "strategies.both.mode_transition[1] = [0.2, 0.7]: sums to 0.9, not to 1; make its "
        "probabilities sum to 1",
    ),
    "a row too few": (
        ("[[0.9, 0.1], [0.2, 0.8]]", "[[0.9, 0.1], [0.2, 0.8], [0.0, 1.0]]"),
        "has 3 rows but there are 2 modes; give a row for each mode",
    ),
    "an entry too many": (
        ("[0.2, 0.8]]", "[0.2, 0.7, 0.1]]"),
        "strategies.both.mode_transition[1] = [0.2, 0.7, 0.1]: has 3 entries but there are 2 modes",
    ),
    "no transition": (
        ("mode_transition = [[0.9, 0.1], [0.2, 0.8]]\n", ""),
        "strategies.both.mode_transition: is missing; give, for each mode,",
    ),
    "a start that does not sum to one": (
        ("mode_start = [0.5, 0.5]", "mode_start = [0.5, 0.4]"),
        "strategies.both.mode_start = [0.5, 0.4]: sums to 0.9, not to 1",
    ),
    "a probability above one": (
        ("[0.2, 0.8]]", "[-0.2, 1.2]]"),
        "strategies.both.mode_transition[1][0] = -0.2: must lie in [0, 1]",
    ),
    "a mode of another state": (
        (
            'motion = "constant-turn"\nturn_rate_deg_per_s = 5.0',
            'motion = "coordinated-turn"\nturn_rate_psd_deg2_per_s3 = 1.0',
        ),
        'strategies.both.modes.turning.motion = "coordinated-turn": has a state of 5 numbers but '
        "the target assumed has 4",
    ),
    "a start within a mode": (
        ("turn_rate_deg_per_s = 5.0", "turn_rate_deg_per_s = 5.0\nstart_position_m = [0.0, 0.0]"),
        "strategies.both.modes.turning.start_position_m = [0.0, 0.0]: is unknown",
    ),
    "one mode": (
        (
            '[strategies.both.modes.turning]\nmotion = "constant-turn"\n'
            "turn_rate_deg_per_s = 5.0\nacceleration_psd_m2_per_s3 = 0.1\n",
            "",
        ),
        "strategies.both.modes",
    ),
    "existence without its end": (
        ("end_below = 0.01\n", ""),
        "strategies.both.existence.end_below: is missing",
    ),
}


def study_with(old="", new=""):
    assert old in STUDY
    return study_from(tomllib.loads(STUDY.replace(old, new, 1)), name="coaster")


def test_the_study_itself_is_right():
    (condition,) = study_with().conditions
    (case,) = condition.cases
    assert list(case.strategy.modes) == ["steady", "turning"]


@pytest.mark.parametrize("name", MISTAKES)
def test_what_is_wrong_with_modes_and_existence_is_said(name):
    (old, new), said = MISTAKES[name]
    with pytest.raises(StudyError) as caught:
        study_with(old, new)
    assert len(caught.value.mistakes) == 1, str(caught.value)
    assert said in str(caught.value)


def test_parameters_of_modes_can_be_swept():
    swept = "strategies.both.modes.turning.turn_rate_deg_per_s"
    study = study_with().with_changes({f"sweep.{swept}": [2.0, 8.0]})
    rates = [
        condition.cases[0].strategy.modes["turning"].turn_rate_deg_per_s
        for condition in study.conditions
    ]
    assert rates == [2.0, 8.0]
