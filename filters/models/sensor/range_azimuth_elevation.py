"""A sensor in space that measures range, azimuth and elevation.

The azimuth runs counter-clockwise from the x axis in the plane of x and y and wraps at +-180
degrees; the elevation is the angle above that plane.
"""

from __future__ import annotations

import math
from typing import Any, ClassVar, Literal, Self

from pydantic import model_validator

from filters.compiled import model_function
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF
from filters.models.record import BadValue, Interval, NonNegative, Positive
from filters.models.sensor.position_of import position_of_range_azimuth_and_elevation
from filters.models.sensor.sensor import Sensor


@model_function(MEASUREMENT_OF)
def range_azimuth_and_elevation(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Range, azimuth and elevation from the site to the state's position."""
    east, north, up = state[0] - site[0], state[1] - site[1], state[2] - site[2]
    along_ground = math.sqrt(east * east + north * north)
    out[0] = math.sqrt(along_ground * along_ground + up * up)
    out[1] = math.atan2(north, east)
    out[2] = math.atan2(up, along_ground)


@model_function(MEASUREMENT_MATRIX)
def range_azimuth_and_elevation_jacobian(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Derivative of range_azimuth_and_elevation with respect to the state."""
    east, north, up = state[0] - site[0], state[1] - site[1], state[2] - site[2]
    ground_square = east * east + north * north
    along_ground = math.sqrt(ground_square)
    square = ground_square + up * up
    distance = math.sqrt(square)
    out[:] = 0.0
    out[0, 0] = east / distance
    out[0, 1] = north / distance
    out[0, 2] = up / distance
    out[1, 0] = -north / ground_square
    out[1, 1] = east / ground_square
    out[2, 0] = -up * east / (square * along_ground)
    out[2, 1] = -up * north / (square * along_ground)
    out[2, 2] = along_ground / square


class RangeAzimuthElevationSensor(Sensor):
    """Range, azimuth and elevation from a site, with independent noise."""

    kind: Literal["range-azimuth-elevation"]
    """Which sensor: range, azimuth and elevation in space."""
    noise_sd_range_m: Positive
    """Standard deviation of the noise of the range, m."""
    noise_sd_azimuth_deg: Positive
    """Standard deviation of the noise of the azimuth, deg."""
    noise_sd_elevation_deg: Positive
    """Standard deviation of the noise of the elevation, deg."""
    region_range_m: tuple[NonNegative, NonNegative]
    """Shortest and longest range at which detections are reported, m."""
    region_azimuth_deg: Interval = (-180.0, 180.0)
    """Azimuths between which detections are reported, counter-clockwise from the x axis, deg."""
    region_elevation_deg: Interval = (-90.0, 90.0)
    """Elevations between which detections are reported, deg."""
    clutter_density_per_m_deg2: NonNegative | None = None
    """Expected false detections per scan, m of range and square degree of azimuth times
    elevation."""

    measure: ClassVar = range_azimuth_and_elevation
    jacobian: ClassVar = range_azimuth_and_elevation_jacobian
    convert: ClassVar = position_of_range_azimuth_and_elevation
    components: ClassVar = ("range_m", "azimuth_deg", "elevation_deg")
    density_keys: ClassVar = ("clutter_density_per_m_deg2",)

    @property
    def axes(self) -> int:
        """It works in space."""
        return 3

    @model_validator(mode="after")
    def _elevation_stays_between_the_poles(self) -> Self:
        if self.region_elevation_deg[0] < -90.0 or self.region_elevation_deg[1] > 90.0:
            raise BadValue(
                "region_elevation_deg",
                "must lie within -90 and 90 degrees",
                "bring its ends in",
            )
        return self
