"""The same clutter intensity all over the region."""

from __future__ import annotations

from typing import Any, Literal, Self

import numpy as np
from pydantic import model_validator

from filters.compiled import model_function
from filters.models.clutter.clutter_map import ClutterMap, MeasurementSpace
from filters.models.contract import SCALAR_OF, ClutterModel
from filters.models.record import BadValue, NonNegative, Ways


@model_function(SCALAR_OF)
def uniform_intensity(parameters: Any, site: Any, measurement: Any) -> float:
    """Return the stated intensity."""
    return parameters[0]


def uniform_clutter(intensity: float, space: MeasurementSpace) -> ClutterModel:
    """Clutter of one intensity per scan and unit of the measurement (SI, rad)."""
    return ClutterModel(
        uniform_intensity.compiled,
        np.array([intensity]),
        boxes=np.append(space.box, intensity)[np.newaxis],
        bumps=np.empty((0, 2 * space.size + 1)),
    )


class EvenClutter(ClutterMap):
    """Clutter that is the same all over the region, alone or under something else."""

    expected_number: NonNegative | None = None
    """Expected number of false detections per scan that are spread evenly over the region."""
    density: NonNegative | None = None
    """The same as a density: per scan and unit of the measurement, in the units of the region."""

    @classmethod
    def alternatives(cls) -> tuple[Ways, ...]:
        """The intensity is stated in one of two ways."""
        return (*super().alternatives(), (("expected_number",), ("density",)))

    def even_intensity(self, space: MeasurementSpace) -> float:
        """Intensity per scan and SI unit of the measurement."""
        if self.density is not None:
            return self.density * space.density_unit
        assert self.expected_number is not None
        return self.expected_number / space.volume

    @model_validator(mode="after")
    def _is_stated(self) -> Self:
        if self.expected_number is None and self.density is None:
            raise BadValue("expected_number", "is missing", "give it or density")
        return self


class UniformClutter(EvenClutter):
    """The same intensity all over the region, and nothing else."""

    kind: Literal["uniform"]
    """Which clutter map: the same intensity all over the region."""

    def model(self, space: MeasurementSpace, sites: np.ndarray) -> ClutterModel:
        """Function, parameters and drawing for the kernels."""
        return uniform_clutter(self.even_intensity(space), space)
