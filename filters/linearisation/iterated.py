"""Iterated: linearise again at the estimate that each detection leads to, until it stays put.

Gauss-Newton steps towards the most probable state given the prediction and the detection. The
detection's density is that of the last linearisation, which is Laplace's approximation there. The
gate is that of first order.

Source: Bell and Cathey (1993), IEEE Transactions on Automatic Control 38(2), The iterated Kalman
filter update as a Gauss-Newton method.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

from filters.cholesky import squared_distance
from filters.compiled import helper
from filters.hypotheses import Component, Hypotheses, own_covariance
from filters.linearisation.first_order import given_measurement
from filters.linearisation.prediction import add_correction, condition, factorise_innovation
from filters.linearisation.room import UpdateRoom
from filters.measurement_difference import difference
from filters.models.contract import SensorModel

# Steps end when they move no entry of the state by more than this share of its deviation.
_STAYS_PUT = 1e-6


class Iterated(NamedTuple):
    """Settings of the iterated linearisation."""

    at_most: int  # steps


@helper
def _linearise_at(
    n: int, m: int, sensor: SensorModel, site: Any, covariance: Any, conditioned: Any, out: Any
) -> bool:
    """Linearise at out.state; False if the innovation covariance is not positive definite."""
    sensor.measure(sensor.parameters, site, out.state[:], out.measurement[:])
    sensor.jacobian(sensor.parameters, site, out.state[:], out.jacobian[:])
    sensor.noise(sensor.parameters, site, out.state[:], out.noise[:])
    if not factorise_innovation(n, m, covariance, out):
        return False
    condition(n, m, covariance, conditioned, out)
    return True


@helper
def _innovate_at(n: int, m: int, periods: Any, detection: Any, mean: Any, out: Any) -> None:
    """Fill the innovation z - h(x) - H (mean - x) of a linearisation at x."""
    difference(m, periods, detection, out.measurement, out.innovation)
    for k in range(m):
        for i in range(n):
            out.innovation[k] -= out.jacobian[k, i] * (mean[i] - out.state[i])


@helper
def _moved(n: int, covariance: Any, before: Any, after: Any) -> float:
    """Longest step along an entry of the state, in its deviations."""
    longest = 0.0
    for i in range(n):
        longest = max(longest, abs(after[i] - before[i]) / math.sqrt(covariance[i, i]))
    return longest


@helper
def given_iterated(
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
    """Improve on first order step by step; where a step fails, first order stands."""
    log_density = given_measurement(
        n, m, how, sensor, site, component, hypotheses, detection, row, room
    )
    mean, estimate, out = component.mean, hypotheses.means[row], room.prediction[1]
    covariance = hypotheses.covariances[2 * component.slot]
    own = own_covariance(hypotheses, row)
    for i in range(n):
        out.state[i] = estimate[i]
    for _ in range(how.at_most):
        if not _linearise_at(n, m, sensor, site, covariance, hypotheses.covariances[own], out):
            return log_density
        _innovate_at(n, m, sensor.periods, detection, mean, out)
        distance = squared_distance(m, out.factor, out.innovation, out.solved)
        if not distance < math.inf:
            return log_density
        add_correction(n, m, mean, out, estimate)
        log_density = out.log_peak - 0.5 * distance
        hypotheses.table[row].covariance = own
        moved = _moved(n, covariance, out.state, estimate)
        for i in range(n):
            out.state[i] = estimate[i]
        if moved < _STAYS_PUT:
            break
    return log_density
