"""Scenes drawn without compiling, for debugging and coverage."""

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import harness
from filters.random_numbers import numbers_of
from harness.scene.simulate import draw_scenes
from harness.study.schema import Scene

ROOT = Path(harness.__file__).resolve().parent.parent
TARGETS = {
    "position": {
        "motion": "nearly-constant-velocity",
        "acceleration_psd_m2_per_s3": 0.3,
        "start_position_m": (-40.0, 25.0),
        "start_velocity_m_per_s": (3.0, -2.0),
        "start_position_sd_m": (8.0, 5.0),
        "start_velocity_sd_m_per_s": (0.5, 1.0),
    },
    "range-bearing": {
        "motion": "coordinated-turn",
        "acceleration_psd_m2_per_s3": 0.3,
        "turn_rate_psd_deg2_per_s3": 1.0,
        "start_position_m": (-40.0, 25.0),
        "start_velocity_m_per_s": (3.0, -2.0),
        "start_turn_rate_deg_per_s": 5.0,
        "start_position_sd_m": (8.0, 5.0),
        "start_velocity_sd_m_per_s": (0.5, 1.0),
        "start_turn_rate_sd_deg_per_s": 2.0,
    },
}
SENSORS = {
    "position": {"noise_sd_m": 4.0, "region_m": ((-150.0, 150.0), (-150.0, 150.0))},
    "range-bearing": {
        "noise_sd_range_m": 4.0,
        "noise_sd_bearing_deg": 2.0,
        "region_range_m": (0.0, 300.0),
    },
}
DRAW = """
import sys
import numpy as np
from filters.compiled import COMPILING
from filters.random_numbers import numbers_of
from harness.scene.simulate import draw_scenes
from harness.study.schema import Scene

assert not COMPILING
scene = Scene.model_validate_json(sys.argv[1])
batch = draw_scenes(scene, numbers_of(8), 30, 2)
np.savez(sys.argv[2], states=batch.truth.states, outside=batch.truth.outside, *batch.scans[:4])
"""


CONSTANT = {"detection_probability": 0.8, "clutter_per_scan": 10.0}
# Singer motion before a Doppler radar on the move, and all that is told to no strategy.
RADAR = {
    "scan_times_s": (0.0, 1.0, 3.5, 4.0, 9.0),
    "target": {
        "motion": "singer",
        "acceleration_sd_m_per_s2": 2.0,
        "manoeuvre_time_s": 5.0,
        "start_position_m": (-40.0, 25.0),
        "start_velocity_m_per_s": (3.0, -2.0),
        "start_acceleration_m_per_s2": (0.0, 0.5),
        "start_position_sd_m": (8.0, 5.0),
        "start_velocity_sd_m_per_s": (0.5, 1.0),
        "start_acceleration_sd_m_per_s2": (0.1, 0.2),
    },
    "sensor": {
        "kind": "range-bearing-range-rate",
        "position_m": (-90.0, 0.0),
        "velocity_m_per_s": (2.0, 1.0),
        "noise_sd_range_m": 4.0,
        "noise_sd_bearing_deg": 2.0,
        "noise_sd_range_rate_m_per_s": 0.5,
        "noise_factor_over_range": ((20.0, 1.0), (90.0, 2.0)),
        "region_range_m": (0.0, 300.0),
        "region_range_rate_m_per_s": (-30.0, 30.0),
    },
    "unmodelled": {
        "measurement_bias": (3.0, 1.0, 0.1),
        "detection_persistence": 0.5,
        "clutter_factor_sd": 0.7,
        "persistent_clutter": {
            "expected_number": 5.0,
            "shown_probability": 0.7,
            "mean_lifetime_s": 4.0,
            "spread": (1.0, 1.0, 0.2),
        },
    },
}
BLIND = {"blind_sectors_deg": ((100.0, 120.0),), "blind_range_rate_m_per_s": 0.3}
STEADY = {
    "kind": "swerling-0",
    "snr_db": 12.0,
    "reference_range_m": 60.0,
    "false_alarm_probability": 1e-3,
    "resolution_cell": (30.0, 10.0, 3.0),
}
PATCH = {"centre": (90.0, 170.0, 1.0), "sd": (20.0, 15.0, 3.0), "expected_number": 6.0}
RICH = [
    {"detection": STEADY | BLIND},
    {
        "detection": {"kind": "range-table", "probability_over_range": ((0.0, 1.0), (99.0, 0.4))},
        "clutter": {"kind": "patches", "expected_number": 3.0, "patches": (PATCH,)},
    },
    {
        "detection_probability": 0.7,
        "clutter": {"kind": "range-table", "density_over_range": ((50.0, 1e-3), (200.0, 1e-5))},
    },
]
SCENES = [
    {
        "scans": 5,
        "scan_interval_s": 1.5,
        "target": TARGETS[kind],
        "sensor": SENSORS[kind] | CONSTANT | {"kind": kind},
    }
    for kind in SENSORS
] + [RADAR | {"sensor": RADAR["sensor"] | keys} for keys in RICH]


@pytest.mark.parametrize("number", range(len(SCENES)))
def test_plain_python_draws_the_same_scenes_as_compiled_code(number, tmp_path):
    """With warnings as errors; a last bit of sine or logarithm may differ."""
    scene = Scene(**SCENES[number])
    out = tmp_path / "scenes.npz"
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", DRAW, scene.model_dump_json(), str(out)],
        cwd=ROOT,
        env=os.environ | {"NUMBA_DISABLE_JIT": "1", "PYTHONPATH": str(ROOT)},
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    plain, batch = np.load(out), draw_scenes(scene, numbers_of(8), 30, 2)
    np.testing.assert_allclose(plain["states"], batch.truth.states, rtol=1e-12)
    np.testing.assert_array_equal(plain["outside"], batch.truth.outside)
    for name, expected in zip(("arr_0", "arr_1", "arr_2", "arr_3"), batch.scans[:4], strict=True):
        np.testing.assert_allclose(plain[name], expected, rtol=1e-12)
