"""From a linear sensor to the gain: what follows from H and R.

A linearisation fills in the expected measurement z, a matrix H and a covariance R, as if the sensor
were z + H (x - mean) with noise of covariance R.
"""

from __future__ import annotations

import math
from typing import Any

from filters.cholesky import factorise, inverse_root_determinant
from filters.compiled import helper
from filters.gaussian import condition_covariance, gain, innovation_covariance


@helper
def factorise_innovation(n: int, m: int, covariance: Any, out: Any) -> bool:
    """Fill cross, spread, factor and log_peak from H and R; False if S is not positive definite."""
    innovation_covariance(n, m, out.jacobian, out.noise, covariance, out.cross, out.spread)
    if not factorise(m, out.spread, out.factor):
        return False
    out.log_peak = math.log(inverse_root_determinant(m, out.factor))
    return True


@helper
def condition(n: int, m: int, covariance: Any, conditioned: Any, out: Any) -> None:
    """Fill the gain, and write the covariance of the state given any detection."""
    gain(n, m, out.cross, out.factor, out.gain)
    condition_covariance(
        n, m, out.gain, out.cross, out.jacobian, out.noise, covariance, out.work, conditioned
    )


@helper
def add_correction(n: int, m: int, mean: Any, out: Any, estimate: Any) -> None:
    """Write mean + K innovation, (n,)."""
    for i in range(n):
        value = mean[i]
        for k in range(m):
            value += out.gain[i, k] * out.innovation[k]
        estimate[i] = value
