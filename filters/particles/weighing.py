"""Particles weighed by a scan, with the association of detections summed out of the likelihood:

    1 - PD(x) + sum over detections j of PD(x) g(z_j | x) / lambda(z_j)

over the ratio of the density that the particle was drawn from to that of the motion.
"""

from __future__ import annotations

import math
from typing import Any

from filters.cholesky import factorise, inverse_root_determinant, squared_distance
from filters.compiled import helper
from filters.detecting import log_or_minus_infinity
from filters.measurement_difference import difference
from filters.models.contract import Models, SensorModel
from filters.particles.cloud import Cloud, log_ratio_of
from filters.track import Scan
from filters.update import HALF_LOG_TWO_PI

# Terms that together are this much lighter, as a logarithm, than the sum they join leave no trace.
NO_TRACE = 38.0
# exp(-x) is no longer a number above zero.
_UNDERFLOW = 745.2
# Likelihoods between the bound and its reciprocal keep all their digits.
_IN_RANGE = 1e-200


@helper
def measure_particles(m: int, models: Models, scan: Scan, cloud: Cloud) -> None:
    """Fill expected measurements, PD, and the box that holds the cloud in the measurement."""
    sensor, detection, step = models.sensor, models.detection, cloud.step[0]
    box, offset = step.box, step.differences[0]
    for i in range(cloud.weights.shape[0]):
        state, mark = cloud.states[i], cloud.marks[i]
        sensor.measure(sensor.parameters, scan.site, state, mark.measurement[:])
        mark.detected = detection.probability(detection.parameters, scan.site, state)
        if i == 0 or not sensor.same_noise:
            sensor.noise(sensor.parameters, scan.site, state, step.noise[:])
        if i == 0:
            for a in range(m):
                box[0, a] = mark.measurement[a]
                box[1, a] = 0.0
                box[2, a] = 0.0
                box[3, a] = 0.0
        difference(m, sensor.periods, mark.measurement, box[0], offset)
        for a in range(m):
            box[1, a] = min(box[1, a], offset[a])
            box[2, a] = max(box[2, a], offset[a])
            box[3, a] = max(box[3, a], step.noise[a, a])


@helper
def fill_log_clutter(models: Models, scan: Scan, cloud: Cloud) -> bool:
    """Fill ln of the clutter at every detection; return whether there is none at some of them.

    Those then outweigh all else, as in the limit from above: they get 0, the others infinity.
    """
    clutter, table = models.clutter, cloud.detections
    none_somewhere = False
    for j in range(scan.detections.shape[0]):
        intensity = clutter.intensity(clutter.parameters, scan.site, scan.detections[j])
        table[j].log_clutter = log_or_minus_infinity(intensity)
        none_somewhere = none_somewhere or table[j].log_clutter == -math.inf
    if none_somewhere:
        for j in range(scan.detections.shape[0]):
            is_none = table[j].log_clutter == -math.inf
            table[j].log_clutter = 0.0 if is_none else math.inf
    return none_somewhere


@helper
def _squared_distance_to_box(m: int, sensor: SensorModel, detection: Any, step: Any) -> float:
    """Lower bound of the squared distance of a detection from any particle."""
    offset, box = step.differences[0], step.box
    difference(m, sensor.periods, detection, box[0], offset)
    bound = 0.0
    for a in range(m):
        gap = max(offset[a] - box[2, a], box[1, a] - offset[a], 0.0)
        if sensor.periods[a] > 0.0:  # the other way round may be shorter
            gap = min(gap, max(0.0, sensor.periods[a] - (box[2, a] - box[1, a]) - gap))
        bound = max(bound, gap * gap / box[3, a])
    return bound


@helper
def _prepare_noise(m: int, models: Models, scan: Scan, state: Any, step: Any) -> float:
    """Factorise the noise at a state; return the logarithm of the peak of its density."""
    sensor = models.sensor
    sensor.noise(sensor.parameters, scan.site, state, step.noise[:])
    factorise(m, step.noise, step.noise_factor)
    return math.log(inverse_root_determinant(m, step.noise_factor)) - m * HALF_LOG_TWO_PI


@helper
def _select_near(m: int, models: Models, scan: Scan, cloud: Cloud) -> tuple[int, float]:
    """List the detections that can leave a trace in any particle's likelihood.

    Where there is no clutter a detection outweighs all else. With noise that varies from state to
    state, or where the target can't be missed, all are listed.
    returns     how many, and the greatest logarithm of the term for a missed target, 1 - PD
    """
    step = cloud.step[0]
    least_detected, most_detected = 1.0, 0.0
    for i in range(cloud.weights.shape[0]):
        least_detected = min(least_detected, cloud.marks[i].detected)
        most_detected = max(most_detected, cloud.marks[i].detected)
    peak = _prepare_noise(m, models, scan, cloud.states[0], step)
    leaves_trace = log_or_minus_infinity(1.0 - most_detected) - NO_TRACE
    without_clutter = fill_log_clutter(models, scan, cloud) and most_detected > 0.0
    may_skip = models.sensor.same_noise and leaves_trace > -math.inf and not without_clutter

    count = 0
    detections = scan.detections.shape[0]
    for j in range(detections):
        if cloud.detections[j].log_clutter == math.inf:
            continue
        if may_skip:
            height = math.log(detections) + log_or_minus_infinity(most_detected) + peak
            bound = 0.5 * _squared_distance_to_box(m, models.sensor, scan.detections[j], step)
            if height - cloud.detections[j].log_clutter - bound < leaves_trace:
                continue
        cloud.detections[count].listed = j
        count += 1
    log_missed = -math.inf if without_clutter else log_or_minus_infinity(1.0 - least_detected)
    return count, log_missed


@helper
def _weigh(
    m: int,
    proposal: int,
    models: Models,
    scan: Scan,
    near: int,
    log_missed: float,
    shift: float,
    cloud: Cloud,
) -> tuple[float, float]:
    """Fill every particle's likelihood over its ratio, times exp(shift), from those listed.

    log_missed  as `_select_near` returns it
    returns     sum of weight times likelihood over ratio, and the greatest logarithm of a
                detection's g(z | x) / lambda(z) over the ratio for a particle that has weight
    """
    sensor, step = models.sensor, cloud.step[0]
    peak = _prepare_noise(m, models, scan, cloud.states[0], step)
    total, highest = 0.0, -math.inf
    scale, scaled_by = 0.0, math.nan
    for i in range(cloud.weights.shape[0]):
        if not sensor.same_noise:
            peak = _prepare_noise(m, models, scan, cloud.states[i], step)
        mark = cloud.marks[i]
        log_ratio = log_ratio_of(proposal, cloud, i)
        own_shift = shift - log_ratio
        if own_shift != scaled_by:  # the same for all that the motion alone moved
            scale = math.exp(own_shift) if log_missed > -math.inf else 0.0
            scaled_by = own_shift
        detected = mark.detected
        found = 0.0
        for place in range(near):
            j = cloud.detections[place].listed
            difference(m, sensor.periods, scan.detections[j], mark.measurement, step.differences[0])
            half = 0.5 * squared_distance(
                m, step.noise_factor, step.differences[0], step.differences[1]
            )
            exponent = peak - cloud.detections[j].log_clutter - half
            if cloud.weights[i] > 0.0:
                highest = max(highest, exponent - log_ratio)
            if exponent + own_shift > -_UNDERFLOW:
                found += math.exp(exponent + own_shift)
        likelihood = (1.0 - detected) * scale + detected * found
        mark.likelihood = likelihood
        total += cloud.weights[i] * likelihood
    return total, highest


@helper
def _highest_missed(proposal: int, log_missed: float, cloud: Cloud) -> float:
    """Greatest logarithm of the term for a missed target over the ratio, for a particle of weight.

    log_missed  as `_select_near` returns it
    """
    highest = -math.inf
    for i in range(cloud.weights.shape[0]):
        if cloud.weights[i] > 0.0:
            highest = max(highest, log_missed - log_ratio_of(proposal, cloud, i))
    return highest


@helper
def weigh_by_scan(m: int, proposal: int, models: Models, scan: Scan, cloud: Cloud) -> bool:
    """Weigh the particles by a scan, and add to the trial's evidence what it says.

    returns     False, and the prediction is kept, if the model makes the scan impossible
    """
    near, log_missed = _select_near(m, models, scan, cloud)
    shift = 0.0
    total, highest = _weigh(m, proposal, models, scan, near, log_missed, shift, cloud)
    if not _IN_RANGE < total < 1.0 / _IN_RANGE and near > 0:
        # Too small or too large for the range of numbers: bring the greatest term to one.
        shift = -max(highest, _highest_missed(proposal, log_missed, cloud))
        total, _ = _weigh(m, proposal, models, scan, near, log_missed, shift, cloud)
    if not total > 0.0:
        cloud.step[0].log_evidence = -math.inf
        return False
    for i in range(cloud.weights.shape[0]):
        cloud.weights[i] *= cloud.marks[i].likelihood / total
    cloud.step[0].log_evidence += math.log(total) - shift
    return True
