"""The contract of a clutter map, and the measurement space in which it lies."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from filters.models.contract import ClutterModel
from filters.models.record import Record


class MeasurementSpace(NamedTuple):
    """Where a sensor's detections lie, in SI units and rad."""

    region: np.ndarray  # (m, 2) lower and upper end of each component
    units: np.ndarray  # (m,) SI units in one unit of the study file
    periods: np.ndarray  # (m,) 2 pi for an angle that wraps, 0 for anything else
    range_component: int | None  # which component is the range, if any
    is_position: bool  # the components are position along the sensor's axes

    @property
    def size(self) -> int:
        """Length of a measurement."""
        return len(self.region)

    @property
    def volume(self) -> float:
        """Extent of the region."""
        return float(np.prod(np.diff(self.region, axis=1)))

    @property
    def density_unit(self) -> float:
        """SI intensity in one false detection per unit of the study's region."""
        return float(1.0 / np.prod(self.units))

    @property
    def box(self) -> np.ndarray:
        """Centre and half width of the region, (2 m,)."""
        low, high = self.region.T
        return np.concatenate([(low + high) / 2, (high - low) / 2])


class ClutterMap(Record):
    """Where false detections come from; a kind adds its keys and its function."""

    def model(self, space: MeasurementSpace, sites: np.ndarray) -> ClutterModel:
        """Function, parameters and drawing for the kernels.

        sites   (scans, 2 axes) position and velocity of the sensor, or (1, 2 axes)
        """
        raise NotImplementedError

    def check(self, space: MeasurementSpace) -> None:
        """Check that the map fits a sensor.

        raises      BadValue
        """
