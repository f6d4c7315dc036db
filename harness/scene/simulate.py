"""Scenes drawn from a study's scene: truth first, then detections of whatever truth there is.

Numbers are shared and nested between conditions: the same trial draws the same numbers whatever is
swept. One uniform number a scan decides detection. Clutter is a Poisson process under the graph of
its intensity: points come at heights that grow by exponential steps, uniform over the region, and
those above the graph are dropped; so a denser condition goes on where a sparser one stops.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np

from filters.cholesky import factorise_semidefinite
from filters.compiled import helper, kernel
from filters.hypotheses import NOT_DETECTED
from filters.models.contract import Models, MotionModel, SensorModel
from filters.random_numbers import (
    CLUTTER,
    DETECTION,
    MOTION,
    NOISE,
    START,
    Numbers,
    exponential,
    fill_normals,
    open_at,
    uniform,
)
from filters.track import Prior, Scans
from filters.update import difference
from harness.scene.batch import SceneBatch, Truth
from harness.study.schema import Scene


class _Room(NamedTuple):
    """Working memory for drawing scenes."""

    square: Any  # (n, n)
    root: Any  # (n, n)
    filled_for: Any  # (1,) s, the interval of these two; kept while the motion is linear
    normals: Any  # (max(n, m),)
    moved: Any  # (n,)
    measurement: Any  # (m,)
    noise: Any  # (m, m)
    noise_root: Any  # (m, m)
    offset: Any  # (m,)


def _room(n: int, m: int) -> _Room:
    return _Room(
        np.empty((n, n)),
        np.empty((n, n)),
        np.full(1, np.nan),
        np.empty(max(n, m)),
        np.empty(n),
        np.empty(m),
        np.empty((m, m)),
        np.empty((m, m)),
        np.empty(m),
    )


@helper
def _add_noise(size: int, root: Any, normals: Any, out: Any) -> None:
    """Add root @ normals; root (size, size) lower triangular."""
    for row in range(size):
        for k in range(row + 1):
            out[row] += root[row, k] * normals[k]


@helper
def _draw_start(n: int, prior: Prior, numbers: Numbers, room: _Room, state: Any) -> None:
    factorise_semidefinite(n, prior.covariance, room.root)
    fill_normals(numbers, n, room.normals)
    for row in range(n):
        state[row] = prior.mean[row]
    _add_noise(n, room.root, room.normals, state)
    room.filled_for[0] = math.nan


@helper
def _draw_step(
    n: int,
    motion: MotionModel,
    interval: float,
    numbers: Numbers,
    room: _Room,
    before: Any,
    out: Any,
) -> None:
    if not motion.linear or room.filled_for[0] != interval:
        motion.process_noise(motion.parameters, interval, before, room.square)
        factorise_semidefinite(n, room.square, room.root)
        room.filled_for[0] = interval
    motion.transition(motion.parameters, interval, before, out)
    fill_normals(numbers, n, room.normals)
    _add_noise(n, room.root, room.normals, out)


@functools.cache
def _truth_kernel(n: int) -> Callable[..., None]:
    @kernel
    def draw_truth(
        motion: MotionModel,
        prior: Prior,
        intervals: Any,
        first_trial: int,
        numbers: Numbers,
        room: _Room,
        states: Any,
    ) -> None:
        for trial in range(states.shape[0]):
            open_at(numbers, first_trial + trial, START, 0)
            _draw_start(n, prior, numbers, room, states[trial, 0])
            for k in range(1, states.shape[1]):
                open_at(numbers, first_trial + trial, MOTION, k)
                before, after = states[trial, k - 1], states[trial, k]
                _draw_step(n, motion, intervals[k], numbers, room, before, after)

    return draw_truth


@helper
def _wrap(m: int, periods: Any, measurement: Any) -> None:
    for i in range(m):
        if periods[i] > 0.0:
            measurement[i] -= periods[i] * round(measurement[i] / periods[i])


@helper
def _is_inside(m: int, sensor: SensorModel, measurement: Any, offset: Any) -> bool:
    difference(m, sensor.periods, measurement, sensor.region_centre, offset)
    for i in range(m):
        if abs(offset[i]) > sensor.region_half_width[i]:
            return False
    return True


@helper
def _draw_measurement(
    m: int, sensor: SensorModel, site: Any, state: Any, numbers: Numbers, room: _Room
) -> None:
    """Fill room.measurement with the target's own measurement, noise and all."""
    sensor.measure(sensor.parameters, site, state, room.measurement)
    sensor.noise(sensor.parameters, site, state, room.noise)
    factorise_semidefinite(m, room.noise, room.noise_root)
    fill_normals(numbers, m, room.normals)
    _add_noise(m, room.noise_root, room.normals, room.measurement)
    _wrap(m, sensor.periods, room.measurement)


@helper
def _draw_clutter(
    m: int, models: Models, site: Any, numbers: Numbers, detections: Any, filled: int
) -> int:
    """Append the clutter of a scan; return how many detections there are now.

    Where the room ends, points are counted but not written.
    """
    sensor, clutter = models.sensor, models.clutter
    volume = 1.0
    for i in range(m):
        volume *= 2.0 * sensor.region_half_width[i]
    height = exponential(numbers)  # times volume
    while height < clutter.highest * volume:
        place = min(filled, detections.shape[0] - 1)
        for i in range(m):
            share = 2.0 * uniform(numbers) - 1.0
            detections[place, i] = sensor.region_centre[i] + share * sensor.region_half_width[i]
        _wrap(m, sensor.periods, detections[place])
        intensity = clutter.intensity(clutter.parameters, site, detections[place])
        if height < intensity * volume:
            filled += 1
        height += exponential(numbers)
    return filled


@helper
def _put_among(
    m: int, measurement: Any, share: float, first: int, end: int, detections: Any
) -> int:
    """Put the target's detection at a random place among the scan's; return that place."""
    place = min(int(share * (end - first + 1)), end - first)
    last = min(end, detections.shape[0] - 1)
    at = min(first + place, last)
    for i in range(m):
        detections[last, i] = detections[at, i]
        detections[at, i] = measurement[i]
    return place


@functools.cache
def _detection_kernel(n: int, m: int) -> Callable[..., int]:
    @kernel
    def draw_detections(
        models: Models,
        states: Any,
        first_trial: int,
        numbers: Numbers,
        room: _Room,
        detections: Any,
        offsets: Any,
        origins: Any,
        outside: Any,
    ) -> int:
        sensor, detection = models.sensor, models.detection
        filled = 0
        for trial in range(states.shape[0]):
            offsets[trial, 0] = filled
            for k in range(states.shape[1]):
                number = first_trial + trial
                site = sensor.sites[k] if sensor.sites.shape[0] > 1 else sensor.sites[0]
                state = states[trial, k]
                open_at(numbers, number, NOISE, k)
                _draw_measurement(m, sensor, site, state, numbers, room)
                inside = _is_inside(m, sensor, room.measurement, room.offset)
                outside[trial, k] = not inside

                first = filled
                open_at(numbers, number, CLUTTER, k)
                filled = _draw_clutter(m, models, site, numbers, detections, filled)

                open_at(numbers, number, DETECTION, k)
                luck, share = uniform(numbers), uniform(numbers)
                probability = detection.probability(detection.parameters, site, state)
                origins[trial, k] = NOT_DETECTED
                if inside and luck < probability:
                    origins[trial, k] = _put_among(
                        m, room.measurement, share, first, filled, detections
                    )
                    filled += 1
                offsets[trial, k + 1] = filled
        return filled

    return draw_detections


def models_of(scene: Scene) -> Models:
    """Functions and parameters of a scene's target and sensor, for the kernels."""
    sensor = scene.sensor
    return Models(
        scene.target.motion_model(),
        sensor.sensor_model(),
        sensor.detection_model(),
        sensor.clutter_model(),
    )


def prior_of(scene: Scene) -> Prior:
    """The prior that a scene states, at the time of its first scan."""
    return Prior(scene.target.start_mean(), scene.target.start_spread())


def draw_truth(scene: Scene, numbers: Numbers, first_trial: int, trials: int) -> np.ndarray:
    """States of consecutive trials, (trials, scans, n): start from the prior, then the motion."""
    prior = prior_of(scene)
    n = len(prior.mean)
    states = np.empty((trials, scene.scans, n))
    _truth_kernel(n)(
        scene.target.motion_model(),
        prior,
        scene.scan_intervals(),
        first_trial,
        numbers,
        _room(n, 1),
        states,
    )
    return states


def draw_detections(
    scene: Scene, states: np.ndarray, numbers: Numbers, first_trial: int
) -> tuple[Scans, np.ndarray]:
    """Scans of given truth, with the true origins, and where the target was outside the region."""
    trials, scans, n = states.shape
    models = models_of(scene)
    m = scene.sensor.measurement_size
    origins = np.empty((trials, scans), np.int64)
    offsets = np.empty((trials, scans + 1), np.int64)
    outside = np.empty((trials, scans), np.bool_)
    expected = trials * scans * (scene.sensor.region_volume() * models.clutter.highest + 1.0)
    room_needed = int(expected + 6.0 * math.sqrt(expected) + 16.0)
    while True:
        detections = np.empty((room_needed, m))
        filled = _detection_kernel(n, m)(
            models, states, first_trial, numbers, _room(n, m), detections, offsets, origins, outside
        )
        if filled <= room_needed:
            break
        room_needed = filled  # as numbers follow from counters, the same scans come again
    most = int(np.diff(offsets, axis=1).max())
    found = np.ascontiguousarray(detections[:filled])
    return Scans(scene.scan_intervals(), found, offsets, origins, most), outside


def draw_scenes(scene: Scene, numbers: Numbers, first_trial: int, trials: int) -> SceneBatch:
    """Scenes of consecutive trials."""
    states = draw_truth(scene, numbers, first_trial, trials)
    scans, outside = draw_detections(scene, states, numbers, first_trial)
    axes = scene.target.axes
    return SceneBatch(first_trial, Truth(states, outside, axes), scans)
