"""The contract of a detection law, and where a sensor is blind whatever its law.

The parameters of a law that may be blind somewhere begin with the numbers of its blindness: the
least range rate that is seen, the number of blind sectors, then centre and half width of each.
"""

from __future__ import annotations

import math
from typing import Annotated, Any, Self

import numpy as np
from pydantic import Field, model_validator

from filters.compiled import helper
from filters.models.contract import DetectionModel
from filters.models.ends import check_angles
from filters.models.geometry import bearing_between, range_rate_between
from filters.models.record import BadValue, Interval, Positive, Record

FalseAlarmProbability = Annotated[float, Field(strict=True, allow_inf_nan=False, gt=0.0, lt=1.0)]
Cell = Annotated[tuple[Positive, ...], Field(min_length=1, max_length=9)]


class DetectionLaw(Record):
    """How probably the target is detected at a scan; a kind adds its keys and its function."""

    blind_sectors_deg: Annotated[tuple[Interval, ...], Field(min_length=1)] | None = None
    """Bearings in which nothing is detected: both ends of each sector, counter-clockwise from the
    x axis, deg."""
    blind_range_rate_m_per_s: Positive | None = None
    """A target whose range changes more slowly than this, either way, is not detected, m/s."""
    false_alarm_probability: FalseAlarmProbability | None = None
    """Probability of a false detection in a resolution cell at a scan, in (0, 1); with
    resolution_cell it sets the clutter, in place of the sensor's clutter keys."""
    resolution_cell: Cell | None = None
    """Extent of a resolution cell: one number for each component of the measurement, in the units
    of the sensor's region."""

    def model(self) -> DetectionModel:
        """Function and parameters for the kernels."""
        raise NotImplementedError

    @property
    def sets_clutter(self) -> bool:
        """Whether the false alarms of this law are the clutter."""
        return self.false_alarm_probability is not None

    def clutter_intensity(self, units: np.ndarray) -> float:
        """False detections per scan and SI unit of the measurement: PFA over the cell's extent.

        units   (m,) SI units in one unit of the study, for each component
        """
        assert self.false_alarm_probability is not None
        assert self.resolution_cell is not None
        return float(self.false_alarm_probability / np.prod(np.array(self.resolution_cell) * units))

    def check(self, axes: int, measurement_size: int) -> None:
        """Check that the law fits a sensor.

        raises      BadValue
        """
        if self.blind_sectors_deg is not None and axes < 2:
            raise BadValue(
                "blind_sectors_deg", "needs a plane, but the sensor works on one axis", "remove it"
            )
        if self.resolution_cell is not None and len(self.resolution_cell) != measurement_size:
            raise BadValue(
                "resolution_cell",
                f"must have {measurement_size} entries",
                "give one for each component of the measurement",
            )

    @property
    def is_blind_somewhere(self) -> bool:
        """Whether there is anything that is never detected."""
        return self.blind_sectors_deg is not None or self.blind_range_rate_m_per_s is not None

    def blind_numbers(self) -> np.ndarray:
        """Numbers with which the parameters of a law that may be blind begin, SI and rad."""
        sectors = np.radians(self.blind_sectors_deg or np.empty((0, 2)))
        shapes = np.column_stack([sectors.mean(axis=1), np.diff(sectors, axis=1)[:, 0] / 2])
        least_rate = self.blind_range_rate_m_per_s or 0.0
        return np.array([least_rate, len(sectors), *shapes.ravel()])

    @model_validator(mode="after")
    def _sectors_have_extent(self) -> Self:
        for place, ends in enumerate(self.blind_sectors_deg or ()):
            check_angles(f"blind_sectors_deg[{place}]", ends)
        return self

    @model_validator(mode="after")
    def _false_alarms_have_a_cell(self) -> Self:
        pair = ("false_alarm_probability", "resolution_cell")
        for key, other in (pair, pair[::-1]):
            if getattr(self, key) is None and getattr(self, other) is not None:
                raise BadValue(key, "is missing", f"give it beside {other}, or remove that")
        return self


@helper
def behind_blind(parameters: Any) -> int:
    """Where the numbers of the law itself begin."""
    return 2 + 2 * int(parameters[1])


@helper
def is_blind(parameters: Any, site: Any, state: Any) -> bool:
    """Whether the sensor sees nothing at a state, whatever the law."""
    axes = site.shape[0] // 2
    least_rate = parameters[0]
    if least_rate > 0.0 and abs(range_rate_between(axes, state, site)) < least_rate:
        return True
    sectors = int(parameters[1])
    if sectors > 0:
        bearing = bearing_between(state, site)
        for sector in range(sectors):
            offset = bearing - parameters[2 + 2 * sector]
            offset -= 2.0 * math.pi * round(offset / (2.0 * math.pi))
            if abs(offset) <= parameters[3 + 2 * sector]:
                return True
    return False
