"""Detections as positions, debiased: for sensors whose measurement fixes one.

Noise of an angle draws converted positions towards the sensor. The mean of that bias is taken away,
and the covariance is the average over what the true range and angles may be, given those measured.

Source: Lerro and Bar-Shalom (1993), IEEE Transactions on Aerospace and Electronic Systems 29(3),
eqs. 10 to 14, from memory; in space by the same steps, with the elevation's moments beside those of
the azimuth.
"""

from __future__ import annotations

import math
from typing import Any

from filters.compiled import helper, model_function
from filters.models.contract import CONVERSION
from filters.models.geometry import range_between
from filters.models.over_range import table_value


@model_function(CONVERSION)
def no_position(parameters: Any, site: Any, measurement: Any, out: Any) -> float:
    """A measurement that fixes no position: nothing can be said."""
    return 0.0


@model_function(CONVERSION)
def position_as_measured(parameters: Any, site: Any, measurement: Any, out: Any) -> float:
    """A measurement that is a position already; its noise may grow with range."""
    m = measurement.shape[0]
    factor = _range_noise_factor(parameters, m, range_between(m, measurement, site))
    out[:] = 0.0
    for axis in range(m):
        out[0, axis] = measurement[axis]
        out[axis + 1, axis] = (factor * parameters[axis]) ** 2
    return 1.0


@helper
def _range_noise_factor(parameters: Any, m: int, distance: float) -> float:
    """Factor of the noise at a measured range; 1 without a table."""
    return table_value(parameters, m, distance) if parameters[m] > 0.0 else 1.0


@helper
def debias(
    distance: float,
    azimuth: float,
    elevation: float,
    variances: tuple[float, float, float],
    out: Any,
) -> None:
    """Write position and covariance of a measured range, azimuth and elevation.

    variances of the three, m2 and rad2; out (4, 3), or (3, 2) in a plane with elevation 0 +- 0.
    """
    of_range, s, t = variances
    once = distance * distance + of_range  # mean square of the true range
    twice = once + of_range  # of one more range drawn around that
    across, up = math.exp(-s), math.exp(-t)
    cos_a, sin_a = math.cos(azimuth), math.sin(azimuth)
    cos_e, sin_e = math.cos(elevation), math.sin(elevation)
    cos_2a, sin_2a = math.cos(2 * azimuth), math.sin(2 * azimuth)
    cos_2e, sin_2e = math.cos(2 * elevation), math.sin(2 * elevation)
    # Means of cos^2, sin^2 and sin cos of an angle around that measured: drawn twice, and once.
    cc2, ss2, sc2 = (
        0.5 + 0.5 * across**4 * cos_2a,
        0.5 - 0.5 * across**4 * cos_2a,
        0.5 * across**4 * sin_2a,
    )
    cc1, ss1, sc1 = (
        0.5 + 0.5 * across**2 * cos_2a,
        0.5 - 0.5 * across**2 * cos_2a,
        0.5 * across**2 * sin_2a,
    )
    flat2, flat1 = 0.5 + 0.5 * up**4 * cos_2e, 0.5 + 0.5 * up**2 * cos_2e
    shrink = across * up

    keep = 1.0 - (shrink - math.sqrt(shrink))
    out[0, 0] = distance * cos_e * cos_a * keep
    out[0, 1] = distance * cos_e * sin_a * keep
    out[1, 0] = twice * cc2 * flat2 - once * shrink * cc1 * flat1
    out[2, 1] = twice * ss2 * flat2 - once * shrink * ss1 * flat1
    out[1, 1] = twice * sc2 * flat2 - once * shrink * sc1 * flat1
    out[2, 0] = out[1, 1]
    if out.shape[1] == 3:
        out[0, 2] = distance * sin_e * (1.0 - (up - math.sqrt(up)))
        out[3, 2] = twice * (0.5 - 0.5 * up**4 * cos_2e) - once * up * (0.5 - 0.5 * up**2 * cos_2e)
        slant = 0.5 * sin_2e * across * (twice * up**4 - once * up**3)
        out[1, 2] = cos_a * slant
        out[2, 2] = sin_a * slant
        out[3, 0] = out[1, 2]
        out[3, 1] = out[2, 2]


@helper
def _beside_site(site: Any, out: Any) -> None:
    for axis in range(out.shape[1]):
        out[0, axis] += site[axis]


@model_function(CONVERSION)
def position_of_range_and_bearing(parameters: Any, site: Any, measurement: Any, out: Any) -> float:
    """Position of a detection of range and bearing."""
    distance = measurement[0]
    factor = _range_noise_factor(parameters, 2, distance)
    variances = ((factor * parameters[0]) ** 2, (factor * parameters[1]) ** 2, 0.0)
    debias(distance, measurement[1], 0.0, variances, out)
    _beside_site(site, out)
    return distance


@model_function(CONVERSION)
def position_of_range_azimuth_and_elevation(
    parameters: Any, site: Any, measurement: Any, out: Any
) -> float:
    """Position of a detection of range, azimuth and elevation."""
    distance = measurement[0]
    factor = _range_noise_factor(parameters, 3, distance)
    variances = (
        (factor * parameters[0]) ** 2,
        (factor * parameters[1]) ** 2,
        (factor * parameters[2]) ** 2,
    )
    debias(distance, measurement[1], measurement[2], variances, out)
    _beside_site(site, out)
    return distance * distance * math.cos(measurement[2])
