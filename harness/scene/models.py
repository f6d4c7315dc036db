"""What kernels know of a scene's target and sensor."""

from __future__ import annotations

from filters.models.contract import Models
from harness.study.schema import Scene


def models_of(scene: Scene) -> Models:
    """Functions and parameters of a scene's target and sensor, for the kernels.

    What is unmodelled, and legs, are no part of them.
    """
    sensor, times = scene.sensor, scene.scan_times()
    return Models(
        scene.target.motion_model(),
        sensor.sensor_model(times),
        sensor.detection_model(),
        sensor.clutter_model(times),
    )
