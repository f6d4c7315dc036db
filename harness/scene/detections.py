"""Detections of given truth: the target's own, and clutter.

One uniform number a scan decides detection: the target is detected where it is below PD. Where
misses come in runs, the number of the scan before is kept with the stated persistence; each number
is uniform all the same, so PD is met at every scan.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np

from filters.cholesky import factorise_semidefinite
from filters.compiled import CompiledCodeError, helper, kernel
from filters.hypotheses import NOT_DETECTED
from filters.models.contract import Models, SensorModel
from filters.random_numbers import DETECTION, NOISE, Numbers, fill_normals, open_at, uniform
from filters.track import Scans
from harness.scene.clutter import (
    draw_clutter,
    free_row,
    is_inside,
    move_among,
    room_for_about,
    wrap,
)
from harness.scene.hidden import Hidden, hidden_truth
from harness.scene.models import models_of
from harness.scene.persistent_clutter import list_present, show_points
from harness.scene.truth import add_noise
from harness.study.schema import Scene


class _Room(NamedTuple):
    """Working memory for drawing detections."""

    normals: Any  # (m,)
    measurement: Any  # (m,)
    noise: Any  # (m, m)
    noise_root: Any  # (m, m)
    offset: Any  # (m,)
    unmeasured: Any  # (2,) int64, trial and scan of a state without a measurement; -1 for none


def _room(m: int) -> _Room:
    return _Room(
        np.empty(m),
        np.empty(m),
        np.empty((m, m)),
        np.empty((m, m)),
        np.empty(m),
        np.full(2, -1),
    )


@helper
def _draw_measurement(
    m: int, sensor: SensorModel, site: Any, state: Any, bias: Any, numbers: Numbers, room: _Room
) -> bool:
    """Fill room.measurement with the target's own, noise and all; False if it is no number."""
    sensor.measure(sensor.parameters, site, state, room.measurement)
    sensor.noise(sensor.parameters, site, state, room.noise)
    factorise_semidefinite(m, room.noise, room.noise_root)
    fill_normals(numbers, m, room.normals)
    add_noise(m, room.noise_root, room.normals, room.measurement)
    is_finite = True
    for i in range(m):
        room.measurement[i] += bias[i]
        is_finite = is_finite and math.isfinite(room.measurement[i])
    wrap(m, sensor.periods, room.measurement)
    return is_finite


@functools.cache
def _detection_kernel(m: int) -> Callable[..., int]:
    @kernel
    def draw_detections(
        models: Models,
        hidden: Hidden,
        states: Any,
        first_trial: int,
        numbers: Numbers,
        room: _Room,
        detections: Any,
        offsets: Any,
        origins: Any,
        outside: Any,
    ) -> int:
        sensor, detection, points = models.sensor, models.detection, hidden.points
        filled = 0
        for trial in range(states.shape[0]):
            number = first_trial + trial
            offsets[trial, 0] = filled
            present, next_point = 0, points.offsets[trial]
            luck = 1.0
            for k in range(states.shape[1]):
                site = sensor.sites[k] if sensor.sites.shape[0] > 1 else sensor.sites[0]
                state = states[trial, k]
                open_at(numbers, number, NOISE, k)
                if not _draw_measurement(m, sensor, site, state, hidden.bias, numbers, room):
                    room.unmeasured[0], room.unmeasured[1] = trial, k
                inside = is_inside(m, sensor, room.measurement, room.offset)
                outside[trial, k] = not inside

                first = filled
                filled = draw_clutter(
                    m,
                    models,
                    site,
                    hidden.clutter_levels[trial, k],
                    number,
                    k,
                    numbers,
                    filled,
                    detections,
                    room.offset,
                )
                present, next_point = list_present(
                    points, k, present, next_point, points.offsets[trial + 1]
                )
                filled = show_points(
                    m,
                    sensor,
                    points,
                    present,
                    number,
                    k,
                    numbers,
                    first,
                    filled,
                    detections,
                    room.offset,
                )

                open_at(numbers, number, DETECTION, k)
                fresh, share, held = uniform(numbers), uniform(numbers), uniform(numbers)
                if k == 0 or not held < hidden.persistence:
                    luck = fresh
                probability = detection.probability(detection.parameters, site, state)
                origins[trial, k] = NOT_DETECTED
                if inside and luck < probability:
                    found = detections[free_row(filled, detections)]
                    for i in range(m):
                        found[i] = room.measurement[i]
                    origins[trial, k] = move_among(m, share, first, filled, detections)
                    filled += 1
                offsets[trial, k + 1] = filled
        return filled

    return draw_detections


def draw_detections(
    scene: Scene, states: np.ndarray, numbers: Numbers, first_trial: int
) -> tuple[Scans, np.ndarray]:
    """Scans of given truth, with the true origins, and where the target was outside the region.

    raises      CompiledCodeError: the sensor gives no number for a state of the truth
    """
    trials, scans, _ = states.shape
    models = models_of(scene)
    m = scene.sensor.measurement_size
    hidden = hidden_truth(scene, models.sensor, numbers, first_trial, trials)
    room = _room(m)
    origins = np.empty((trials, scans), np.int64)
    offsets = np.empty((trials, scans + 1), np.int64)
    outside = np.empty((trials, scans), np.bool_)
    expected = trials * scans * (_most_clutter(models, hidden) + 1.0)
    room_needed = room_for_about(expected)
    while True:
        detections = np.empty((room_needed, m))
        filled = _detection_kernel(m)(
            models,
            hidden,
            states,
            first_trial,
            numbers,
            room,
            detections,
            offsets,
            origins,
            outside,
        )
        if filled <= room_needed:
            break
        room_needed = filled  # as numbers follow from counters, the same scans come again
    trial, scan = room.unmeasured
    if trial >= 0:
        raise CompiledCodeError(
            f"the sensor measures no number at scan {scan + 1} of trial "
            f"{first_trial + trial}, where the state is {states[trial, scan].tolist()}"
        )
    most = int(np.diff(offsets, axis=1).max())
    found = np.ascontiguousarray(detections[:filled])
    return Scans(scene.scan_intervals(), found, offsets, origins, most), outside


def _most_clutter(models: Models, hidden: Hidden) -> float:
    """Expected false detections a scan, if no point of a box were dropped."""
    m = len(models.sensor.periods)
    boxes, bumps = models.clutter.boxes, models.clutter.bumps
    volumes = np.prod(2.0 * boxes[:, m : 2 * m], axis=1)
    persistent = len(hidden.points.places) / hidden.clutter_levels.size
    return float(volumes @ boxes[:, 2 * m] + bumps[:, 2 * m].sum() + persistent)
