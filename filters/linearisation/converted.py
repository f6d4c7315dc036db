"""Converted measurements: each detection becomes a position with a covariance of its own.

The sensor's model says how (see models/sensor/position_of). Positions stand first in the state, so
H = (I 0) is exact. Densities change by the volume that the conversion stretches: the clutter's
intensity among positions is that among measurements divided by |dy / dz|.

Source: Lerro and Bar-Shalom (1993), IEEE Transactions on Aerospace and Electronic Systems 29(3),
Tracking with debiased consistent converted measurements versus EKF.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

from filters.cholesky import squared_distance
from filters.compiled import helper
from filters.hypotheses import Component, Hypotheses, own_covariance
from filters.linearisation.prediction import add_correction, condition, factorise_innovation
from filters.linearisation.room import UpdateRoom
from filters.models.contract import SensorModel


class Converted(NamedTuple):
    """Converting has no settings."""

    none: int = 0


@helper
def positions_are_measured(
    n: int,
    m: int,
    how: Any,
    sensor: SensorModel,
    site: Any,
    component: Component,
    hypotheses: Hypotheses,
    room: UpdateRoom,
) -> bool:
    """Fill H = (I 0): all that detections share."""
    for k in range(m):
        for i in range(n):
            room.prediction[0].jacobian[k, i] = 1.0 if i == k else 0.0
    return True


@helper
def compare_positions(
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
    """Squared distance of a detection's position, infinite if it has none."""
    out = room.prediction[0]
    stretch = sensor.convert(sensor.parameters, site, detection, out.converted[:])
    for k in range(m):
        out.innovation[k] = out.converted[0, k] - component.mean[k]
        for i in range(m):
            out.noise[k, i] = out.converted[k + 1, i]
    covariance = hypotheses.covariances[2 * component.slot]
    if not (stretch > 0.0 and factorise_innovation(n, m, covariance, out)):
        return math.inf
    out.log_peak += math.log(stretch)
    return squared_distance(m, out.factor, out.innovation, out.solved)


@helper
def given_position(
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
    """Write mean and a covariance of the row's own, as `given_measurement` does."""
    out, own = room.prediction[0], own_covariance(hypotheses, row)
    covariance = hypotheses.covariances[2 * component.slot]
    condition(n, m, covariance, hypotheses.covariances[own], out)
    add_correction(n, m, component.mean, out, hypotheses.means[row])
    hypotheses.table[row].covariance = own
    return out.log_peak - 0.5 * hypotheses.table[row].distance
