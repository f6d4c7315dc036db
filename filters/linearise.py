"""What a Gaussian says of the measurement: its expected value and spread, and the gain.

First order: the sensor's functions are taken at the mean and its Jacobian carries the covariance.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from filters.cholesky import factorise
from filters.compiled import helper
from filters.gaussian import condition_covariance, gain, innovation_covariance
from filters.models.contract import SensorModel
from filters.records import zeroed_records


def room_for_prediction(n: int, m: int) -> np.ndarray:
    """Room for what one component predicts of a scan's measurement: one record."""
    return zeroed_records(
        1,
        [
            ("measurement", float, (m,)),  # expected
            ("jacobian", float, (m, n)),
            ("noise", float, (m, m)),
            ("filled", bool),  # these two hold values, good for as long as they are constant
            ("cross", float, (n, m)),  # covariance of state and measurement
            ("spread", float, (m, m)),  # covariance of the innovation
            ("factor", float, (m, m)),  # its Cholesky factor, see cholesky
            ("gain", float, (n, m)),
            ("work", float, (2, n, n)),
        ],
    )


@helper
def first_order(
    n: int,
    m: int,
    sensor: SensorModel,
    site: Any,
    mean: Any,
    covariance: Any,
    conditioned: Any,
    out: Any,
) -> bool:
    """Fill `out` and write the covariance of the state given any detection into `conditioned`.

    mean (n,); covariance, conditioned (n, n); out, the record of room_for_prediction.
    returns     False if the innovation covariance is not positive definite; nothing can be said of
                the scan then
    """
    sensor.measure(sensor.parameters, site, mean, out.measurement[:])
    if not (sensor.linear and out.filled):
        sensor.jacobian(sensor.parameters, site, mean, out.jacobian[:])
    if not (sensor.same_noise and out.filled):
        sensor.noise(sensor.parameters, site, mean, out.noise[:])
    out.filled = True
    innovation_covariance(n, m, out.jacobian, out.noise, covariance, out.cross, out.spread)
    if not factorise(m, out.spread, out.factor):
        return False
    gain(n, m, out.cross, out.factor, out.gain)
    condition_covariance(
        n, m, out.gain, out.cross, out.jacobian, out.noise, covariance, out.work, conditioned
    )
    return True
