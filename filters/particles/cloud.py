"""The particles of one trial, and the working memory of the kernel that moves them."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from filters.compiled import helper
from filters.mixture import add_to_mean, clear_moments, mirror
from filters.records import zeroed_records

MOTION, DETECTIONS = range(2)  # where particles are drawn, see proposal


class Cloud(NamedTuple):
    """Particles, row i belonging to particle i, and what serves a scan as a whole."""

    states: Any  # (particles, n)
    moved: Any  # (particles, n) expected before the noise; room for copies when resampling
    weights: Any  # (particles,), summing to one
    marks: Any  # (particles,) what a scan makes of each, see _room_for_marks
    sources: Any  # (particles,) int64, see resampling
    detections: Any  # (most detections,) see _room_for_detections
    step: Any  # see _room_for_step


def cloud_for(n: int, m: int, particles: int, most_detections: int) -> Cloud:
    """Working memory for a number of particles and of detections in a scan."""
    return Cloud(
        np.empty((particles, n)),
        np.empty((particles, n)),
        np.empty(particles),
        _room_for_marks(m, particles),
        np.empty(particles, np.int64),
        _room_for_detections(most_detections),
        _room_for_step(n, m),
    )


def bytes_per_particle(n: int, m: int) -> int:
    """What one particle takes of a cloud's memory."""
    return 8 * (2 * n + m + 5)


def _room_for_marks(m: int, particles: int) -> np.ndarray:
    """Room for what a scan makes of each particle."""
    return zeroed_records(
        particles,
        [
            ("measurement", float, (m,)),  # expected
            ("detected", float),  # PD
            ("likelihood", float),  # of the scan, over the ratio below, scaled alike
            ("log_ratio", float),  # ln of proposal over motion where it was drawn, see proposal
        ],
    )


def _room_for_detections(most_detections: int) -> np.ndarray:
    """Room for a scan's detections, and for a list of those that matter."""
    return zeroed_records(
        max(1, most_detections),
        [
            ("log_clutter", float),
            ("listed", np.int64),  # entry k holds the k-th detection that could be explained
            ("log_term", float),  # of the k-th, in one particle's mixture, see proposal
        ],
    )


def _room_for_step(n: int, m: int) -> np.ndarray:
    """Room for moving and weighing one particle, and for what all share: one record."""
    return zeroed_records(
        1,
        [
            ("log_evidence", float),  # of the scans so far, over that of clutter alone
            ("disturbance", float, (n, n)),  # covariance of the noise that moves a particle
            ("root", float, (n, n)),  # L of that covariance L L'
            ("filled_for", float),  # s, the interval of these two; kept while the motion is linear
            ("normals", float, (n,)),
            ("noise", float, (m, m)),
            ("noise_factor", float, (m, m)),  # see cholesky
            ("differences", float, (2, m)),
            # the cloud in the measurement
            ("box", float, (4, m)),  # reference, least and most offset, greatest variance
            ("middle", float, (m,)),  # mean
            ("spread", float, (m, m)),  # covariance
            # one particle's proposal from the detections
            ("expected", float, (m,)),  # measurement
            ("jacobian", float, (m, n)),
            ("cross", float, (n, m)),
            ("innovation", float, (m, m)),  # its covariance
            ("innovation_factor", float, (m, m)),
            ("gain", float, (n, m)),
            ("usable", bool),  # the innovation's covariance is positive definite
        ],
    )


@helper
def log_ratio_of(proposal: int, cloud: Cloud, i: int) -> float:
    """Return ln of proposal over motion where a particle was drawn; the motion's own is 0."""
    return cloud.marks[i].log_ratio if proposal == DETECTIONS else 0.0


@helper
def spread_evenly(cloud: Cloud) -> None:
    """Give all particles the same weight."""
    particles = cloud.weights.shape[0]
    for i in range(particles):
        cloud.weights[i] = 1.0 / particles


@helper
def cloud_moments(n: int, cloud: Cloud, mean: Any, covariance: Any) -> None:
    """Write mean (n,) and covariance (n, n) of the weighted particles."""
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
def copy_from_sources(n: int, cloud: Cloud) -> None:
    """Make every particle a copy of its source, all of the same weight."""
    for i in range(cloud.weights.shape[0]):
        for row in range(n):
            cloud.moved[i, row] = cloud.states[cloud.sources[i], row]
    for i in range(cloud.weights.shape[0]):
        for row in range(n):
            cloud.states[i, row] = cloud.moved[i, row]
    spread_evenly(cloud)
