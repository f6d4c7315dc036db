"""Patches of clutter: Gaussian bumps of intensity on an even background.

Where a bump reaches beyond the region, that part reports nothing.
"""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal, Self

import numpy as np
from pydantic import Field, model_validator

from filters.compiled import model_function
from filters.models.clutter.clutter_map import MeasurementSpace
from filters.models.clutter.uniform import EvenClutter
from filters.models.contract import SCALAR_OF, ClutterModel
from filters.models.record import BadValue, NonNegative, Positive, Real, Record, Ways

# An angle's bump is summed over a turn either way; wider ones would reach further around.
_WIDEST_ANGLE = math.radians(60.0)


@model_function(SCALAR_OF)
def patchy_intensity(parameters: Any, site: Any, measurement: Any) -> float:
    """Background plus bumps.

    parameters: background, number of bumps, periods (m,), then of each bump its peak, centre (m,)
    and standard deviations (m,).
    """
    m = measurement.shape[0]
    intensity = parameters[0]
    for bump in range(int(parameters[1])):
        start = 2 + m + bump * (2 * m + 1)
        height = parameters[start]
        for i in range(m):
            period, deviation = parameters[2 + i], parameters[start + 1 + m + i]
            offset = measurement[i] - parameters[start + 1 + i]
            if period > 0.0:
                offset -= period * round(offset / period)
                share = 0.0
                for turn in range(-1, 2):
                    share += math.exp(-0.5 * ((offset + turn * period) / deviation) ** 2)
                height *= share
            else:
                height *= math.exp(-0.5 * (offset / deviation) ** 2)
        intensity += height
    return intensity


class Patch(Record):
    """A Gaussian bump of clutter."""

    centre: Annotated[tuple[Real, ...], Field(min_length=1)]
    """Its middle: one number for each component of the measurement, in the units of the region."""
    sd: Annotated[tuple[Positive, ...], Field(min_length=1)]
    """Its standard deviations, likewise."""
    expected_number: NonNegative | None = None
    """Expected number of its false detections per scan, were the region without end."""
    peak_density: NonNegative | None = None
    """In place of their number: expected false detections per scan and unit of the measurement in
    its middle, in the units of the region."""

    @classmethod
    def alternatives(cls) -> tuple[Ways, ...]:
        """The intensity is stated in one of two ways."""
        return (*super().alternatives(), (("expected_number",), ("peak_density",)))

    def number(self) -> float:
        """Expected number per scan."""
        if self.expected_number is not None:
            return self.expected_number
        assert self.peak_density is not None
        return self.peak_density * float(np.prod(np.array(self.sd) * math.sqrt(2 * math.pi)))

    @model_validator(mode="after")
    def _is_stated(self) -> Self:
        if self.expected_number is None and self.peak_density is None:
            raise BadValue("expected_number", "is missing", "give it or peak_density")
        return self


class PatchyClutter(EvenClutter):
    """Bumps of intensity on an even background."""

    kind: Literal["patches"]
    """Which clutter map: Gaussian bumps on an even background."""
    patches: Annotated[tuple[Patch, ...], Field(min_length=1)]
    """The bumps, each a table."""

    def model(self, space: MeasurementSpace, sites: np.ndarray) -> ClutterModel:
        """Function, parameters and drawing for the kernels."""
        background = self.even_intensity(space)
        numbers = [background, len(self.patches), *space.periods]
        bumps = []
        for patch in self.patches:
            centre = np.array(patch.centre) * space.units
            deviations = np.array(patch.sd) * space.units
            peak = patch.number() / float(np.prod(deviations * math.sqrt(2 * math.pi)))
            numbers += [peak, *centre, *deviations]
            bumps.append([*centre, *deviations, patch.number()])
        return ClutterModel(
            patchy_intensity.compiled,
            np.array(numbers, float),
            boxes=np.append(space.box, background)[np.newaxis],
            bumps=np.array(bumps, float),
        )

    def check(self, space: MeasurementSpace) -> None:
        """Check that the patches lie in the region of the sensor."""
        for place, patch in enumerate(self.patches):
            for key in ("centre", "sd"):
                if len(getattr(patch, key)) != space.size:
                    raise BadValue(
                        f"patches[{place}].{key}",
                        f"must have {space.size} entries",
                        "give one for each component of the measurement",
                    )
            if not _is_inside(np.array(patch.centre) * space.units, space):
                raise BadValue(
                    f"patches[{place}].centre", "lies outside the sensor's region", "move it inside"
                )
            if np.any((space.periods > 0) & (np.array(patch.sd) * space.units > _WIDEST_ANGLE)):
                raise BadValue(
                    f"patches[{place}].sd",
                    "must not exceed 60 degrees along an angle",
                    "lessen it, or state the clutter as uniform",
                )


def _is_inside(point: np.ndarray, space: MeasurementSpace) -> bool:
    centre, half_width = np.split(space.box, 2)
    offset = point - centre
    turns = np.divide(offset, space.periods, out=np.zeros_like(offset), where=space.periods > 0)
    return bool(np.all(np.abs(offset - space.periods * np.round(turns)) <= half_width))
