"""Tasks of a small invented scene: a point in clutter on a plane, two cheap strategies."""

from __future__ import annotations

import pytest

from filters.strategies import KnownAssociation, NearestNeighbour, ProbabilisticDataAssociation
from harness.study.schema import Gospa, Scene, TrackLoss
from harness.trials.score import ScoringRules
from harness.trials.task import Task, TaskCase, spans_of

SCENE = Scene.model_validate(
    {
        "scans": 12,
        "scan_interval_s": 1.0,
        "target": {
            "motion": "nearly-constant-velocity",
            "acceleration_psd_m2_per_s3": 0.05,
            "start_position_m": [0.0, 0.0],
            "start_velocity_m_per_s": [5.0, 0.0],
            "start_position_sd_m": [10.0, 10.0],
            "start_velocity_sd_m_per_s": [1.0, 1.0],
        },
        "sensor": {
            "kind": "position",
            "noise_sd_m": 10.0,
            "detection_probability": 0.8,
            "clutter_density_per_m2": 2e-4,
            "region_m": [[-300.0, 300.0], [-300.0, 300.0]],
        },
    }
)
RULES = ScoringRules(
    TrackLoss(error_above_m=60.0, for_scans=3), Gospa(cutoff_m=40.0, order=2), first_scan=1
)
STRATEGIES = {
    "nearest": NearestNeighbour(kind="nearest-neighbour"),
    "pda": ProbabilisticDataAssociation(kind="pda"),
    "known": KnownAssociation(kind="known-association"),
}


@pytest.fixture
def make_task():
    """A function that makes tasks: how many trials, which strategies."""

    def make(trials=250, strategies=("nearest", "pda", "known"), seed=11, rules=RULES):
        cases = tuple(TaskCase(name, STRATEGIES[name], SCENE) for name in strategies)
        return Task(SCENE, rules, cases, tuple(spans_of(trials)), seed, "test")

    return make
