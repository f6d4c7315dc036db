"""Every Gaussian strategy: predict each component, form all hypotheses, reduce, and so on.

Strategies differ in their reduction, the settings of it, and the gate. One kernel serves them all
and runs a whole batch of trials in one call.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np

from filters.compiled import helper, kernel
from filters.gaussian import predict_covariance
from filters.hypotheses import HYPOTHESIS, Hypotheses
from filters.linearise import room_for_prediction
from filters.mixture import (
    Mixture,
    copy_gaussian,
    forget_history,
    mixture_moments,
    room_for_mixture,
)
from filters.models.contract import Models, MotionModel
from filters.posteriors import keep_mixture
from filters.records import zeroed_records
from filters.reductions.reduction import Reduction
from filters.track import (
    Ending,
    Prior,
    Scan,
    Scans,
    Tracks,
    clear_estimate,
    past_limit,
    scan_of,
)
from filters.update import Gate, explain_by_component, settle

ESTIMATE_MEAN = 0
ESTIMATE_HEAVIEST = 1


class HypothesisStrategy(NamedTuple):
    """What makes one Gaussian strategy differ from another."""

    reduce: Callable[..., Any]  # a compiled reduction for this state size
    settings: np.ndarray  # of the reduction
    gate: Gate
    ending: Ending
    estimate: int  # ESTIMATE_MEAN or ESTIMATE_HEAVIEST


class Room(NamedTuple):
    """Working memory of one kernel call."""

    mixture: Mixture
    hypotheses: Hypotheses
    prediction: Any  # see room_for_prediction
    step: Any  # see _room_for_step


def room_for(n: int, m: int, reduction: Reduction, most_detections: int) -> Room:
    """Working memory for the mixtures that a reduction leaves."""
    capacity = reduction.capacity
    most_rows = capacity * (1 + most_detections)
    return Room(
        room_for_mixture(n, capacity, reduction.depth),
        Hypotheses(
            zeroed_records(most_rows, HYPOTHESIS),
            np.empty((most_rows, n)),
            np.empty((2 * capacity, n, n)),
            np.empty((most_rows if reduction.depth else 0, reduction.depth), np.int64),
            np.empty((reduction.slots, n + 2, n)),
        ),
        room_for_prediction(n, m),
        _room_for_step(n, m),
    )


def _room_for_step(n: int, m: int) -> np.ndarray:
    """Room for moving one component on and comparing it with detections: one record."""
    room = zeroed_records(
        1,
        [
            ("expected", float, (n,)),  # mean after the interval
            ("transition", float, (n, n)),  # Jacobian of the motion
            ("disturbance", float, (n, n)),  # process noise
            ("filled_for", float),  # s, the interval of these two; kept while the motion is linear
            ("square", float, (n, n)),
            ("differences", float, (2, m)),
        ],
    )
    room["filled_for"] = math.nan
    return room


@helper
def _predict(n: int, motion: MotionModel, interval: float, component: int, room: Room) -> None:
    """Move one component on over an interval."""
    before, step = room.mixture.means[component], room.step[0]
    if not motion.linear or step.filled_for != interval:
        motion.jacobian(motion.parameters, interval, before, step.transition[:])
        motion.process_noise(motion.parameters, interval, before, step.disturbance[:])
        step.filled_for = interval
    motion.transition(motion.parameters, interval, before, step.expected[:])
    predict_covariance(
        n,
        step.transition,
        step.disturbance,
        room.mixture.covariances[component],
        step.square,
        room.hypotheses.covariances[2 * component],
    )


@helper
def explain_scan(
    n: int, m: int, models: Models, gate: Gate, scan: Scan, count: int, is_first: bool, room: Room
) -> int:
    """Fill the table of hypotheses of one scan; the prior holds at the first scan as it is."""
    mixture, hypotheses, step = room.mixture, room.hypotheses, room.step[0]
    rows = 0
    for component in range(count):
        if is_first:
            copy_gaussian(
                n,
                mixture.means[component],
                mixture.covariances[component],
                step.expected,
                hypotheses.covariances[2 * component],
            )
        else:
            _predict(n, models.motion, scan.interval, component, room)
        rows = explain_by_component(
            n,
            m,
            models,
            gate,
            scan,
            component,
            mixture.weights[component],
            step.expected[:],
            hypotheses,
            rows,
            room.prediction[0],
            step.differences,
        )
    settle(hypotheses, rows, mixture.weights)
    return rows


@helper
def _estimate(n: int, choice: int, count: int, mixture: Mixture, mean: Any, spread: Any) -> None:
    """Write what the mixture says as one Gaussian."""
    if count > 1 and choice == ESTIMATE_MEAN:
        mixture_moments(n, mixture, count, mean, spread)
        return
    heaviest = 0
    for component in range(1, count):
        if mixture.weights[component] > mixture.weights[heaviest]:
            heaviest = component
    copy_gaussian(n, mixture.means[heaviest], mixture.covariances[heaviest], mean, spread)


@helper
def must_be_detected(models: Models, scan: Scan, hypotheses: Hypotheses, rows: int) -> bool:
    """Whether the model says that the target can't be missed, wherever it is."""
    for h in range(rows):
        detected = models.detection.probability(
            models.detection.parameters, scan.site, hypotheses.means[h]
        )
        if detected < 1.0:
            return False
    return True


@helper
def _distance_of(origin: int, hypotheses: Hypotheses, rows: int) -> float:
    for h in range(rows):
        if hypotheses.table[h].detection == origin:
            return hypotheses.table[h].distance
    return math.nan


@helper
def _run_trial(
    n: int,
    m: int,
    models: Models,
    strategy: HypothesisStrategy,
    prior: Prior,
    scans: Scans,
    trial: int,
    tracks: Tracks,
    room: Room,
) -> None:
    mixture, hypotheses = room.mixture, room.hypotheses
    mixture.weights[0] = 1.0
    mean = prior.means[trial] if prior.means.shape[0] > 0 else prior.mean
    copy_gaussian(n, mean, prior.covariance, mixture.means[0], mixture.covariances[0])
    forget_history(mixture.histories[0])
    count = 1
    empty_scans = 0
    for k in range(scans.intervals.shape[0]):
        scan = scan_of(scans, models.sensor.sites, trial, k)
        rows = explain_scan(n, m, models, strategy.gate, scan, count, k == 0, room)
        nothing_in_gate = rows == count
        empty_scans = empty_scans + 1 if nothing_in_gate else 0
        tracks.hypotheses[trial] += rows
        tracks.scans_run[trial] += 1
        if nothing_in_gate and must_be_detected(models, scan, hypotheses, rows):
            tracks.impossible[trial] += 1
        if scan.origin >= 0:
            tracks.own_distance[trial, k] = _distance_of(scan.origin, hypotheses, rows)

        count = strategy.reduce(hypotheses, rows, scan.origin, strategy.settings, mixture)

        estimate, spread = tracks.means[trial, k], tracks.covariances[trial, k]
        _estimate(n, strategy.estimate, count, mixture, estimate, spread)
        if past_limit(strategy.ending, empty_scans, spread):
            clear_estimate(n, estimate, spread)
            return
        tracks.present[trial, k] = True
        keep_mixture(n, mixture, count, trial, k, tracks.posteriors)


@functools.cache
def compiled_filter(n: int, m: int) -> Callable[..., None]:
    """Return the kernel for states of n and measurements of m numbers.

    Sizes are known when compiling, so that loops over them unroll: about three times as fast.
    """

    @kernel
    def run_hypothesis_filter(
        models: Models,
        strategy: HypothesisStrategy,
        prior: Prior,
        scans: Scans,
        tracks: Tracks,
        room: Room,
    ) -> None:
        for trial in range(scans.offsets.shape[0]):
            _run_trial(n, m, models, strategy, prior, scans, trial, tracks, room)

    return run_hypothesis_filter
