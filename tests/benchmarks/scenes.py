"""The scenes that rows are measured on, and a linear Gaussian tracker's view of the linear one.

Four states, two measured numbers, on average 16 false detections a scan beside the target's own.
The target and the sensor are invented.
"""

from typing import NamedTuple

import numpy as np
from scipy.stats import chi2

from filters.random_numbers import Numbers, numbers_of
from filters.strategies.strategy import Assumptions
from filters.track import Scans
from harness.scene.models import models_of
from harness.scene.simulate import draw_scenes
from harness.scene.truth import prior_of
from harness.study.schema import Scene

SCANS = 100
CLUTTER_PER_SCAN = 16.0
INTERVAL = 1.0  # s
PSD = 0.02  # m^2/s^3
NOISE_SD = 10.0  # m
DETECTION_PROBABILITY = 0.9
GATE_PROBABILITY = 0.9997
SIDE = 1000.0  # m

# Means (trials, scans, 4) and covariances (trials, scans, 4, 4) after every scan.
Estimates = tuple[np.ndarray, np.ndarray]

SCENE = Scene.model_validate(
    {
        "scans": SCANS,
        "scan_interval_s": INTERVAL,
        "target": {
            "motion": "nearly-constant-velocity",
            "acceleration_psd_m2_per_s3": PSD,
            "start_position_m": [-150.0, 60.0],
            "start_velocity_m_per_s": [3.0, -1.0],
            "start_position_sd_m": [10.0, 10.0],
            "start_velocity_sd_m_per_s": [0.5, 0.5],
        },
        "sensor": {
            "kind": "position",
            "noise_sd_m": NOISE_SD,
            "detection_probability": DETECTION_PROBABILITY,
            "clutter_per_scan": CLUTTER_PER_SCAN,
            "region_m": [[-SIDE / 2, SIDE / 2], [-SIDE / 2, SIDE / 2]],
        },
    }
)

# The same target before a sensor of range and bearing, with as many false detections.
RANGE_BEARING_SCENE = Scene.model_validate(
    {
        "scans": SCANS,
        "scan_interval_s": INTERVAL,
        "target": SCENE.target,
        "sensor": {
            "kind": "range-bearing",
            "position_m": [200.0, -400.0],
            "noise_sd_range_m": NOISE_SD,
            "noise_sd_bearing_deg": 1.0,
            "detection_probability": DETECTION_PROBABILITY,
            "clutter_per_scan": CLUTTER_PER_SCAN,
            "region_range_m": [0.0, SIDE],
        },
    }
)


class Drawn(NamedTuple):
    """A batch of trials, and what strategies assume of them."""

    assumptions: Assumptions
    scans: Scans
    told: Scans  # the same with the true origins
    numbers: Numbers

    @property
    def scan_count(self) -> int:
        """Scans in the whole batch."""
        return self.scans.origins.size


class Model(NamedTuple):
    """The same assumptions as matrices, for trackers written without the package."""

    transition: np.ndarray  # F (4, 4)
    process_noise: np.ndarray  # Q (4, 4)
    measurement: np.ndarray  # H (2, 4)
    noise: np.ndarray  # R (2, 2)
    detection_probability: float
    gate_probability: float
    gate_limit: float  # squared distance
    clutter: float  # false detections per scan and m^2
    mean: np.ndarray  # (4,) at the first scan
    covariance: np.ndarray  # (4, 4)


def drawn(trials: int, scene: Scene = SCENE) -> Drawn:
    """Draw the first trials."""
    numbers = numbers_of(4107)
    batch = draw_scenes(scene, numbers, 0, trials)
    assumptions = Assumptions(models_of(scene), prior_of(scene), scene.target.axes)
    return Drawn(assumptions, batch.scans_without_origins, batch.scans, numbers)


def first_trials(batch: Drawn, trials: int) -> Drawn:
    """Keep the first trials of a batch."""
    few = [
        scans._replace(offsets=scans.offsets[:trials], origins=scans.origins[:trials])
        for scans in (batch.scans, batch.told)
    ]
    return batch._replace(scans=few[0], told=few[1])


def linear_model() -> Model:
    """Matrices of nearly constant velocity (white-noise acceleration) and measured position."""
    position, velocity = INTERVAL**3 / 3, INTERVAL
    cross = INTERVAL**2 / 2
    prior = prior_of(SCENE)
    return Model(
        np.kron([[1.0, INTERVAL], [0.0, 1.0]], np.eye(2)),
        PSD * np.kron([[position, cross], [cross, velocity]], np.eye(2)),
        np.eye(2, 4),
        NOISE_SD**2 * np.eye(2),
        DETECTION_PROBABILITY,
        GATE_PROBABILITY,
        float(chi2.ppf(GATE_PROBABILITY, 2)),
        CLUTTER_PER_SCAN / SIDE**2,
        prior.mean,
        prior.covariance,
    )
