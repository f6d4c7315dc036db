"""A clutter intensity that changes with range by a table.

The range is that component of the measurement, or the distance of a measured position from the
sensor.
"""

from __future__ import annotations

import itertools
from typing import Any, Literal, Self

import numpy as np
from pydantic import model_validator

from filters.compiled import model_function
from filters.models.clutter.clutter_map import ClutterMap, MeasurementSpace
from filters.models.contract import SCALAR_OF, ClutterModel
from filters.models.geometry import range_between
from filters.models.over_range import OverRange, check_over_range, table_numbers, table_value
from filters.models.record import BadValue

# Boxes into which a region of positions is cut for drawing, along each axis: 64 in all.
_CUTS = {1: 64, 2: 8, 3: 4}


@model_function(SCALAR_OF)
def intensity_over_range(parameters: Any, site: Any, measurement: Any) -> float:
    """Intensity at the measured range; parameters[0] says which component that is."""
    return table_value(parameters, 1, measurement[int(parameters[0])])


@model_function(SCALAR_OF)
def intensity_over_distance(parameters: Any, site: Any, measurement: Any) -> float:
    """Intensity at a measured position by its distance from the site."""
    return table_value(parameters, 0, range_between(measurement.shape[0], measurement, site))


class RangeTableClutter(ClutterMap):
    """An intensity stated at some ranges."""

    kind: Literal["range-table"]
    """Which clutter map: a table against range."""
    density_over_range: OverRange
    """Rows of range in m and of expected false detections per scan and unit of the measurement, in
    the units of the region; linear between, held beyond the ends."""

    def model(self, space: MeasurementSpace, sites: np.ndarray) -> ClutterModel:
        """Function, parameters and drawing for the kernels."""
        table = table_numbers(self.density_over_range, space.density_unit)
        no_bumps = np.empty((0, 2 * space.size + 1))
        if space.is_position:
            boxes = _boxes_of_positions(table, space, sites)
            return ClutterModel(intensity_over_distance.compiled, table, boxes, no_bumps)
        assert space.range_component is not None
        numbers = np.insert(table, 0, space.range_component)
        boxes = _boxes_of_ranges(table, space, space.range_component)
        return ClutterModel(intensity_over_range.compiled, numbers, boxes, no_bumps)

    def check(self, space: MeasurementSpace) -> None:
        """Check that the sensor knows ranges."""
        if space.range_component is None and not space.is_position:
            raise BadValue(
                "kind", "needs a range, which the sensor does not measure", "choose another"
            )

    @model_validator(mode="after")
    def _ranges_grow(self) -> Self:
        check_over_range("density_over_range", self.density_over_range)
        return self


def _boxes_of_ranges(table: np.ndarray, space: MeasurementSpace, component: int) -> np.ndarray:
    """Cut the region at the table's ranges; in each piece the mean is at least half the bound."""
    low, high = space.region[component]
    ranges = table[1 : 1 + int(table[0])]
    ends = np.unique([low, high, *ranges[(ranges > low) & (ranges < high)]])
    boxes = []
    for near, far in itertools.pairwise(ends):
        centre, half_width = np.split(space.box, 2)
        centre[component], half_width[component] = (near + far) / 2, (far - near) / 2
        boxes.append([*centre, *half_width, _highest(table, near, far)])
    return np.array(boxes)


def _boxes_of_positions(
    table: np.ndarray, space: MeasurementSpace, sites: np.ndarray
) -> np.ndarray:
    """Cut the region evenly; each box is bounded for every place at which the sensor ever is."""
    axes = space.size
    cuts = _CUTS[axes]
    centre, half_width = np.split(space.box, 2)
    half_width = half_width / cuts
    steps = 2.0 * np.arange(cuts) - (cuts - 1)
    places = np.unique(sites[:, :axes], axis=0)
    boxes = []
    for step in np.stack(np.meshgrid(*[steps] * axes, indexing="ij"), axis=-1).reshape(-1, axes):
        middle = centre + step * half_width
        offset = np.abs(places - middle)
        nearest = np.linalg.norm(np.maximum(offset - half_width, 0.0), axis=1)
        farthest = np.linalg.norm(offset + half_width, axis=1)
        bound = _highest(table, nearest.min(), farthest.max())
        boxes.append([*middle, *half_width, bound])
    return np.array(boxes)


def _highest(table: np.ndarray, near: float, far: float) -> float:
    """Highest value of a table between two ranges."""
    count = int(table[0])
    ranges, values = table[1 : 1 + count], table[1 + count :]
    inside = values[(ranges > near) & (ranges < far)]
    ends = np.interp([near, far], ranges, values)
    # Interpolation in a kernel rounds on its own.
    return float(max(*ends, *inside) * (1.0 + 1e-12))
