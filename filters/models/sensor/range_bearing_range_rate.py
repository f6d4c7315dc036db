"""A sensor in a plane that measures range, bearing and range rate, such as a Doppler radar.

The range rate is relative to the sensor's own motion, positive when the range grows.
"""

from __future__ import annotations

import math
from typing import Any, ClassVar, Literal

from filters.compiled import model_function
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF
from filters.models.geometry import range_rate_between
from filters.models.record import Interval, NonNegative, Positive
from filters.models.sensor.sensor import Sensor


@model_function(MEASUREMENT_OF)
def range_bearing_and_rate(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Range, bearing and range rate from the site to the state."""
    east, north = state[0] - site[0], state[1] - site[1]
    out[0] = math.sqrt(east * east + north * north)
    out[1] = math.atan2(north, east)
    out[2] = range_rate_between(2, state, site)


@model_function(MEASUREMENT_MATRIX)
def range_bearing_and_rate_jacobian(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Derivative of range_bearing_and_rate with respect to the state."""
    east, north = state[0] - site[0], state[1] - site[1]
    square = east * east + north * north
    distance = math.sqrt(square)
    east_unit, north_unit = east / distance, north / distance
    rate = range_rate_between(2, state, site)
    out[:] = 0.0
    out[0, 0] = east_unit
    out[0, 1] = north_unit
    out[1, 0] = -north / square
    out[1, 1] = east / square
    # The velocity's part across the line of sight, over the range.
    out[2, 0] = (state[2] - site[2] - rate * east_unit) / distance
    out[2, 1] = (state[3] - site[3] - rate * north_unit) / distance
    out[2, 2] = east_unit
    out[2, 3] = north_unit


class RangeBearingRangeRateSensor(Sensor):
    """Range, bearing and range rate from a site, with independent noise."""

    kind: Literal["range-bearing-range-rate"]
    """Which sensor: range, bearing and range rate in a plane."""
    noise_sd_range_m: Positive
    """Standard deviation of the noise of the range, m."""
    noise_sd_bearing_deg: Positive
    """Standard deviation of the noise of the bearing, deg."""
    noise_sd_range_rate_m_per_s: Positive
    """Standard deviation of the noise of the range rate, m/s."""
    region_range_m: tuple[NonNegative, NonNegative]
    """Shortest and longest range at which detections are reported, m."""
    region_bearing_deg: Interval = (-180.0, 180.0)
    """Bearings between which detections are reported, counter-clockwise from the x axis, deg."""
    region_range_rate_m_per_s: Interval
    """Range rates between which detections are reported, m/s."""
    clutter_density_per_m_deg_m_per_s: NonNegative | None = None
    """Expected false detections per scan, m of range, degree of bearing and m/s of range rate."""

    measure: ClassVar = range_bearing_and_rate
    jacobian: ClassVar = range_bearing_and_rate_jacobian
    components: ClassVar = ("range_m", "bearing_deg", "range_rate_m_per_s")
    density_keys: ClassVar = ("clutter_density_per_m_deg_m_per_s",)

    @property
    def axes(self) -> int:
        """It works in a plane."""
        return 2
