"""The particle filter, with the association of detections summed out of the likelihood.

Particles are drawn from a proposal, weighed by the likelihood of all ways to explain the scan, so
that no association is chosen and there is no gate, and resampled when few carry most of the weight.
The parts are in the folder `particles`, one idea a file.

Source: Gordon, Salmond and Smith (1993), IEE Proceedings F 140, for the proposal by the motion.
"""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import NamedTuple

from filters.compiled import helper, kernel
from filters.models.contract import Models
from filters.particles.cloud import Cloud, cloud_moments, copy_from_sources, spread_evenly
from filters.particles.nearness import has_something_near
from filters.particles.proposal import draw_start, propose, start_from
from filters.particles.resampling import are_uneven, choose_sources
from filters.particles.roughening import roughen
from filters.particles.weighing import measure_particles, weigh_by_scan
from filters.posteriors import keep_samples
from filters.random_numbers import STRATEGY, Numbers, open_at
from filters.track import (
    Ending,
    Prior,
    Scans,
    Tracks,
    clear_estimate,
    past_limit,
    scan_of,
    start_of,
)
from filters.update import Gate


class ParticleStrategy(NamedTuple):
    """Settings of a particle filter."""

    resample_below: float  # effective number of samples, a share of all
    resampling: int  # SYSTEMATIC or STRATIFIED, see resampling
    roughening: float  # the factor K, 0 for none
    gate: Gate  # only to tell whether a scan had anything near, for ending the track
    ending: Ending


@helper
def _report(
    n: int,
    strategy: ParticleStrategy,
    empty_scans: int,
    trial: int,
    k: int,
    tracks: Tracks,
    cloud: Cloud,
) -> bool:
    """Write what the particles say after a scan; False if the track is given up there."""
    mean, spread = tracks.means[trial, k], tracks.covariances[trial, k]
    cloud_moments(n, cloud, mean, spread)
    if past_limit(strategy.ending, empty_scans, spread):
        clear_estimate(n, mean, spread)
        return False
    tracks.present[trial, k] = True
    keep_samples(n, cloud.weights, cloud.states, trial, k, tracks.posteriors)
    return True


@helper
def _run_trial(
    n: int,
    m: int,
    proposal: int,
    models: Models,
    strategy: ParticleStrategy,
    prior: Prior,
    scans: Scans,
    trial: int,
    first_trial: int,
    numbers: Numbers,
    tracks: Tracks,
    cloud: Cloud,
) -> None:
    """Follow the target through one trial.

    A scan's random numbers are in this order: those of the proposal, particle after particle; those
    of resampling; those of roughening.
    """
    start = start_of(prior, scans, trial)
    start_from(n, start, cloud)
    spread_evenly(cloud)
    cloud.step[0].log_evidence = 0.0
    empty_scans = 0
    if start.has_estimate:
        k = start.scan - 1
        open_at(numbers, first_trial + trial, STRATEGY, k)
        draw_start(n, numbers, cloud)
        if not _report(n, strategy, empty_scans, trial, k, tracks, cloud):
            return
    for k in range(start.scan, scans.intervals.shape[0]):
        scan = scan_of(scans, models.sensor.sites, trial, k)
        open_at(numbers, first_trial + trial, STRATEGY, k)
        propose(n, m, proposal, models, scan, k == 0, numbers, cloud)
        measure_particles(m, models, scan, cloud)
        if strategy.ending.empty_scans > 0:
            near = has_something_near(m, proposal, models, scan, strategy.gate, cloud)
            empty_scans = 0 if near else empty_scans + 1
        if not weigh_by_scan(m, proposal, models, scan, cloud):
            tracks.impossible[trial] += 1
        tracks.scans_run[trial] += 1
        if not _report(n, strategy, empty_scans, trial, k, tracks, cloud):
            return
        if are_uneven(cloud.weights, strategy.resample_below):
            choose_sources(cloud.weights, strategy.resampling, numbers, cloud.sources)
            copy_from_sources(n, cloud)
            if strategy.roughening > 0.0:
                roughen(n, strategy.roughening, numbers, cloud)


@functools.cache
def compiled_particle_filter(n: int, m: int, proposal: int) -> Callable[..., None]:
    """Return the kernel for states of n and measurements of m numbers, and a proposal.

    proposal    MOTION or DETECTIONS; known when compiling, so that the one without detections stays
                as fast as if it were alone
    """

    @kernel
    def run_particle_filter(
        models: Models,
        strategy: ParticleStrategy,
        prior: Prior,
        scans: Scans,
        first_trial: int,
        numbers: Numbers,
        tracks: Tracks,
        cloud: Cloud,
    ) -> None:
        for trial in range(scans.offsets.shape[0]):
            _run_trial(
                n,
                m,
                proposal,
                models,
                strategy,
                prior,
                scans,
                trial,
                first_trial,
                numbers,
                tracks,
                cloud,
            )

    return run_particle_filter
