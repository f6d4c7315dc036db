"""A small study to change, and what is said of the changed one. All data are invented."""

from collections.abc import Callable
from pathlib import Path

import pytest

from harness.study.mistakes import StudyError
from harness.study.study import load_study

STUDY = """\
title = "Buoy tender in fog"
seed = 12
trials = 100

[scene]
scans = 30
scan_interval_s = 2.0

[scene.target]
motion = "nearly-constant-velocity"
acceleration_psd_m2_per_s3 = 0.05
start_position_m = [40.0, -20.0]
start_velocity_m_per_s = [3.0, 1.0]
start_position_sd_m = [8.0, 8.0]
start_velocity_sd_m_per_s = [1.0, 1.0]

[scene.sensor]
kind = "position"
noise_sd_m = 4.0
detection_probability = 0.9
clutter_density_per_m2 = 2e-5
region_m = [[-400.0, 400.0], [-400.0, 400.0]]

[strategies.pda]
kind = "pda"

[strategies.mixture]
kind = "gaussian-mixture"

[sweep]
"scene.sensor.noise_sd_m" = [2.0, 4.0]

[track_loss]
error_above_m = 50.0
for_scans = 4

[gospa]
cutoff_m = 30.0
"""


def edited(*edits: tuple[str, str]) -> str:
    """Return the study with pieces of its text replaced, each of which must stand in it once."""
    text = STUDY
    for old, new in edits:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    return text


@pytest.fixture
def study_text() -> Callable[..., str]:
    return edited


@pytest.fixture
def study_file(tmp_path: Path) -> Callable[..., Path]:
    """Write an edited study and return its path."""

    def write(*edits: tuple[str, str]) -> Path:
        path = tmp_path / "fog.toml"
        path.write_text(edited(*edits), encoding="utf-8")
        return path

    return write


@pytest.fixture
def said_of(study_file: Callable[..., Path]) -> Callable[..., list[str]]:
    """Return the messages about an edited study, the folder of the file left out."""

    def messages(*edits: tuple[str, str]) -> list[str]:
        path = study_file(*edits)
        with pytest.raises(StudyError) as raised:
            load_study(path)
        return str(raised.value).replace(str(path), path.name).splitlines()

    return messages
