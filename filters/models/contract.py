"""What a model hands to the kernels: functions of fixed signatures, and their numbers.

Every function works on one state. A state holds the position's axes first, then the velocity's,
then whatever else the motion needs; so with `axes` axes the velocity is state[axes : 2 * axes].
A site holds the sensor's position and velocity at one scan, in the same order. Outputs are written
into the last argument. All SI, angles in radians.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np
from numba import types

VECTOR = types.Array(types.float64, 1, "C")
MATRIX = types.Array(types.float64, 2, "C")

# motion: (parameters, interval in s, state, out)
STATE_AFTER = types.void(VECTOR, types.float64, VECTOR, VECTOR)
STATE_MATRIX = types.void(VECTOR, types.float64, VECTOR, MATRIX)
# sensor: (parameters, site, state, out)
MEASUREMENT_OF = types.void(VECTOR, VECTOR, VECTOR, VECTOR)
MEASUREMENT_MATRIX = types.void(VECTOR, VECTOR, VECTOR, MATRIX)
# sensor: (parameters, site, measurement, out) -> |d position / d measurement|; out (m + 1, m): the
# position, then its covariance
CONVERSION = types.float64(VECTOR, VECTOR, VECTOR, MATRIX)
# detection: (parameters, site, state); clutter: (parameters, site, measurement)
SCALAR_OF = types.float64(VECTOR, VECTOR, VECTOR)


class MotionModel(NamedTuple):
    """How a state moves over an interval."""

    transition: Callable[..., Any]  # STATE_AFTER: expected state after the interval
    jacobian: Callable[..., Any]  # STATE_MATRIX: d transition / d state, (n, n)
    process_noise: Callable[..., Any]  # STATE_MATRIX: covariance of the disturbance, (n, n)
    parameters: np.ndarray  # (any,)
    linear: bool  # jacobian and process noise do not depend on the state


class SensorModel(NamedTuple):
    """What a sensor measures of a state."""

    measure: Callable[..., Any]  # MEASUREMENT_OF: expected measurement, (m,)
    jacobian: Callable[..., Any]  # MEASUREMENT_MATRIX: d measure / d state, (m, n)
    noise: Callable[..., Any]  # MEASUREMENT_MATRIX: covariance of the noise, (m, m)
    convert: Callable[..., Any]  # CONVERSION of a detection into a position
    same_noise: bool  # the noise depends neither on the state nor on the site
    parameters: np.ndarray  # (any,)
    sites: np.ndarray  # (scans, 2 * axes) m and m/s; or (1, 2 * axes) for a fixed sensor
    periods: np.ndarray  # (m,) 2 pi for an angle that wraps, 0 for anything else
    region_centre: np.ndarray  # (m,) the box in which detections are reported
    region_half_width: np.ndarray  # (m,)
    linear: bool = False  # the jacobian depends neither on the state nor on the site


class DetectionModel(NamedTuple):
    """How probably a target in a state is detected at a scan."""

    probability: Callable[..., Any]  # SCALAR_OF (parameters, site, state)
    parameters: np.ndarray


class ClutterModel(NamedTuple):
    """Intensity of the Poisson process of false detections, per scan and unit of measurement.

    It is drawn as a sum of processes: one in each box of a partition of the region, and one of each
    bump. A box's bound is at least the intensity in it, but for what the bumps add.
    """

    intensity: Callable[..., Any]  # SCALAR_OF (parameters, site, measurement)
    parameters: np.ndarray
    boxes: np.ndarray  # (any, 2 m + 1) centre, half width, and the bound of the intensity
    bumps: np.ndarray  # (any, 2 m + 1) centre and standard deviation of a Gaussian, and its number


class Models(NamedTuple):
    """Everything that kernels know of target and sensor."""

    motion: MotionModel
    sensor: SensorModel
    detection: DetectionModel
    clutter: ClutterModel
