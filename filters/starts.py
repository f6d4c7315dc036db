"""Tracks started from detections, by one point or by two.

No strategy is told which detection is the target's, so the assumed prior points to the first one.
Until the start it is moved on by the motion, scan after scan. In the first scan with a detection in
the gate around its position, on the sum of both covariances, the one of least squared distance is
taken. Before the start there is no track.

One point: position and covariance y, C of that detection, and a velocity of zero with a stated
spread. Two points: in the next scan the detection nearest to the first is taken, of those that the
noise explains for some target no faster than stated: what is left of the way between them beyond
that target's must lie in the gate, on the sum of both covariances. If there is none, that scan is
searched as the first one was. Otherwise, at an interval of T,

    position  y_2                     covariance  C_2      C_2 / T
    velocity  (y_2 - y_1) / T                     C_2 / T  (C_1 + C_2) / T^2

which neglects the process noise of the interval. What the state holds besides keeps the moved
prior's mean and covariance, uncorrelated with these. Who is told origins takes the target's own
detections instead, wherever they are.

Source: two points: Bar-Shalom, Li and Kirubarajan (2001), section 5.5.3; one point: Mallick and
La Scala (2008), Comparison of single-point and two-point difference track initiation algorithms
using position measurements (both from memory).
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np

from filters.cholesky import factorise, squared_distance
from filters.compiled import helper, kernel
from filters.gaussian import predict_covariance
from filters.hypotheses import NOT_DETECTED
from filters.mixture import copy_gaussian
from filters.models.contract import Models, MotionModel, SensorModel
from filters.records import zeroed_records
from filters.track import ORIGIN_UNKNOWN, Prior, Scan, Scans, scan_of, start_of

_NONE = NOT_DETECTED


class StartRule(NamedTuple):
    """How a track starts from detections."""

    points: int  # 1 or 2
    speed: float  # m/s: of one point the velocity's standard deviation, of two the greatest speed
    gate_limit: float  # squared distance; infinite without a gate


@helper
def _move_prior(n: int, motion: MotionModel, interval: float, room: Any) -> None:
    """Move the prior on over an interval, s."""
    expected = room.expected[:]
    motion.transition(motion.parameters, interval, expected, room.moved[:])
    motion.jacobian(motion.parameters, interval, expected, room.transition[:])
    motion.process_noise(motion.parameters, interval, expected, room.disturbance[:])
    predict_covariance(
        n, room.transition, room.disturbance, room.covariance, room.square, room.moved_covariance
    )
    copy_gaussian(n, room.moved, room.moved_covariance, room.expected, room.covariance)


@helper
def _convert(m: int, sensor: SensorModel, scan: Scan, j: int, point: Any, room: Any) -> bool:
    """Write position and covariance of a detection, (m + 1, m); False if it has none."""
    stretch = sensor.convert(sensor.parameters, scan.site, scan.detections[j], point)
    return stretch > 0.0 and factorise(m, point[1:], room.factor)


@helper
def _distance(m: int, first: Any, second: Any, room: Any) -> float:
    """Squared distance of room.difference on the sum of two covariances; infinite if it fails."""
    for row in range(m):
        for column in range(m):
            room.spread[row, column] = first[row, column] + second[row, column]
    if not factorise(m, room.spread, room.factor):
        return math.inf
    return squared_distance(m, room.factor, room.difference, room.solved)


@helper
def _choose_first(m: int, sensor: SensorModel, scan: Scan, limit: float, room: Any) -> int:
    """The detection nearest to the prior in its gate."""
    if scan.origin != ORIGIN_UNKNOWN:
        return scan.origin
    chosen, least = _NONE, limit
    for j in range(scan.detections.shape[0]):
        if not _convert(m, sensor, scan, j, room.candidate[:], room):
            continue
        for axis in range(m):
            room.difference[axis] = room.candidate[0, axis] - room.expected[axis]
        distance = _distance(m, room.candidate[1:], room.covariance, room)
        if distance < least:
            chosen, least = j, distance
    return chosen


@helper
def _choose_second(
    m: int, sensor: SensorModel, scan: Scan, reach: float, limit: float, room: Any
) -> int:
    """The detection nearest to the first point, of those that a target could have come to.

    reach       m, the way of the fastest target since then
    """
    if scan.origin != ORIGIN_UNKNOWN:
        return scan.origin
    chosen, least = _NONE, math.inf
    for j in range(scan.detections.shape[0]):
        if not _convert(m, sensor, scan, j, room.candidate[:], room):
            continue
        square = 0.0
        for axis in range(m):
            room.difference[axis] = room.candidate[0, axis] - room.first[0, axis]
            square += room.difference[axis] * room.difference[axis]
        way = math.sqrt(square)
        left = 1.0 - reach / way if way > reach else 0.0  # of the way, to be explained by noise
        for axis in range(m):
            room.difference[axis] *= left
        if way < least and _distance(m, room.candidate[1:], room.first[1:], room) < limit:
            chosen, least = j, way
    return chosen


@helper
def _write_rest(n: int, m: int, room: Any, mean: Any, covariance: Any) -> None:
    """Write what the prior says of all but position and velocity, and zeros elsewhere."""
    for row in range(n):
        mean[row] = room.expected[row] if row >= 2 * m else 0.0
        for column in range(n):
            is_rest = row >= 2 * m and column >= 2 * m
            covariance[row, column] = room.covariance[row, column] if is_rest else 0.0


@helper
def _write_one_point(m: int, speed: float, room: Any, mean: Any, covariance: Any) -> None:
    for row in range(m):
        mean[row] = room.first[0, row]
        covariance[m + row, m + row] = speed * speed
        for column in range(m):
            covariance[row, column] = room.first[1 + row, column]


@helper
def _write_two_points(m: int, interval: float, room: Any, mean: Any, covariance: Any) -> None:
    for row in range(m):
        mean[row] = room.second[0, row]
        mean[m + row] = (room.second[0, row] - room.first[0, row]) / interval
        for column in range(m):
            of_first, of_second = room.first[1 + row, column], room.second[1 + row, column]
            covariance[row, column] = of_second
            covariance[row, m + column] = of_second / interval
            covariance[m + row, column] = of_second / interval
            covariance[m + row, m + column] = (of_first + of_second) / (interval * interval)


@helper
def _start_trial(
    n: int,
    m: int,
    models: Models,
    rule: StartRule,
    scans: Scans,
    trial: int,
    room: Any,
    mean: Any,
    covariance: Any,
) -> int:
    """Write the start of one trial; return its scan, or the number of scans if there is none."""
    sensor, length = models.sensor, scans.intervals.shape[0]
    has_first = False
    for k in range(length):
        scan = scan_of(scans, sensor.sites, trial, k)
        if k > 0:
            _move_prior(n, models.motion, scan.interval, room)
        if has_first:
            reach = rule.speed * scan.interval
            chosen = _choose_second(m, sensor, scan, reach, rule.gate_limit, room)
            if chosen != _NONE and _convert(m, sensor, scan, chosen, room.second[:], room):
                _write_rest(n, m, room, mean, covariance)
                _write_two_points(m, scan.interval, room, mean, covariance)
                return k
        chosen = _choose_first(m, sensor, scan, rule.gate_limit, room)
        has_first = chosen != _NONE and _convert(m, sensor, scan, chosen, room.first[:], room)
        if has_first and rule.points == 1:
            _write_rest(n, m, room, mean, covariance)
            _write_one_point(m, rule.speed, room, mean, covariance)
            return k
    return length


@functools.cache
def _compiled_starts(n: int, m: int) -> Callable[..., None]:
    @kernel
    def start_from_detections(
        models: Models, rule: StartRule, cue: Prior, scans: Scans, rooms: Any, started: Prior
    ) -> None:
        room = rooms[0]
        for trial in range(started.scans.shape[0]):
            told = start_of(cue, scans, trial)
            copy_gaussian(n, told.mean, told.covariance, room.expected, room.covariance)
            mean, covariance = started.means[trial], started.covariances[trial]
            started.scans[trial] = _start_trial(
                n, m, models, rule, scans, trial, room, mean, covariance
            )

    return start_from_detections


def started_from_detections(models: Models, rule: StartRule, cue: Prior, scans: Scans) -> Prior:
    """Where each trial of a batch starts, by its own detections.

    cue         the prior that points to the first detection; it holds at the first scan
    returns     a Prior with means, covariances and scans of its own for each trial
    """
    n, m, trials = len(cue.mean), scans.detections.shape[1], len(scans.origins)
    started = cue._replace(
        means=np.full((trials, n), np.nan),
        covariances=np.full((trials, n, n), np.nan),
        scans=np.zeros(trials, np.int64),
    )
    _compiled_starts(n, m)(models, rule, cue, scans, _room(n, m), started)
    return started


def _room(n: int, m: int) -> np.ndarray:
    """Working memory: one record."""
    return zeroed_records(
        1,
        [
            ("expected", float, (n,)),  # mean of the prior, moved to the scan
            ("covariance", float, (n, n)),
            ("moved", float, (n,)),
            ("moved_covariance", float, (n, n)),
            ("transition", float, (n, n)),
            ("disturbance", float, (n, n)),
            ("square", float, (n, n)),
            # detections: a position and, below, its covariance
            ("candidate", float, (m + 1, m)),
            ("first", float, (m + 1, m)),
            ("second", float, (m + 1, m)),
            # a distance
            ("difference", float, (m,)),
            ("spread", float, (m, m)),
            ("factor", float, (m, m)),
            ("solved", float, (m,)),
        ],
    )
