"""A sensor in a plane that measures range and bearing.

The bearing runs counter-clockwise from the x axis and wraps at +-180 degrees.
"""

from __future__ import annotations

import math
from typing import Any, ClassVar, Literal

from filters.compiled import model_function
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF
from filters.models.record import Interval, NonNegative, Positive
from filters.models.sensor.position_of import position_of_range_and_bearing
from filters.models.sensor.sensor import Sensor


@model_function(MEASUREMENT_OF)
def range_and_bearing(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Range and bearing from the site to the state's position."""
    east, north = state[0] - site[0], state[1] - site[1]
    out[0] = math.sqrt(east * east + north * north)
    out[1] = math.atan2(north, east)


@model_function(MEASUREMENT_MATRIX)
def range_and_bearing_jacobian(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Derivative of range_and_bearing with respect to the state."""
    east, north = state[0] - site[0], state[1] - site[1]
    square = east * east + north * north
    distance = math.sqrt(square)
    out[:] = 0.0
    out[0, 0] = east / distance
    out[0, 1] = north / distance
    out[1, 0] = -north / square
    out[1, 1] = east / square


class RangeBearingSensor(Sensor):
    """Range and bearing from a site, with independent noise."""

    kind: Literal["range-bearing"]
    """Which sensor: range and bearing in a plane."""
    noise_sd_range_m: Positive
    """Standard deviation of the noise of the range, m."""
    noise_sd_bearing_deg: Positive
    """Standard deviation of the noise of the bearing, deg."""
    region_range_m: tuple[NonNegative, NonNegative]
    """Shortest and longest range at which detections are reported, m."""
    region_bearing_deg: Interval = (-180.0, 180.0)
    """Bearings between which detections are reported, counter-clockwise from the x axis, deg."""
    clutter_density_per_m_deg: NonNegative | None = None
    """Expected false detections per scan, m of range and degree of bearing."""

    measure: ClassVar = range_and_bearing
    jacobian: ClassVar = range_and_bearing_jacobian
    convert: ClassVar = position_of_range_and_bearing
    components: ClassVar = ("range_m", "bearing_deg")
    density_keys: ClassVar = ("clutter_density_per_m_deg",)

    @property
    def axes(self) -> int:
        """It works in a plane."""
        return 2
