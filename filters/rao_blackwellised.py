"""The Rao-Blackwellised particle filter: associations are sampled, states are not.

A particle is a history of associations with the Kalman filter that it leads to. A scan gives it
M + 1 hypotheses, as in update; it takes one in proportion to their weights, which is the optimal
proposal, and its own weight is multiplied by their sum. So the posterior is a Gaussian mixture, and
the sum over particles is an unbiased estimate of the evidence. The estimate of a scan is taken from
the hypotheses of all particles, before any is sampled.

Source: Särkkä, Vehtari and Lampinen (2007), Information Fusion 8, Rao-Blackwellized particle filter
for multiple target tracking, here for one target.
"""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np

from filters.compiled import helper, kernel
from filters.hypotheses import Hypotheses, log_total
from filters.hypothesis_filter import Room, explain_scan, must_be_detected
from filters.interacting import OneMode
from filters.mixture import (
    Mixture,
    add_to_covariance,
    add_to_mean,
    clear_moments,
    copy_gaussian,
    forget_history,
    mirror,
)
from filters.models.contract import Models
from filters.particles.resampling import are_uneven, choose_sources
from filters.posteriors import keep_mixture
from filters.random_numbers import STRATEGY, Numbers, open_at, uniform
from filters.reductions.selection import write_row
from filters.track import (
    Ending,
    Prior,
    Scans,
    Start,
    Tracks,
    clear_estimate,
    past_limit,
    scan_of,
    start_of,
)
from filters.update import UpdateRules


class RaoBlackwellisedStrategy(NamedTuple):
    """Settings of a Rao-Blackwellised particle filter."""

    resample_below: float  # effective number of samples, a share of all
    resampling: int  # SYSTEMATIC or STRATIFIED, see resampling
    rules: UpdateRules
    modes: OneMode
    ending: Ending


class Sampling(NamedTuple):
    """Working memory beside that of the hypotheses."""

    weights: Any  # (particles,) after a scan, summing to one
    chosen: Any  # (particles,) int64: row of each in the table of hypotheses
    sources: Any  # (particles,) int64, see resampling
    log_evidence: Any  # (1,) of the trial's scans so far, over that of clutter alone


def room_for_sampling(particles: int) -> Sampling:
    """Working memory for a number of particles."""
    return Sampling(
        np.empty(particles),
        np.empty(particles, np.int64),
        np.empty(particles, np.int64),
        np.empty(1),
    )


@helper
def _start_alike(n: int, start: Start, mixture: Mixture) -> None:
    """Let every particle begin with the start."""
    particles = mixture.weights.shape[0]
    for i in range(particles):
        mixture.weights[i] = 1.0 / particles
        mixture.modes[i] = 0
        copy_gaussian(n, start.mean, start.covariance, mixture.means[i], mixture.covariances[i])
        forget_history(mixture.histories[i])


@helper
def _moments(n: int, hypotheses: Hypotheses, rows: int, mean: Any, covariance: Any) -> None:
    """Write mean (n,) and covariance (n, n) of all hypotheses together."""
    table, means, covariances = hypotheses.table, hypotheses.means, hypotheses.covariances
    clear_moments(n, mean, covariance)
    for h in range(rows):
        add_to_mean(n, table[h].weight, means[h], mean)
    for h in range(rows):
        spread = covariances[table[h].covariance]
        add_to_covariance(n, table[h].weight, means[h], spread, mean, covariance)
    mirror(n, covariance)


@helper
def _sample_associations(
    hypotheses: Hypotheses, rows: int, numbers: Numbers, sampling: Sampling
) -> None:
    """Choose a hypothesis for each particle, by one uniform number each, and weigh the particles.

    The rows of a particle stand together, in the order of the particles.
    """
    table, weights, chosen = hypotheses.table, sampling.weights, sampling.chosen
    end = 0
    for i in range(weights.shape[0]):
        first = end
        weights[i] = 0.0
        while end < rows and table[end].parent == i:
            weights[i] += table[end].weight
            end += 1
        left = uniform(numbers) * weights[i]
        chosen[i] = first
        for h in range(first, end):
            if table[h].weight > 0.0:
                chosen[i] = h
                left -= table[h].weight
                if left < 0.0:
                    break


@helper
def _run_trial(
    n: int,
    m: int,
    models: Models,
    strategy: RaoBlackwellisedStrategy,
    prior: Prior,
    scans: Scans,
    trial: int,
    first_trial: int,
    numbers: Numbers,
    tracks: Tracks,
    room: Room,
    sampling: Sampling,
) -> None:
    """Follow the target through one trial.

    A scan's random numbers are in this order: one of each particle's association; those of
    resampling.
    """
    mixture, hypotheses = room.mixture, room.hypotheses
    particles = mixture.weights.shape[0]
    start = start_of(prior, scans, trial)
    _start_alike(n, start, mixture)
    sampling.log_evidence[0] = 0.0
    empty_scans = 0
    if start.has_estimate:
        k = start.scan - 1
        if past_limit(strategy.ending, empty_scans, start.covariance):
            return
        estimate, spread = tracks.means[trial, k], tracks.covariances[trial, k]
        copy_gaussian(n, start.mean, start.covariance, estimate, spread)
        tracks.present[trial, k] = True
        keep_mixture(n, mixture, particles, trial, k, tracks.posteriors)
    for k in range(start.scan, scans.intervals.shape[0]):
        scan = scan_of(scans, models.sensor.sites, trial, k)
        open_at(numbers, first_trial + trial, STRATEGY, k)
        rows, predicted, total = explain_scan(
            n, m, models, strategy.rules, strategy.modes, scan, particles, k == 0, room
        )
        nothing_in_gate = rows == predicted
        empty_scans = empty_scans + 1 if nothing_in_gate else 0
        tracks.hypotheses[trial] += rows
        tracks.scans_run[trial] += 1
        if nothing_in_gate and must_be_detected(strategy.rules.gate, total):
            tracks.impossible[trial] += 1
        sampling.log_evidence[0] += log_total(total)

        estimate, spread = tracks.means[trial, k], tracks.covariances[trial, k]
        _moments(n, hypotheses, rows, estimate, spread)
        if past_limit(strategy.ending, empty_scans, spread):
            clear_estimate(n, estimate, spread)
            return
        tracks.present[trial, k] = True

        _sample_associations(hypotheses, rows, numbers, sampling)
        for i in range(particles):
            write_row(n, hypotheses, sampling.chosen[i], mixture, i)
            mixture.weights[i] = sampling.weights[i]
        keep_mixture(n, mixture, particles, trial, k, tracks.posteriors)
        if are_uneven(mixture.weights, strategy.resample_below):
            choose_sources(mixture.weights, strategy.resampling, numbers, sampling.sources)
            for i in range(particles):
                write_row(n, hypotheses, sampling.chosen[sampling.sources[i]], mixture, i)
                mixture.weights[i] = 1.0 / particles


@functools.cache
def compiled_rao_blackwellised_filter(n: int, m: int) -> Callable[..., None]:
    """Return the kernel for states of n and measurements of m numbers."""

    @kernel
    def run_rao_blackwellised_filter(
        models: Models,
        strategy: RaoBlackwellisedStrategy,
        prior: Prior,
        scans: Scans,
        first_trial: int,
        numbers: Numbers,
        tracks: Tracks,
        room: Room,
        sampling: Sampling,
    ) -> None:
        for trial in range(scans.offsets.shape[0]):
            _run_trial(
                n,
                m,
                models,
                strategy,
                prior,
                scans,
                trial,
                first_trial,
                numbers,
                tracks,
                room,
                sampling,
            )

    return run_rao_blackwellised_filter
