"""False detections that come back: points that stay for a time and show at some scans.

The points of a region are in balance: as many are expected at any time, new ones come as old ones
go, and lifetimes are exponential. Each point has random numbers of its own, so that more points,
or points that show more often, contain fewer.
"""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np

from filters.compiled import helper, kernel
from filters.models.contract import SensorModel
from filters.random_numbers import (
    PERSISTENT_CLUTTER,
    SPLIT,
    Numbers,
    exponential,
    normal,
    open_at,
    uniform,
)
from harness.scene.clutter import free_row, keep_if_inside, room_for_about
from harness.study.schema import Scene

_SCANS = 1 << 17  # more than a trial can have


class PersistentPoints(NamedTuple):
    """The points of a batch of trials, those of a trial in the order in which they come."""

    places: np.ndarray  # (points, m)
    first_scans: np.ndarray  # (points,) index of the first scan at which a point is there
    end_scans: np.ndarray  # (points,) index of the first at which it no longer is
    purposes: np.ndarray  # (points,) names its random numbers
    offsets: np.ndarray  # (trials + 1,) points of trial i are offsets[i] : offsets[i + 1]
    shown_probability: float
    spread: np.ndarray  # (m,) SI
    present: np.ndarray  # (most points of a trial,) int64, working memory


@functools.cache
def _point_kernel(m: int) -> Callable[..., int]:
    @kernel
    def draw_points(
        sensor: SensorModel,
        expected: Any,
        times: Any,
        mean_lifetime: float,
        first_trial: int,
        numbers: Numbers,
        places: Any,
        first_scans: Any,
        end_scans: Any,
        purposes: Any,
        offsets: Any,
    ) -> int:
        filled = 0
        for trial in range(offsets.shape[0] - 1):
            offsets[trial] = filled
            for k in range(times.shape[0]):
                cohort = PERSISTENT_CLUTTER + SPLIT * k
                open_at(numbers, first_trial + trial, cohort, 0)
                count = 0
                height = exponential(numbers)
                while height < expected[k]:
                    count += 1
                    height += exponential(numbers)
                for i in range(count):
                    purpose = cohort + SPLIT * _SCANS * (i + 1)
                    open_at(numbers, first_trial + trial, purpose, 0)
                    place = min(filled, places.shape[0] - 1)
                    for a in range(m):
                        share = 2.0 * uniform(numbers) - 1.0
                        places[place, a] = (
                            sensor.region_centre[a] + share * sensor.region_half_width[a]
                        )
                    last_time = times[k] + mean_lifetime * exponential(numbers)
                    first_scans[place] = k
                    end = k + 1
                    while end < times.shape[0] and times[end] <= last_time:
                        end += 1
                    end_scans[place] = end
                    purposes[place] = purpose
                    filled += 1
        offsets[offsets.shape[0] - 1] = filled
        return filled

    return draw_points


def draw_persistent_points(
    scene: Scene, sensor: SensorModel, numbers: Numbers, first_trial: int, trials: int
) -> PersistentPoints:
    """Points of consecutive trials; none where the scene has none."""
    m = scene.sensor.measurement_size
    stated = scene.unmodelled.persistent_clutter
    offsets = np.zeros(trials + 1, np.int64)
    if stated is None:
        none = np.zeros(0, np.int64)
        return PersistentPoints(np.empty((0, m)), none, none, none, offsets, 0.0, np.zeros(m), none)
    times = scene.scan_times()
    newly_come = -np.expm1(-scene.scan_intervals() / stated.mean_lifetime_s)
    expected = stated.expected_number * np.where(np.arange(len(times)) == 0, 1.0, newly_come)
    room = room_for_about(expected.sum() * trials)
    while True:
        places = np.empty((room, m))
        first_scans, end_scans, purposes = (np.empty(room, np.int64) for _ in range(3))
        filled = _point_kernel(m)(
            sensor,
            expected,
            times,
            stated.mean_lifetime_s,
            first_trial,
            numbers,
            places,
            first_scans,
            end_scans,
            purposes,
            offsets,
        )
        if filled <= room:
            break
        room = filled  # as numbers follow from counters, the same points come again
    spread = (
        np.zeros(m) if stated.spread is None else np.array(stated.spread) * scene.sensor.units()
    )
    return PersistentPoints(
        places,
        first_scans,
        end_scans,
        purposes,
        offsets,
        stated.shown_probability,
        spread,
        np.empty(int(np.diff(offsets).max()), np.int64),
    )


@helper
def list_present(
    points: PersistentPoints, scan: int, present: int, next_point: int, end: int
) -> tuple[int, int]:
    """List the points that are there at a scan, from those at the scan before and those that come.

    present             how many were listed at the scan before
    next_point, end     the trial's points that are still to come
    returns             how many are listed now, and the next point to come
    """
    listed, kept = points.present, 0
    for place in range(present):
        if scan < points.end_scans[listed[place]]:
            listed[kept] = listed[place]
            kept += 1
    while next_point < end and points.first_scans[next_point] == scan:
        listed[kept] = next_point
        kept += 1
        next_point += 1
    return kept, next_point


@helper
def show_points(
    m: int,
    sensor: SensorModel,
    points: PersistentPoints,
    present: int,
    trial: int,
    scan: int,
    numbers: Numbers,
    first: int,
    filled: int,
    detections: Any,
    offset: Any,
) -> int:
    """Append the detections of the points listed; return how many detections there are now.

    trial       number that names the random streams
    first       where the scan's detections begin
    offset      (m,) working memory
    """
    for place in range(present):
        point = points.present[place]
        open_at(numbers, trial, points.purposes[point], 1 + scan)
        is_shown = uniform(numbers) < points.shown_probability
        share = uniform(numbers)
        if not is_shown:
            continue
        detection = detections[free_row(filled, detections)]
        for i in range(m):
            detection[i] = points.places[point, i] + points.spread[i] * normal(numbers)
        filled = keep_if_inside(m, sensor, share, first, filled, detections, offset)
    return filled
