"""A sensor that measures Cartesian position, in one to three dimensions."""

from __future__ import annotations

from typing import Any, ClassVar, Literal, Self

import numpy as np
from pydantic import Field, model_validator

from filters.compiled import model_function
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF, SensorModel
from filters.models.record import BadValue, Interval, NonNegative, Positive
from filters.models.sensor.sensor import Sensor, check_ends


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


@model_function(MEASUREMENT_MATRIX)
def position_noise(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """R = sd^2 I."""
    out[:] = 0.0
    for axis in range(out.shape[0]):
        out[axis, axis] = parameters[0] ** 2


class PositionSensor(Sensor):
    """Cartesian position with the same independent noise along each axis."""

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

    density_keys: ClassVar[tuple[str, ...]] = (
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

    def sensor_model(self) -> SensorModel:
        """Functions and parameters for the kernels."""
        centre, half_width = self._box()
        return SensorModel(
            position_of.compiled,
            position_jacobian.compiled,
            position_noise.compiled,
            True,
            np.array([self.noise_sd_m]),
            np.zeros((1, 2 * self.axes)),
            np.zeros(self.axes),
            centre,
            half_width,
            linear=True,
        )

    @model_validator(mode="after")
    def _region_has_extent(self) -> Self:
        for axis, ends in enumerate(self.region_m):
            check_ends(f"region_m[{axis}]", ends, "m")
        return self

    @model_validator(mode="after")
    def _density_unit_fits_the_axes(self) -> Self:
        if self.clutter_per_scan is not None:
            return self
        key, _ = self._given_density()
        right = self.density_keys[self.axes - 1]
        if key != right:
            raise BadValue(
                key,
                f"does not fit the number of axes of region_m, which is {self.axes}",
                f"give {right} or clutter_per_scan",
            )
        return self
