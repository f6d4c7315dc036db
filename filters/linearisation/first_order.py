"""First order: the sensor's functions are taken at the mean, its Jacobian carries the covariance.

Source: the extended Kalman filter, e.g. Bar-Shalom, Li and Kirubarajan (2001), section 10.3.
"""

from __future__ import annotations

from typing import Any, NamedTuple

from filters.cholesky import squared_distance
from filters.compiled import helper
from filters.gaussian import predict_covariance
from filters.hypotheses import Component, Hypotheses
from filters.linearisation.prediction import add_correction, condition, factorise_innovation
from filters.linearisation.room import UpdateRoom
from filters.measurement_difference import difference
from filters.models.contract import MotionModel, SensorModel


class ByJacobian(NamedTuple):
    """First order has no settings."""

    none: int = 0


@helper
def move_by_jacobian(
    n: int,
    how: Any,
    motion: MotionModel,
    interval: float,
    mean: Any,
    covariance: Any,
    step: Any,
    predicted: Any,
    room: UpdateRoom,
) -> None:
    """Move a Gaussian on over an interval, s: step.expected (n,) and predicted (n, n).

    step holds the motion's Jacobian and noise at the mean.
    """
    motion.transition(motion.parameters, interval, mean, step.expected[:])
    predict_covariance(n, step.transition, step.disturbance, covariance, step.square, predicted)


@helper
def first_order(
    n: int,
    m: int,
    how: Any,
    sensor: SensorModel,
    site: Any,
    component: Component,
    hypotheses: Hypotheses,
    room: UpdateRoom,
) -> bool:
    """Fill the prediction, and write the covariance of the state given any detection.

    returns     False if the innovation covariance is not positive definite
    """
    out, mean = room.prediction[0], component.mean
    covariance = hypotheses.covariances[2 * component.slot]
    conditioned = hypotheses.covariances[2 * component.slot + 1]
    sensor.measure(sensor.parameters, site, mean, out.measurement[:])
    if not (sensor.linear and out.filled):
        sensor.jacobian(sensor.parameters, site, mean, out.jacobian[:])
    if not (sensor.same_noise and out.filled):
        sensor.noise(sensor.parameters, site, mean, out.noise[:])
    out.filled = True
    if not factorise_innovation(n, m, covariance, out):
        return False
    condition(n, m, covariance, conditioned, out)
    return True


@helper
def compare_measurements(
    n: int,
    m: int,
    how: Any,
    sensor: SensorModel,
    site: Any,
    component: Component,
    hypotheses: Hypotheses,
    detection: Any,
    room: UpdateRoom,
) -> float:
    """Squared distance of a detection (m,)."""
    out = room.prediction[0]
    difference(m, sensor.periods, detection, out.measurement, out.innovation)
    return squared_distance(m, out.factor, out.innovation, out.solved)


@helper
def given_measurement(
    n: int,
    m: int,
    how: Any,
    sensor: SensorModel,
    site: Any,
    component: Component,
    hypotheses: Hypotheses,
    detection: Any,
    row: int,
    room: UpdateRoom,
) -> float:
    """Write mean and place of covariance of a row whose distance is known.

    returns     log density of the detection, less -m/2 log 2 pi
    """
    out = room.prediction[0]
    add_correction(n, m, component.mean, out, hypotheses.means[row])
    hypotheses.table[row].covariance = 2 * component.slot + 1
    return out.log_peak - 0.5 * hypotheses.table[row].distance
