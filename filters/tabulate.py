"""Model functions at many states in one call, for filters written in NumPy.

What a model function raises comes out as CompiledCodeError.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from filters.compiled import kernel, raising_what_compiled_code_raised
from filters.models.contract import ClutterModel, DetectionModel, MotionModel, SensorModel


class Moved(NamedTuple):
    """What a motion makes of states over an interval."""

    states: np.ndarray  # (K, n) expected
    noise: np.ndarray  # (K, n, n) covariance of the disturbance
    jacobian: np.ndarray  # (K, n, n)


class Seen(NamedTuple):
    """What a sensor makes of states at one scan."""

    measurements: np.ndarray  # (K, m) expected
    noise: np.ndarray  # (K, m, m) covariance
    jacobian: np.ndarray  # (K, m, n); not finite where the sensor has none
    detected: np.ndarray  # (K,) PD


def move(motion: MotionModel, interval: float, states: np.ndarray) -> Moved:
    """Tabulate a motion at states (K, n); interval in s."""
    count, n = states.shape
    out = Moved(np.empty((count, n)), np.empty((count, n, n)), np.empty((count, n, n)))
    with raising_what_compiled_code_raised():
        _move(motion, float(interval), np.ascontiguousarray(states), out)
    return out


def see(
    sensor: SensorModel, detection: DetectionModel, site: np.ndarray, states: np.ndarray
) -> Seen:
    """Tabulate a sensor and a detection law at states (K, n); site as in `contract`."""
    (count, n), m = states.shape, len(sensor.periods)
    out = Seen(
        np.empty((count, m)), np.empty((count, m, m)), np.empty((count, m, n)), np.empty(count)
    )
    with raising_what_compiled_code_raised():
        _see(sensor, detection, site, np.ascontiguousarray(states), out)
    return out


def clutter_at(clutter: ClutterModel, site: np.ndarray, detections: np.ndarray) -> np.ndarray:
    """Intensity of clutter at detections (M, m), (M,)."""
    out = np.empty(len(detections))
    with raising_what_compiled_code_raised():
        _clutter_at(clutter, site, np.ascontiguousarray(detections), out)
    return out


@kernel
def _move(motion: MotionModel, interval: float, states: Any, out: Moved) -> None:
    for i in range(states.shape[0]):
        motion.transition(motion.parameters, interval, states[i], out.states[i])
        motion.process_noise(motion.parameters, interval, states[i], out.noise[i])
        motion.jacobian(motion.parameters, interval, states[i], out.jacobian[i])


@kernel
def _see(sensor: SensorModel, detection: DetectionModel, site: Any, states: Any, out: Seen) -> None:
    for i in range(states.shape[0]):
        sensor.measure(sensor.parameters, site, states[i], out.measurements[i])
        sensor.noise(sensor.parameters, site, states[i], out.noise[i])
        sensor.jacobian(sensor.parameters, site, states[i], out.jacobian[i])
        out.detected[i] = detection.probability(detection.parameters, site, states[i])


@kernel
def _clutter_at(clutter: ClutterModel, site: Any, detections: Any, out: Any) -> None:
    for j in range(detections.shape[0]):
        out[j] = clutter.intensity(clutter.parameters, site, detections[j])
