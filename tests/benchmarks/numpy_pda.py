"""PDA as a careful NumPy program: detections of a scan at once, a Python loop over the scans.

What is sensible in NumPy is done: few calls a scan, S inverted by hand, one product K W K' for the
three covariance terms of the textbook.

Source: Bar-Shalom, Daum and Huang (2009), IEEE Control Systems 29(6), The probabilistic data
association filter, with Poisson clutter of a stated density.
"""

import math

import numpy as np
from scenes import Estimates, Model

from filters.track import Scans

ONES = np.ones(2)


def numpy_pda(model: Model, scans: Scans) -> Estimates:
    """Follow the target through every trial."""
    trials, length = scans.origins.shape
    means, covariances = np.empty((trials, length, 4)), np.empty((trials, length, 4, 4))
    for trial in range(trials):
        offsets = scans.offsets[trial].tolist()
        mean, covariance = model.mean, model.covariance
        for k in range(length):
            if k > 0:
                mean, covariance = _predict(model, mean, covariance)
            detections = scans.detections[offsets[k] : offsets[k + 1]]
            mean, covariance = _update(model, detections, mean, covariance)
            means[trial, k], covariances[trial, k] = mean, covariance
    return means, covariances


def _predict(
    model: Model, mean: np.ndarray, covariance: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    F = model.transition
    return F.dot(mean), F.dot(covariance).dot(F.T) + model.process_noise


def _update(
    model: Model, detections: np.ndarray, mean: np.ndarray, covariance: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    H = model.measurement
    cross = covariance.dot(H.T)
    S = H.dot(cross) + model.noise
    (s00, s01), (_, s11) = S.tolist()
    determinant = s00 * s11 - s01 * s01
    inverse = np.array(((s11, -s01), (-s01, s00))) / determinant

    innovations = detections - H.dot(mean)
    distances = (innovations.dot(inverse) * innovations).dot(ONES)
    peak = model.detection_probability / (model.clutter * 2 * math.pi * math.sqrt(determinant))
    weights = np.exp(-0.5 * distances) * peak
    weights[distances >= model.gate_limit] = 0.0
    found = float(weights.sum())
    if found == 0.0:
        return mean, covariance

    total = found + 1.0 - model.detection_probability * model.gate_probability
    weights /= total
    combined = weights.dot(innovations)
    spread = (innovations.T * weights).dot(innovations) - combined[:, None] * combined
    gain = cross.dot(inverse)
    taken = found / total * S - spread
    return mean + gain.dot(combined), covariance - gain.dot(taken).dot(gain.T)
