"""The bootstrap particle filter, with the association of detections summed out of the likelihood.

Particles move by the motion model, and a scan weighs each by

    1 - PD(x) + sum over detections j of PD(x) g(z_j | x) / lambda(z_j)

so no association is chosen and there is no gate. They are resampled systematically when the
effective number of samples falls below a share of their count.

Source: Gordon, Salmond and Smith (1993), IEE Proceedings F 140; systematic resampling: Kitagawa
(1996), Journal of Computational and Graphical Statistics 5.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np

from filters.cholesky import (
    factorise,
    factorise_semidefinite,
    inverse_root_determinant,
    squared_distance,
)
from filters.compiled import helper, kernel
from filters.mixture import add_to_mean, clear_moments, mirror
from filters.models.contract import Models, SensorModel
from filters.random_numbers import STRATEGY, Numbers, fill_normals, open_at, uniform
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
from filters.update import HALF_LOG_TWO_PI, Gate, difference, log_or_minus_infinity

# exp(-x) is no longer a number above zero.
_UNDERFLOW = 745.2
# Terms that together are this much lighter, as a logarithm, than the sum they join leave no trace.
_NO_TRACE = 38.0
# Likelihoods between the bound and its reciprocal keep all their digits.
_IN_RANGE = 1e-200


class ParticleStrategy(NamedTuple):
    """Settings of a bootstrap filter."""

    particles: int
    resample_below: float  # share of `particles`
    gate: Gate  # only to tell whether a scan had anything near, for ending the track
    ending: Ending


class Cloud(NamedTuple):
    """Working memory of one kernel call; row i belongs to particle i."""

    states: Any  # (particles, n)
    moved: Any  # (particles, n)
    weights: Any  # (particles,), summing to one
    measurements: Any  # (particles, m) expected of each
    detected: Any  # (particles,) PD of each
    likelihoods: Any  # (particles,) of the scan, scaled alike
    noise: Any  # (m, m)
    noise_factor: Any  # (m, m), see cholesky
    disturbance: Any  # (n, n)
    disturbance_root: Any  # (n, n) L of process noise L L'
    filled_for: Any  # (1,) s, the interval of these two; kept while the motion is linear
    normals: Any  # (n,)
    differences: Any  # (2, m)
    box: Any  # (4, m) cloud in the measurement: reference, least and most offset, greatest variance
    near: Any  # (most detections,) int64: detections that some particle could explain
    log_clutter: Any  # (most detections,)
    middle: Any  # (m,) mean of the measurements
    spread: Any  # (m, m) their covariance


def cloud_for(n: int, m: int, particles: int, most_detections: int) -> Cloud:
    """Working memory for a number of particles and of detections in a scan."""
    return Cloud(
        np.empty((particles, n)),
        np.empty((particles, n)),
        np.empty(particles),
        np.empty((particles, m)),
        np.empty(particles),
        np.empty(particles),
        np.empty((m, m)),
        np.empty((m, m)),
        np.empty((n, n)),
        np.empty((n, n)),
        np.full(1, np.nan),
        np.empty(n),
        np.empty((2, m)),
        np.empty((4, m)),
        np.empty(max(1, most_detections), np.int64),
        np.empty(max(1, most_detections)),
        np.empty(m),
        np.empty((m, m)),
    )


@helper
def _draw_from_prior(n: int, prior: Prior, trial: int, numbers: Numbers, cloud: Cloud) -> None:
    root, normals = cloud.disturbance_root, cloud.normals
    mean = prior.means[trial] if prior.means.shape[0] > 0 else prior.mean
    factorise_semidefinite(n, prior.covariance, root)
    particles = cloud.weights.shape[0]
    for i in range(particles):
        fill_normals(numbers, n, normals)
        for row in range(n):
            value = mean[row]
            for k in range(row + 1):
                value += root[row, k] * normals[k]
            cloud.states[i, row] = value
        cloud.weights[i] = 1.0 / particles


@helper
def _move(n: int, models: Models, interval: float, numbers: Numbers, cloud: Cloud) -> None:
    motion, root, normals = models.motion, cloud.disturbance_root, cloud.normals
    for i in range(cloud.weights.shape[0]):
        state, moved = cloud.states[i], cloud.moved[i]
        if not motion.linear or cloud.filled_for[0] != interval:
            motion.process_noise(motion.parameters, interval, state, cloud.disturbance)
            factorise_semidefinite(n, cloud.disturbance, root)
            cloud.filled_for[0] = interval
        motion.transition(motion.parameters, interval, state, moved)
        fill_normals(numbers, n, normals)
        for row in range(n):
            value = moved[row]
            for k in range(row + 1):
                value += root[row, k] * normals[k]
            state[row] = value


@helper
def _measure(m: int, models: Models, scan: Scan, cloud: Cloud) -> None:
    """Fill expected measurements, PD, and the box that holds the cloud in the measurement."""
    sensor, detection, box = models.sensor, models.detection, cloud.box
    for i in range(cloud.weights.shape[0]):
        state, measurement = cloud.states[i], cloud.measurements[i]
        sensor.measure(sensor.parameters, scan.site, state, measurement)
        cloud.detected[i] = detection.probability(detection.parameters, scan.site, state)
        if i == 0 or not sensor.same_noise:
            sensor.noise(sensor.parameters, scan.site, state, cloud.noise)
        if i == 0:
            for a in range(m):
                box[0, a] = measurement[a]
                box[1, a] = 0.0
                box[2, a] = 0.0
                box[3, a] = 0.0
        offset = cloud.differences[0]
        difference(m, sensor.periods, measurement, box[0], offset)
        for a in range(m):
            box[1, a] = min(box[1, a], offset[a])
            box[2, a] = max(box[2, a], offset[a])
            box[3, a] = max(box[3, a], cloud.noise[a, a])


@helper
def _squared_distance_to_box(m: int, sensor: SensorModel, detection: Any, cloud: Cloud) -> float:
    """Lower bound of the squared distance of a detection from any particle."""
    offset, box = cloud.differences[0], cloud.box
    difference(m, sensor.periods, detection, box[0], offset)
    bound = 0.0
    for a in range(m):
        gap = max(offset[a] - box[2, a], box[1, a] - offset[a], 0.0)
        if sensor.periods[a] > 0.0:  # the other way round may be shorter
            gap = min(gap, max(0.0, sensor.periods[a] - (box[2, a] - box[1, a]) - gap))
        bound = max(bound, gap * gap / box[3, a])
    return bound


@helper
def _prepare_noise(m: int, models: Models, scan: Scan, state: Any, cloud: Cloud) -> float:
    """Factorise the noise at a state; return the logarithm of the peak of its density."""
    sensor = models.sensor
    sensor.noise(sensor.parameters, scan.site, state, cloud.noise)
    factorise(m, cloud.noise, cloud.noise_factor)
    return math.log(inverse_root_determinant(m, cloud.noise_factor)) - m * HALF_LOG_TWO_PI


@helper
def _select_near(m: int, models: Models, scan: Scan, cloud: Cloud) -> tuple[int, float]:
    """List the detections that can leave a trace in any particle's likelihood.

    Where there is no clutter a detection outweighs all else. With noise that varies from state to
    state, or where the target can't be missed, all are listed.
    returns     how many, and the greatest logarithm of the term for a missed target, 1 - PD
    """
    least_detected, most_detected = 1.0, 0.0
    for i in range(cloud.weights.shape[0]):
        least_detected = min(least_detected, cloud.detected[i])
        most_detected = max(most_detected, cloud.detected[i])
    peak = _prepare_noise(m, models, scan, cloud.states[0], cloud)
    leaves_trace = log_or_minus_infinity(1.0 - most_detected) - _NO_TRACE

    without_clutter = False
    detections = scan.detections.shape[0]
    for j in range(detections):
        clutter = models.clutter.intensity(models.clutter.parameters, scan.site, scan.detections[j])
        cloud.log_clutter[j] = log_or_minus_infinity(clutter)
        without_clutter = without_clutter or (clutter == 0.0 and most_detected > 0.0)

    count = 0
    for j in range(detections):
        if without_clutter and cloud.log_clutter[j] > -math.inf:
            continue
        if without_clutter:
            cloud.log_clutter[j] = 0.0
        elif models.sensor.same_noise and leaves_trace > -math.inf:
            height = math.log(detections) + log_or_minus_infinity(most_detected) + peak
            bound = 0.5 * _squared_distance_to_box(m, models.sensor, scan.detections[j], cloud)
            if height - cloud.log_clutter[j] - bound < leaves_trace:
                continue
        cloud.near[count] = j
        count += 1
    log_missed = -math.inf if without_clutter else log_or_minus_infinity(1.0 - least_detected)
    return count, log_missed


@helper
def _weigh(
    m: int, models: Models, scan: Scan, near: int, log_missed: float, shift: float, cloud: Cloud
) -> tuple[float, float]:
    """Fill every particle's likelihood, times exp(shift), from the detections listed.

    log_missed  as `_select_near` returns it
    returns     sum of weight times likelihood, and the greatest logarithm of a detection's
                g(z | x) / lambda(z) for a particle that has weight
    """
    sensor = models.sensor
    peak = _prepare_noise(m, models, scan, cloud.states[0], cloud)
    scale = math.exp(shift) if log_missed > -math.inf else 0.0
    total, highest = 0.0, -math.inf
    for i in range(cloud.weights.shape[0]):
        if not sensor.same_noise:
            peak = _prepare_noise(m, models, scan, cloud.states[i], cloud)
        detected = cloud.detected[i]
        found = 0.0
        for place in range(near):
            j = cloud.near[place]
            difference(
                m, sensor.periods, scan.detections[j], cloud.measurements[i], cloud.differences[0]
            )
            half = 0.5 * squared_distance(
                m, cloud.noise_factor, cloud.differences[0], cloud.differences[1]
            )
            exponent = peak - cloud.log_clutter[j] - half
            if cloud.weights[i] > 0.0:
                highest = max(highest, exponent)
            if exponent + shift > -_UNDERFLOW:
                found += math.exp(exponent + shift)
        likelihood = (1.0 - detected) * scale + detected * found
        cloud.likelihoods[i] = likelihood
        total += cloud.weights[i] * likelihood
    return total, highest


@helper
def _update(m: int, models: Models, scan: Scan, cloud: Cloud) -> bool:
    """Weigh the particles by a scan; False, and nothing done, if the model makes it impossible."""
    near, log_missed = _select_near(m, models, scan, cloud)
    total, highest = _weigh(m, models, scan, near, log_missed, 0.0, cloud)
    if not _IN_RANGE < total < 1.0 / _IN_RANGE and near > 0:
        # Too small or too large for the range of numbers: bring the greatest term to one.
        total, _ = _weigh(m, models, scan, near, log_missed, -max(highest, log_missed), cloud)
    if not total > 0.0:
        return False
    for i in range(cloud.weights.shape[0]):
        cloud.weights[i] *= cloud.likelihoods[i] / total
    return True


@helper
def _moments(n: int, cloud: Cloud, mean: Any, covariance: Any) -> None:
    clear_moments(n, mean, covariance)
    for i in range(cloud.weights.shape[0]):
        add_to_mean(n, cloud.weights[i], cloud.states[i], mean)
    for i in range(cloud.weights.shape[0]):
        state = cloud.states[i]
        for row in range(n):
            offset = cloud.weights[i] * (state[row] - mean[row])
            for column in range(row + 1):
                covariance[row, column] += offset * (state[column] - mean[column])
    mirror(n, covariance)


@helper
def _resample(n: int, resample_below: float, numbers: Numbers, cloud: Cloud) -> None:
    """Systematic resampling when the effective number of samples is low."""
    particles = cloud.weights.shape[0]
    squares = 0.0
    for i in range(particles):
        squares += cloud.weights[i] ** 2
    if squares * resample_below * particles <= 1.0:
        return
    place = uniform(numbers) / particles
    source = 0
    reached = cloud.weights[0]
    for i in range(particles):
        while place > reached and source < particles - 1:
            source += 1
            reached += cloud.weights[source]
        for row in range(n):
            cloud.moved[i, row] = cloud.states[source, row]
        place += 1.0 / particles
    for i in range(particles):
        for row in range(n):
            cloud.states[i, row] = cloud.moved[i, row]
        cloud.weights[i] = 1.0 / particles


@helper
def _has_something_near(m: int, models: Models, scan: Scan, gate: Gate, cloud: Cloud) -> bool:
    """Whether a detection lies in the gate of the cloud's predicted measurement, by its moments."""
    sensor, spread, offset = models.sensor, cloud.spread, cloud.differences[0]
    reference, mean = cloud.box[0], cloud.middle
    for a in range(m):
        mean[a] = 0.0
        for b in range(m):
            spread[a, b] = 0.0
    for i in range(cloud.weights.shape[0]):
        difference(m, sensor.periods, cloud.measurements[i], reference, offset)
        for a in range(m):
            mean[a] += cloud.weights[i] * offset[a]
    for i in range(cloud.weights.shape[0]):
        difference(m, sensor.periods, cloud.measurements[i], reference, offset)
        sensor.noise(sensor.parameters, scan.site, cloud.states[i], cloud.noise)
        for a in range(m):
            for b in range(a + 1):
                spread[a, b] += cloud.weights[i] * (
                    (offset[a] - mean[a]) * (offset[b] - mean[b]) + cloud.noise[a, b]
                )
    if not factorise(m, spread, cloud.noise_factor):
        return False
    for a in range(m):
        mean[a] += reference[a]
    for j in range(scan.detections.shape[0]):
        difference(m, sensor.periods, scan.detections[j], mean, offset)
        distance = squared_distance(m, cloud.noise_factor, offset, cloud.differences[1])
        if distance < gate.limit:
            return True
    return False


@helper
def _run_trial(
    n: int,
    m: int,
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
    empty_scans = 0
    for k in range(scans.intervals.shape[0]):
        scan = scan_of(scans, models.sensor.sites, trial, k)
        open_at(numbers, first_trial + trial, STRATEGY, k)
        if k == 0:
            _draw_from_prior(n, prior, trial, numbers, cloud)
            cloud.filled_for[0] = math.nan
        else:
            _move(n, models, scan.interval, numbers, cloud)
        _measure(m, models, scan, cloud)
        if strategy.ending.empty_scans > 0:
            near = _has_something_near(m, models, scan, strategy.gate, cloud)
            empty_scans = 0 if near else empty_scans + 1
        if not _update(m, models, scan, cloud):
            tracks.impossible[trial] += 1
        tracks.scans_run[trial] += 1

        mean, spread = tracks.means[trial, k], tracks.covariances[trial, k]
        _moments(n, cloud, mean, spread)
        if past_limit(strategy.ending, empty_scans, spread):
            clear_estimate(n, mean, spread)
            return
        tracks.present[trial, k] = True
        _resample(n, strategy.resample_below, numbers, cloud)


@functools.cache
def compiled_particle_filter(n: int, m: int) -> Callable[..., None]:
    """Return the kernel for states of n and measurements of m numbers."""

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
                n, m, models, strategy, prior, scans, trial, first_trial, numbers, tracks, cloud
            )

    return run_particle_filter
