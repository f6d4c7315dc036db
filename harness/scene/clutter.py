"""False detections of a scan, drawn nested: denser clutter goes on where sparser clutter stops.

The clutter of a map is a sum of processes, each with random numbers of its own. In a box it is a
Poisson process under the graph of the intensity: points come at heights that grow by exponential
steps, uniform over the box, and those above the graph are dropped. In a bump points come likewise,
each at a place drawn from the Gaussian. So the work goes with the number of points drawn.
"""

from __future__ import annotations

import math
from typing import Any

from filters.compiled import helper
from filters.measurement_difference import difference
from filters.models.contract import Models, SensorModel
from filters.random_numbers import CLUTTER, SPLIT, Numbers, exponential, normal, open_at, uniform


@helper
def wrap(m: int, periods: Any, measurement: Any) -> None:
    """Bring angles to within half a turn of zero."""
    for i in range(m):
        if periods[i] > 0.0:
            measurement[i] -= periods[i] * round(measurement[i] / periods[i])


@helper
def is_inside(m: int, sensor: SensorModel, measurement: Any, offset: Any) -> bool:
    """Whether a measurement lies in the region; offset (m,) is overwritten."""
    difference(m, sensor.periods, measurement, sensor.region_centre, offset)
    for i in range(m):
        if abs(offset[i]) > sensor.region_half_width[i]:
            return False
    return True


@helper
def free_row(filled: int, detections: Any) -> int:
    """Row for the next detection; where the room ends, the last."""
    return min(filled, detections.shape[0] - 1)


def room_for_about(expected: float) -> int:
    """Rows for a Poisson number: one in a thousand million times it does not suffice."""
    return int(expected + 6.0 * math.sqrt(expected) + 16.0)


@helper
def keep_if_inside(
    m: int,
    sensor: SensorModel,
    share: float,
    first: int,
    filled: int,
    detections: Any,
    offset: Any,
) -> int:
    """Keep a scan's latest detection, at a random place, if it lies in the region.

    share, first    see move_among; offset (m,) working memory
    returns         how many detections there are now
    """
    latest = detections[free_row(filled, detections)]
    wrap(m, sensor.periods, latest)
    if not is_inside(m, sensor, latest, offset):
        return filled
    move_among(m, share, first, filled, detections)
    return filled + 1


@helper
def move_among(m: int, share: float, first: int, end: int, detections: Any) -> int:
    """Move a scan's latest detection to a random place among its others; return that place.

    share       uniform on [0, 1)
    first, end  the scan's detections before it
    """
    place = min(int(share * (end - first + 1)), end - first)
    last = free_row(end, detections)
    at = min(first + place, last)
    for i in range(m):
        moved = detections[last, i]
        detections[last, i] = detections[at, i]
        detections[at, i] = moved
    return place


@helper
def _draw_in_box(
    m: int,
    models: Models,
    site: Any,
    level: float,
    box: Any,
    is_first: bool,
    numbers: Numbers,
    first: int,
    filled: int,
    detections: Any,
) -> int:
    sensor, clutter = models.sensor, models.clutter
    per_height = level  # expected points below one unit of intensity
    for i in range(m):
        per_height *= 2.0 * box[m + i]
    height = exponential(numbers)
    while height < box[2 * m] * per_height:
        point = detections[free_row(filled, detections)]
        share = 0.0 if is_first else uniform(numbers)
        for i in range(m):
            point[i] = box[i] + (2.0 * uniform(numbers) - 1.0) * box[m + i]
        wrap(m, sensor.periods, point)
        if height < clutter.intensity(clutter.parameters, site, point) * per_height:
            if not is_first:
                move_among(m, share, first, filled, detections)
            filled += 1
        height += exponential(numbers)
    return filled


@helper
def _draw_in_bump(
    m: int,
    sensor: SensorModel,
    level: float,
    bump: Any,
    numbers: Numbers,
    first: int,
    filled: int,
    detections: Any,
    offset: Any,
) -> int:
    height = exponential(numbers)
    while height < bump[2 * m] * level:
        point = detections[free_row(filled, detections)]
        share = uniform(numbers)
        for i in range(m):
            point[i] = bump[i] + bump[m + i] * normal(numbers)
        filled = keep_if_inside(m, sensor, share, first, filled, detections, offset)
        height += exponential(numbers)
    return filled


@helper
def draw_clutter(
    m: int,
    models: Models,
    site: Any,
    level: float,
    trial: int,
    scan: int,
    numbers: Numbers,
    filled: int,
    detections: Any,
    offset: Any,
) -> int:
    """Append the clutter of a scan; return how many detections there are now.

    Where the room ends, points are counted but not written.

    level       factor on the intensity
    offset      (m,) working memory
    """
    boxes, bumps = models.clutter.boxes, models.clutter.bumps
    first = filled
    for source in range(boxes.shape[0]):
        if boxes[source, 2 * m] > 0.0:
            open_at(numbers, trial, CLUTTER + SPLIT * source, scan)
            filled = _draw_in_box(
                m,
                models,
                site,
                level,
                boxes[source],
                source == 0,  # among themselves their order says nothing anyway
                numbers,
                first,
                filled,
                detections,
            )
    for bump in range(bumps.shape[0]):
        open_at(numbers, trial, CLUTTER + SPLIT * (boxes.shape[0] + bump), scan)
        filled = _draw_in_bump(
            m,
            models.sensor,
            level,
            bumps[bump],
            numbers,
            first,
            filled,
            detections,
            offset,
        )
    return filled
