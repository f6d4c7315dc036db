"""The truth of a scene: drawn from the prior and the motion, or along stated legs."""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np

from filters.cholesky import factorise_semidefinite
from filters.compiled import helper, kernel
from filters.models.contract import MotionModel
from filters.random_numbers import MOTION, START, Numbers, fill_normals, open_at
from filters.track import Prior
from harness.study.legs import states_along
from harness.study.schema import Scene


class _Room(NamedTuple):
    """Working memory for drawing truth."""

    square: Any  # (n, n)
    root: Any  # (n, n)
    filled_for: Any  # (1,) s, the interval of these two; kept while the motion is linear
    normals: Any  # (n,)


def _room(n: int) -> _Room:
    return _Room(np.empty((n, n)), np.empty((n, n)), np.full(1, np.nan), np.empty(n))


@helper
def add_noise(size: int, root: Any, normals: Any, out: Any) -> None:
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
    add_noise(n, room.root, room.normals, state)
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
    add_noise(n, room.root, room.normals, out)


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


def prior_of(scene: Scene) -> Prior:
    """The prior that a scene states, at the time of its first scan."""
    return Prior(scene.target.start_mean(), scene.target.start_spread())


def draw_truth(scene: Scene, numbers: Numbers, first_trial: int, trials: int) -> np.ndarray:
    """States of consecutive trials, (trials, scans, n).

    Without legs they start from the prior and follow the motion; along legs all trials are the
    same, and a state holds position, velocity and acceleration.
    """
    if scene.legs is not None:
        return np.repeat(_states_along_legs(scene)[np.newaxis], trials, axis=0)
    return _drawn(scene, prior_of(scene), scene.scan_intervals(), numbers, first_trial, trials)


def draw_starts(
    scene: Scene, prior: Prior, numbers: Numbers, first_trial: int, trials: int
) -> np.ndarray:
    """States at the first scan drawn from a prior of the scene's target, (trials, n)."""
    return _drawn(scene, prior, np.zeros(1), numbers, first_trial, trials)[:, 0]


def _drawn(
    scene: Scene,
    prior: Prior,
    intervals: np.ndarray,
    numbers: Numbers,
    first_trial: int,
    trials: int,
) -> np.ndarray:
    n = len(prior.mean)
    states = np.empty((trials, len(intervals), n))
    motion = scene.target.motion_model()
    _truth_kernel(n)(motion, prior, intervals, first_trial, numbers, _room(n), states)
    return states


def _states_along_legs(scene: Scene) -> np.ndarray:
    assert scene.legs is not None
    axes = scene.target.axes
    position, velocity = np.split(scene.target.start_mean()[: 2 * axes], 2)
    times = scene.scan_times()
    return states_along(scene.legs, position, velocity, times - times[0])
