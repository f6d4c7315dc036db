"""Whether a scan holds anything near the particles, for ending a track after empty scans."""

from __future__ import annotations

import math

from filters.cholesky import factorise, squared_distance
from filters.compiled import helper
from filters.measurement_difference import difference
from filters.models.contract import Models
from filters.particles.cloud import Cloud, log_ratio_of
from filters.track import Scan
from filters.update import Gate


@helper
def has_something_near(
    m: int, proposal: int, models: Models, scan: Scan, gate: Gate, cloud: Cloud
) -> bool:
    """Whether a detection lies in the gate of the predicted measurement, by its moments.

    The weights are those before the scan; particles that the detections drew count for less.
    """
    sensor, step = models.sensor, cloud.step[0]
    spread, offset, mean, reference = step.spread, step.differences[0], step.middle, step.box[0]
    total = 0.0
    for a in range(m):
        mean[a] = 0.0
        for b in range(m):
            spread[a, b] = 0.0
    for i in range(cloud.weights.shape[0]):
        weight = cloud.weights[i] * math.exp(-log_ratio_of(proposal, cloud, i))
        total += weight
        difference(m, sensor.periods, cloud.marks[i].measurement, reference, offset)
        for a in range(m):
            mean[a] += weight * offset[a]
    for a in range(m):
        mean[a] /= total
    for i in range(cloud.weights.shape[0]):
        weight = cloud.weights[i] * math.exp(-log_ratio_of(proposal, cloud, i)) / total
        difference(m, sensor.periods, cloud.marks[i].measurement, reference, offset)
        sensor.noise(sensor.parameters, scan.site, cloud.states[i], step.noise[:])
        for a in range(m):
            for b in range(a + 1):
                spread[a, b] += weight * (
                    (offset[a] - mean[a]) * (offset[b] - mean[b]) + step.noise[a, b]
                )
    if not factorise(m, spread, step.noise_factor):
        return False
    for a in range(m):
        mean[a] += reference[a]
    for j in range(scan.detections.shape[0]):
        difference(m, sensor.periods, scan.detections[j], mean, offset)
        distance = squared_distance(m, step.noise_factor, offset, step.differences[1])
        if distance < gate.limit:
            return True
    return False
