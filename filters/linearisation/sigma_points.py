"""Sigma points: expected values and covariances by a rule over the Gaussian, no Jacobian.

With points xi of weights w, states x = mean + L xi and offsets d = h(x) - expected measurement,

    cov(x, z) = L G,  G = sum w xi d'      cov(z) = sum w d d' + R

which is what a linear sensor H = (L^-T G)' with noise R + sum w d d' - G' G would give. So the
covariance is updated by Joseph's form and stays positive definite. Angles are averaged as offsets
from the measurement of the mean, the short way round.

Source: statistical linear regression, Lefebvre, Bruyninckx and De Schutter (2002), IEEE
Transactions on Automatic Control 47(8); Sarkka (2013), Bayesian Filtering and Smoothing, ch. 5, 6.
"""

from __future__ import annotations

from typing import Any

from filters.cholesky import factorise_semidefinite
from filters.compiled import helper
from filters.hypotheses import Component, Hypotheses
from filters.linearisation.prediction import condition, factorise_innovation
from filters.linearisation.room import PointRoom, UpdateRoom
from filters.linearisation.rules import PointRule
from filters.measurement_difference import difference
from filters.models.contract import MotionModel, SensorModel


@helper
def place_points(n: int, rule: PointRule, mean: Any, covariance: Any, room: PointRoom) -> None:
    """Write the states of a rule's points; room.root becomes L."""
    factorise_semidefinite(n, covariance, room.root)
    for i in range(rule.points.shape[0]):
        for row in range(n):
            value = mean[row]
            for k in range(row + 1):
                value += room.root[row, k] * rule.points[i, k]
            room.states[i, row] = value


@helper
def move_by_points(
    n: int,
    how: PointRule,
    motion: MotionModel,
    interval: float,
    mean: Any,
    covariance: Any,
    step: Any,
    predicted: Any,
    room: UpdateRoom,
) -> None:
    """Move a Gaussian on, as `move_by_jacobian` does; the noise is that at the mean."""
    states, moved = room.points.states, room.points.moved
    place_points(n, how, mean, covariance, room.points)
    count = how.points.shape[0]
    for i in range(count):
        motion.transition(motion.parameters, interval, states[i], moved[i])
    for row in range(n):
        value = 0.0
        for i in range(count):
            value += how.mean_weights[i] * moved[i, row]
        step.expected[row] = value
    for row in range(n):
        for column in range(row + 1):
            value = step.disturbance[row, column]
            for i in range(count):
                offset = how.weights[i] * (moved[i, row] - step.expected[row])
                value += offset * (moved[i, column] - step.expected[column])
            predicted[row, column] = value
            predicted[column, row] = value


@helper
def _measure_points(
    m: int, sensor: SensorModel, site: Any, rule: PointRule, mean: Any, room: PointRoom, out: Any
) -> None:
    """Fill the expected measurement; room.measured becomes the points' offsets from it."""
    count = rule.points.shape[0]
    reference, middle = out.reference, out.middle
    sensor.measure(sensor.parameters, site, mean, out.measurement[:])
    for k in range(m):
        reference[k] = out.measurement[k]
        middle[k] = 0.0
    for i in range(count):
        sensor.measure(sensor.parameters, site, room.states[i], room.measured[i])
        difference(m, sensor.periods, room.measured[i], reference, room.measured[i])
        for k in range(m):
            middle[k] += rule.mean_weights[i] * room.measured[i, k]
    for k in range(m):
        out.measurement[k] = reference[k] + middle[k]
        for i in range(count):
            room.measured[i, k] -= middle[k]


@helper
def _expect_noise(
    m: int, sensor: SensorModel, site: Any, rule: PointRule, mean: Any, room: PointRoom, out: Any
) -> None:
    """Fill R, averaged over the points where it differs between them."""
    sensor.noise(sensor.parameters, site, mean, out.noise[:])
    if sensor.same_noise:
        return
    for row in range(m):
        for column in range(m):
            out.noise[row, column] = 0.0
    for i in range(rule.points.shape[0]):
        sensor.noise(sensor.parameters, site, room.states[i], out.point_noise[:])
        for row in range(m):
            for column in range(m):
                out.noise[row, column] += rule.mean_weights[i] * out.point_noise[row, column]


@helper
def _regress(n: int, m: int, rule: PointRule, room: PointRoom, out: Any) -> None:
    """Fill H from L and G, and add what it leaves of the measurements' spread to R."""
    across = out.cross  # G, (n, m), until the innovation takes its place
    count = rule.points.shape[0]
    for row in range(n):
        for k in range(m):
            value = 0.0
            for i in range(count):
                value += rule.weights[i] * rule.points[i, row] * room.measured[i, k]
            across[row, k] = value
    for k in range(m):  # H' = L^-T G, backward
        for row in range(n - 1, -1, -1):
            value = across[row, k]
            for j in range(row + 1, n):
                value -= room.root[j, row] * out.jacobian[k, j]
            out.jacobian[k, row] = value / room.root[row, row] if room.root[row, row] > 0.0 else 0.0
    for row in range(m):
        for column in range(m):
            value = 0.0
            for i in range(count):
                value += rule.weights[i] * room.measured[i, row] * room.measured[i, column]
            for j in range(n):
                value -= across[j, row] * across[j, column]
            out.noise[row, column] += value


@helper
def by_sigma_points(
    n: int,
    m: int,
    how: PointRule,
    sensor: SensorModel,
    site: Any,
    component: Component,
    hypotheses: Hypotheses,
    room: UpdateRoom,
) -> bool:
    """Fill the prediction as `first_order` does."""
    out, points, mean = room.prediction[0], room.points, component.mean
    covariance = hypotheses.covariances[2 * component.slot]
    conditioned = hypotheses.covariances[2 * component.slot + 1]
    place_points(n, how, mean, covariance, points)
    _measure_points(m, sensor, site, how, mean, points, out)
    _expect_noise(m, sensor, site, how, mean, points, out)
    _regress(n, m, how, points, out)
    if not factorise_innovation(n, m, covariance, out):
        return False
    condition(n, m, covariance, conditioned, out)
    return True
