"""A sensor that measures Cartesian position, in one to three dimensions."""

from __future__ import annotations

from typing import Any, ClassVar, Literal, Self

import numpy as np
from pydantic import Field, model_validator

from filters.compiled import model_function
from filters.models.clutter.clutter_map import MeasurementSpace
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF
from filters.models.ends import check_ends
from filters.models.record import BadValue, Interval, NonNegative, Positive
from filters.models.sensor.position_of import position_as_measured
from filters.models.sensor.sensor import Sensor


@model_function(MEASUREMENT_OF)
def position_of(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """Position: the leading entries of the state."""
    for axis in range(out.shape[0]):
        out[axis] = state[axis]


@model_function(MEASUREMENT_MATRIX)
def position_jacobian(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """H = [I 0]."""
    out[:] = 0.0
    for axis in range(out.shape[0]):
        out[axis, axis] = 1.0


class PositionSensor(Sensor):
    """Cartesian position with the same independent noise along each axis.

    Its place matters only to what changes with range.
    """

    kind: Literal["position"]
    """Which sensor: Cartesian position along one to three axes."""
    noise_sd_m: Positive
    """Standard deviation of the noise along each axis, m."""
    region_m: tuple[Interval, ...] = Field(min_length=1, max_length=3)
    """Where detections are reported: lower and upper end along each axis, m."""
    clutter_density_per_m: NonNegative | None = None
    """Expected false detections per scan and m, on one axis."""
    clutter_density_per_m2: NonNegative | None = None
    """Expected false detections per scan and m2, on two axes."""
    clutter_density_per_m3: NonNegative | None = None
    """Expected false detections per scan and m3, on three axes."""

    measure: ClassVar = position_of
    jacobian: ClassVar = position_jacobian
    convert: ClassVar = position_as_measured
    linear: ClassVar = True
    components: ClassVar = ()  # one for each axis; they share their keys
    density_keys: ClassVar = (
        "clutter_density_per_m",
        "clutter_density_per_m2",
        "clutter_density_per_m3",
    )

    @property
    def axes(self) -> int:
        """Number of spatial axes."""
        return len(self.region_m)

    def region(self) -> np.ndarray:
        """Lower and upper end along each axis, (axes, 2) m."""
        return np.array(self.region_m, float)

    def units(self) -> np.ndarray:
        """Metres."""
        return np.ones(self.axes)

    def measured_units(self) -> tuple[str, ...]:
        """Metres."""
        return ("m",) * self.axes

    def periods(self) -> np.ndarray:
        """Nothing wraps."""
        return np.zeros(self.axes)

    def noise_deviations(self) -> np.ndarray:
        """The same along each axis, (axes,) m."""
        return np.full(self.axes, self.noise_sd_m)

    def measurement_space(self) -> MeasurementSpace:
        """The space in which the target moves."""
        return super().measurement_space()._replace(is_position=True)

    @model_validator(mode="after")
    def _region_has_extent_along_each_axis(self) -> Self:
        for axis, ends in enumerate(self.region_m):
            check_ends(f"region_m[{axis}]", ends, "m")
        return self

    @model_validator(mode="after")
    def _density_unit_fits_the_axes(self) -> Self:
        right = self.density_keys[self.axes - 1]
        for key in self.density_keys:
            if key != right and getattr(self, key) is not None:
                raise BadValue(
                    key,
                    f"does not fit the number of axes of region_m, which is {self.axes}",
                    f"give {right} or clutter_per_scan",
                )
        return self
