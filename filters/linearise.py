"""What a Gaussian says of the measurement: its expected value and spread, and the gain.

First order: the sensor's functions are taken at the mean and its Jacobian carries the covariance.
"""

from __future__ import annotations

from typing import Any, NamedTuple

from filters.cholesky import factorise
from filters.compiled import helper
from filters.gaussian import condition_covariance, gain, innovation_covariance
from filters.models.contract import SensorModel


class Prediction(NamedTuple):
    """Room for what one component predicts of a scan's measurement."""

    measurement: Any  # (m,) expected
    jacobian: Any  # (m, n)
    noise: Any  # (m, m)
    cross: Any  # (n, m) covariance of state and measurement
    spread: Any  # (m, m) covariance of the innovation
    factor: Any  # (m, m) its Cholesky factor, see cholesky
    gain: Any  # (n, m)
    work: Any  # (2, n, n)
    filled: Any  # (1,) bool: jacobian and noise hold values, good for as long as they are constant


@helper
def first_order(
    n: int,
    m: int,
    sensor: SensorModel,
    site: Any,
    mean: Any,
    covariance: Any,
    conditioned: Any,
    out: Prediction,
) -> bool:
    """Fill `out` and write the covariance of the state given any detection into `conditioned`.

    mean (n,); covariance, conditioned (n, n). False if the innovation covariance is not positive
    definite; nothing can be said of the scan then.
    """
    sensor.measure(sensor.parameters, site, mean, out.measurement)
    if not (sensor.linear and out.filled[0]):
        sensor.jacobian(sensor.parameters, site, mean, out.jacobian)
    if not (sensor.same_noise and out.filled[0]):
        sensor.noise(sensor.parameters, site, mean, out.noise)
    out.filled[0] = True
    innovation_covariance(n, m, out.jacobian, out.noise, covariance, out.cross, out.spread)
    if not factorise(m, out.spread, out.factor):
        return False
    gain(n, m, out.cross, out.factor, out.gain)
    condition_covariance(
        n, m, out.gain, out.cross, out.jacobian, out.noise, covariance, out.work, conditioned
    )
    return True
