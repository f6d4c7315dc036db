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
from filters.detecting import log_or_minus_infinity
from filters.existence import Existence, predict_existence, update_existence
from filters.hypotheses import HYPOTHESIS, Component, Hypotheses, TotalWeight, log_total
from filters.interacting import (
    Modes,
    branch_of,
    branches_of,
    interact,
    mode_count,
    most_predicted,
    motion_of,
    room_for_mixing,
    start_in_modes,
)
from filters.linearisation.choice import move
from filters.linearisation.converted import Converted
from filters.linearisation.iterated import Iterated
from filters.linearisation.room import UpdateRoom, room_for_steps, room_for_update
from filters.linearisation.rules import PointRule
from filters.mixture import Mixture, copy_gaussian, mixture_moments, room_for_mixture
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
    start_of,
)
from filters.update import Gate, UpdateRules, explain_by_component, settle

ESTIMATE_MEAN = 0
ESTIMATE_HEAVIEST = 1


class HypothesisStrategy(NamedTuple):
    """What makes one Gaussian strategy differ from another."""

    reduce: Callable[..., Any]  # a compiled reduction for this state size
    settings: np.ndarray  # of the reduction
    rules: UpdateRules
    modes: Modes
    existence: Existence
    ending: Ending
    estimate: int  # ESTIMATE_MEAN or ESTIMATE_HEAVIEST


class Room(NamedTuple):
    """Working memory of one kernel call."""

    mixture: Mixture
    mixing: Any  # see room_for_mixing
    hypotheses: Hypotheses
    update: UpdateRoom
    steps: Any  # (modes,) see room_for_steps


def room_for(
    n: int, m: int, rules: UpdateRules, modes: Modes, reduction: Reduction, most_detections: int
) -> Room:
    """Working memory for the mixtures that a reduction leaves."""
    capacity = max(mode_count(modes), reduction.capacity)
    predicted = most_predicted(modes, capacity)
    most_rows = predicted * (1 + most_detections)
    rows_have_their_own = isinstance(rules.detecting, PointRule) or isinstance(
        rules.linearisation, Iterated | Converted
    )
    points = [len(how.points) for how in rules if isinstance(how, PointRule)]
    return Room(
        room_for_mixture(n, capacity, reduction.depth),
        room_for_mixing(n, modes),
        Hypotheses(
            zeroed_records(most_rows, HYPOTHESIS),
            np.empty((most_rows, n)),
            np.empty((2 * predicted + (most_rows if rows_have_their_own else 0), n, n)),
            np.empty((most_rows if reduction.depth else 0, reduction.depth), np.int64),
            np.empty((reduction.slots, n + 2, n)),
        ),
        room_for_update(n, m, max(points, default=0)),
        room_for_steps(n, mode_count(modes)),
    )


@helper
def _predict(
    n: int,
    how: Any,
    motion: MotionModel,
    interval: float,
    parent: int,
    slot: int,
    step: Any,
    room: Room,
) -> None:
    """Move one component on over an interval."""
    mean, covariance = room.mixture.means[parent], room.mixture.covariances[parent]
    predicted = room.hypotheses.covariances[2 * slot]
    if not motion.linear or step.filled_for != interval:
        motion.jacobian(motion.parameters, interval, mean, step.transition[:])
        motion.process_noise(motion.parameters, interval, mean, step.disturbance[:])
        step.filled_for = interval
    move(n, how, motion, interval, mean, covariance, step, predicted, room.update)


@helper
def explain_scan(
    n: int,
    m: int,
    models: Models,
    rules: UpdateRules,
    modes: Modes,
    scan: Scan,
    count: int,
    is_first: bool,
    room: Room,
) -> tuple[int, int, TotalWeight]:
    """Fill the table of hypotheses of one scan; the prior holds at the first scan as it is.

    returns     rows; components predicted; and total weight, see settle
    """
    mixture, hypotheses = room.mixture, room.hypotheses
    branches = branches_of(modes, is_first)
    rows = 0
    for slot in range(count * branches):
        parent = slot // branches
        weight, mode = branch_of(modes, mixture, parent, slot % branches, branches)
        step = room.steps[mode]
        if is_first:
            mean, covariance = mixture.means[parent], mixture.covariances[parent]
            copy_gaussian(n, mean, covariance, step.expected, hypotheses.covariances[2 * slot])
        else:
            motion = motion_of(modes, mode)
            _predict(n, rules.linearisation, motion, scan.interval, parent, slot, step, room)
        component = Component(slot, parent, mode, weight, step.expected[:])
        rows = explain_by_component(
            n, m, models, rules, scan, component, hypotheses, rows, room.update
        )
    return rows, count * branches, settle(hypotheses, rows)


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
def must_be_detected(gate: Gate, total: TotalWeight) -> bool:
    """Whether, with nothing in the gate, the model says that the target can't be missed.

    The scan's hypotheses then weigh 1 - PG together, up to rounding, and more if they can.
    """
    return log_total(total) <= log_or_minus_infinity(1.0 - gate.probability) + 1e-9


@helper
def _distance_of(origin: int, hypotheses: Hypotheses, rows: int) -> float:
    for h in range(rows):
        if hypotheses.table[h].detection == origin:
            return hypotheses.table[h].distance
    return math.nan


@helper
def _report(
    n: int,
    strategy: HypothesisStrategy,
    count: int,
    existence: float,
    empty_scans: int,
    trial: int,
    k: int,
    tracks: Tracks,
    mixture: Mixture,
) -> bool:
    """Write what the mixture says after a scan; False if the track is given up there."""
    estimate, spread = tracks.means[trial, k], tracks.covariances[trial, k]
    _estimate(n, strategy.estimate, count, mixture, estimate, spread)
    ends = existence < strategy.existence.end_below
    if ends or past_limit(strategy.ending, empty_scans, spread):
        clear_estimate(n, estimate, spread)
        return False
    tracks.present[trial, k] = True
    keep_mixture(n, mixture, count, trial, k, tracks.posteriors)
    if tracks.existence.shape[1] > 0:
        tracks.existence[trial, k] = existence
    return True


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
    mixture, hypotheses, modes = room.mixture, room.hypotheses, strategy.modes
    start = start_of(prior, scans, trial)
    count = start_in_modes(n, modes, start, mixture)
    existence = strategy.existence.start
    empty_scans = 0
    # A start that is an estimate already is reported as it is.
    for k in range(start.scan - int(start.has_estimate), scans.intervals.shape[0]):
        if k >= start.scan:
            scan = scan_of(scans, models.sensor.sites, trial, k)
            if k > 0:
                existence = predict_existence(strategy.existence, existence)
                count = interact(n, modes, mixture, count, room.mixing)
            rows, predicted, total = explain_scan(
                n, m, models, strategy.rules, modes, scan, count, k == 0, room
            )
            existence = update_existence(existence, total)
            nothing_in_gate = rows == predicted
            empty_scans = empty_scans + 1 if nothing_in_gate else 0
            tracks.hypotheses[trial] += rows
            tracks.scans_run[trial] += 1
            if nothing_in_gate and must_be_detected(strategy.rules.gate, total):
                tracks.impossible[trial] += 1
            if scan.origin >= 0:
                tracks.own_distance[trial, k] = _distance_of(scan.origin, hypotheses, rows)

            count = strategy.reduce(hypotheses, rows, scan.origin, strategy.settings, mixture)
        if not _report(n, strategy, count, existence, empty_scans, trial, k, tracks, mixture):
            return


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
