"""A sensor that measures range alone, along one to three axes."""

from __future__ import annotations

from typing import Any, ClassVar, Literal

from filters.compiled import model_function
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF
from filters.models.geometry import range_between
from filters.models.record import NonNegative, Positive
from filters.models.sensor.sensor import Sensor


@model_function(MEASUREMENT_OF)
def range_alone(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Distance of the state's position from the site."""
    out[0] = range_between(site.shape[0] // 2, state, site)


@model_function(MEASUREMENT_MATRIX)
def range_alone_jacobian(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Derivative of range_alone: the unit vector from the site."""
    axes = site.shape[0] // 2
    distance = range_between(axes, state, site)
    out[:] = 0.0
    for axis in range(axes):
        out[0, axis] = (state[axis] - site[axis]) / distance


class RangeSensor(Sensor):
    """Range from a site; its place says along how many axes, two by default."""

    kind: Literal["range"]
    """Which sensor: range alone."""
    noise_sd_range_m: Positive
    """Standard deviation of the noise of the range, m."""
    region_range_m: tuple[NonNegative, NonNegative]
    """Shortest and longest range at which detections are reported, m."""
    clutter_density_per_m: NonNegative | None = None
    """Expected false detections per scan and m of range."""

    measure: ClassVar = range_alone
    jacobian: ClassVar = range_alone_jacobian
    components: ClassVar = ("range_m",)
    density_keys: ClassVar = ("clutter_density_per_m",)

    @property
    def axes(self) -> int:
        """As many as its first place has."""
        return self.axes_of_place()
