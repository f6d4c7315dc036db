"""A sensor in a plane that measures bearing alone.

The bearing runs counter-clockwise from the x axis and wraps at +-180 degrees.
"""

from __future__ import annotations

from typing import Any, ClassVar, Literal

from filters.compiled import model_function
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF
from filters.models.geometry import bearing_between
from filters.models.record import Interval, NonNegative, Positive
from filters.models.sensor.sensor import Sensor


@model_function(MEASUREMENT_OF)
def bearing_alone(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Bearing of the state's position from the site."""
    out[0] = bearing_between(state, site)


@model_function(MEASUREMENT_MATRIX)
def bearing_alone_jacobian(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Derivative of bearing_alone with respect to the state."""
    east, north = state[0] - site[0], state[1] - site[1]
    square = east * east + north * north
    out[:] = 0.0
    out[0, 0] = -north / square
    out[0, 1] = east / square


class BearingSensor(Sensor):
    """Bearing from a site in a plane."""

    kind: Literal["bearing"]
    """Which sensor: bearing alone, in a plane."""
    noise_sd_bearing_deg: Positive
    """Standard deviation of the noise of the bearing, deg."""
    region_bearing_deg: Interval = (-180.0, 180.0)
    """Bearings between which detections are reported, counter-clockwise from the x axis, deg."""
    clutter_density_per_deg: NonNegative | None = None
    """Expected false detections per scan and degree of bearing."""

    measure: ClassVar = bearing_alone
    jacobian: ClassVar = bearing_alone_jacobian
    components: ClassVar = ("bearing_deg",)
    density_keys: ClassVar = ("clutter_density_per_deg",)

    @property
    def axes(self) -> int:
        """It works in a plane."""
        return 2
