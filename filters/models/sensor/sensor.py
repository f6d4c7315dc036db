"""The contract of a sensor: noise, detection, clutter and the region it reports from."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
from pydantic import model_validator

from filters.models.clutter.uniform import uniform_clutter
from filters.models.contract import ClutterModel, DetectionModel, SensorModel
from filters.models.detection.constant import constant_detection
from filters.models.record import BadValue, NonNegative, Probability, Record


class Sensor(Record):
    """What all sensors share; a kind adds its noise, its region and its functions.

    The clutter is stated as a density in the units of the measurement (a key of the kind's own) or
    as the expected number of false detections in the region per scan.
    """

    detection_probability: Probability
    """Probability that the target is detected at a scan, in [0, 1]."""
    clutter_per_scan: NonNegative | None = None
    """Expected number of false detections in the region per scan, in place of a density."""

    # Keys of this kind that state a clutter density.
    density_keys: ClassVar[tuple[str, ...]] = ()

    @property
    def axes(self) -> int:
        """Number of spatial axes that the sensor works in."""
        raise NotImplementedError

    def region(self) -> np.ndarray:
        """Lower and upper end of each component of the measurement, (m, 2) SI and rad."""
        raise NotImplementedError

    def density_unit(self) -> float:
        """SI intensity in one unit of the study file's density."""
        return 1.0

    def sensor_model(self) -> SensorModel:
        """Functions and parameters for the kernels."""
        raise NotImplementedError

    @property
    def measurement_size(self) -> int:
        """Length of a measurement."""
        return len(self.region())

    def region_volume(self) -> float:
        """Extent of the region in SI units of the measurement."""
        return float(np.prod(np.diff(self.region(), axis=1)))

    def clutter_intensity(self) -> float:
        """False detections per scan and SI unit of the measurement."""
        if self.clutter_per_scan is not None:
            return self.clutter_per_scan / self.region_volume()
        return self._given_density()[1] * self.density_unit()

    def detection_model(self) -> DetectionModel:
        """How probably a target is detected."""
        return constant_detection(self.detection_probability)

    def clutter_model(self) -> ClutterModel:
        """Intensity of false detections."""
        return uniform_clutter(self.clutter_intensity())

    def _given_density(self) -> tuple[str, float]:
        given = [key for key in self.density_keys if getattr(self, key) is not None]
        return given[0], getattr(self, given[0])

    def _box(self) -> tuple[np.ndarray, np.ndarray]:
        low, high = self.region().T
        return (low + high) / 2, (high - low) / 2

    @model_validator(mode="after")
    def _clutter_is_stated_once(self) -> Self:
        keys = (*self.density_keys, "clutter_per_scan")
        given = [key for key in keys if getattr(self, key) is not None]
        if not given:
            raise BadValue("clutter_per_scan", "is missing", f"give one of {', '.join(keys)}")
        if len(given) > 1:
            raise BadValue(
                given[0], f"says the same as {' and '.join(given[1:])}", "keep one of them"
            )
        return self


def check_ends(name: str, ends: tuple[float, float], unit: str) -> None:
    """Check that an interval has positive length.

    raises      BadValue naming the interval
    """
    if not ends[0] < ends[1]:
        raise BadValue(name, f"must run from a lower to a higher value in {unit}", "swap its ends")
