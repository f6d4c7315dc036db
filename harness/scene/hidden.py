"""What is true of scenes and told to no strategy, as the kernel that draws detections takes it."""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np
from scipy.stats import gamma

from filters.compiled import kernel
from filters.models.contract import SensorModel
from filters.random_numbers import CLUTTER_LEVEL, Numbers, open_at, uniform
from harness.scene.persistent_clutter import PersistentPoints, draw_persistent_points
from harness.study.schema import Scene


class Hidden(NamedTuple):
    """Truth behind the detections of a batch of trials that no model holds."""

    bias: np.ndarray  # (m,) SI, added to the target's measurements
    persistence: float  # correlation of being detected from one scan to the next
    clutter_levels: np.ndarray  # (trials, scans) factor on the clutter
    points: PersistentPoints


def hidden_truth(
    scene: Scene, sensor: SensorModel, numbers: Numbers, first_trial: int, trials: int
) -> Hidden:
    """Draw what the scene has of it for consecutive trials."""
    stated = scene.unmodelled
    bias = np.zeros(scene.sensor.measurement_size)
    if stated.measurement_bias is not None:
        bias += np.array(stated.measurement_bias) * scene.sensor.units()
    return Hidden(
        bias,
        stated.detection_persistence,
        _clutter_levels(scene, numbers, first_trial, trials),
        draw_persistent_points(scene, sensor, numbers, first_trial, trials),
    )


@functools.cache
def _level_kernel() -> Callable[..., None]:
    @kernel
    def draw_levels(first_trial: int, numbers: Numbers, levels: Any) -> None:
        for trial in range(levels.shape[0]):
            for k in range(levels.shape[1]):
                open_at(numbers, first_trial + trial, CLUTTER_LEVEL, k)
                levels[trial, k] = uniform(numbers)

    return draw_levels


def _clutter_levels(scene: Scene, numbers: Numbers, first_trial: int, trials: int) -> np.ndarray:
    """Factors of mean 1: gamma-distributed, so that counts are negative binomial."""
    levels = np.ones((trials, scene.scan_count))
    sd = scene.unmodelled.clutter_factor_sd
    if sd > 0.0:
        _level_kernel()(first_trial, numbers, levels)
        levels = gamma.ppf(levels, 1.0 / sd**2, scale=sd**2)
    return levels
