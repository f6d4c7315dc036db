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


@pytest.mark.parametrize("kind", SENSORS)
def test_plain_python_draws_the_same_scenes_as_compiled_code(kind, tmp_path):
    """With warnings as errors; a last bit of sine or logarithm may differ."""
    scene = Scene(
        scans=5,
        scan_interval_s=1.5,
        target=TARGETS[kind],
        sensor=SENSORS[kind]
        | {"kind": kind, "detection_probability": 0.8, "clutter_per_scan": 10.0},
    )
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
