"""What `check` says of a target on stated legs and of irregular scans."""

import pytest

from harness.evidence.outlook import look_ahead, outlook_text
from harness.study.study import study_from

TIMES = [0.0, 1.0, 4.0, 9.0, 16.0]


def study(speed):
    """Straight on at a speed from the middle of a region of 200 m to either side."""
    return study_from(
        {
            "title": "Legs",
            "seed": 1,
            "trials": 10,
            "scene": {
                "scan_times_s": TIMES,
                "target": {
                    "motion": "nearly-constant-velocity",
                    "acceleration_psd_m2_per_s3": 0.1,
                    "start_position_m": [0.0, 0.0],
                    "start_velocity_m_per_s": [speed, 0.0],
                    "start_position_sd_m": [5.0, 5.0],
                    "start_velocity_sd_m_per_s": [1.0, 1.0],
                },
                "sensor": {
                    "kind": "position",
                    "noise_sd_m": 1.0,
                    "detection_probability": 0.9,
                    "clutter_per_scan": 2.0,
                    "region_m": [[-200.0, 200.0], [-200.0, 200.0]],
                },
                "legs": [{"kind": "straight", "duration_s": 30.0}],
            },
            "strategies": {"known": {"kind": "known-association"}},
            "track_loss": {"error_above_m": 1000.0, "for_scans": 2},
            "gospa": {"cutoff_m": 50.0},
        }
    )


@pytest.mark.parametrize(("speed", "share"), [(5.0, 0.0), (20.0, 0.2), (30.0, 0.4)])
def test_legs_that_leave_the_region_are_warned_of(speed, share):
    """At 20 m/s the last of five scans is outside, 320 m away; at 30 m/s the one before too."""
    outlook = look_ahead(study(speed))
    assert outlook.conditions[0].outside == pytest.approx(share)
    assert len([w for w in outlook.warnings if "outside the sensor's region" in w]) == (share > 0)


def test_irregular_scans_are_told_by_their_number_and_ends():
    assert "5, at stated times from 0 to 16 s" in outlook_text(look_ahead(study(5.0)))
