"""A sensor at any place in a plane that measures range and bearing.

The bearing runs counter-clockwise from the x axis and wraps at +-180 degrees.
"""

from __future__ import annotations

import math
from typing import Any, ClassVar, Literal, Self

import numpy as np
from pydantic import model_validator

from filters.compiled import model_function
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF, SensorModel
from filters.models.record import BadValue, Interval, NonNegative, Positive
from filters.models.sensor.sensor import Sensor, check_ends


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


@model_function(MEASUREMENT_MATRIX)
def range_and_bearing_noise(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """R = diag(range sd^2, bearing sd^2)."""
    out[:] = 0.0
    out[0, 0] = parameters[0] ** 2
    out[1, 1] = parameters[1] ** 2


class RangeBearingSensor(Sensor):
    """Range and bearing from a fixed site, with independent noise."""

    kind: Literal["range-bearing"]
    """Which sensor: range and bearing in a plane."""
    position_m: Interval = (0.0, 0.0)
    """Where the sensor stands, m."""
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

    density_keys: ClassVar[tuple[str, ...]] = ("clutter_density_per_m_deg",)

    @property
    def axes(self) -> int:
        """Number of spatial axes."""
        return 2

    def region(self) -> np.ndarray:
        """Ends of range in m and of bearing in rad, (2, 2)."""
        return np.array([self.region_range_m, np.radians(self.region_bearing_deg)], float)

    def density_unit(self) -> float:
        """Intensity per m and rad of one per m and degree."""
        return math.degrees(1.0)

    def sensor_model(self) -> SensorModel:
        """Functions and parameters for the kernels."""
        centre, half_width = self._box()
        return SensorModel(
            range_and_bearing.compiled,
            range_and_bearing_jacobian.compiled,
            range_and_bearing_noise.compiled,
            True,
            np.array([self.noise_sd_range_m, math.radians(self.noise_sd_bearing_deg)]),
            np.array([[*self.position_m, 0.0, 0.0]], float),
            np.array([0.0, 2 * math.pi]),
            centre,
            half_width,
        )

    @model_validator(mode="after")
    def _region_has_extent(self) -> Self:
        check_ends("region_range_m", self.region_range_m, "m")
        check_ends("region_bearing_deg", self.region_bearing_deg, "degrees")
        if self.region_bearing_deg[1] - self.region_bearing_deg[0] > 360.0:
            raise BadValue(
                "region_bearing_deg", "must not span more than 360 degrees", "bring its ends closer"
            )
        return self
