"""PDA by the reference library, on the same scans.

Detections become its objects beforehand, untimed. Its state is (x, vx, y, vy), ours (x, y, vx, vy);
its clutter density, detection and gate probability mean the same as ours.
"""

import datetime
from collections.abc import Callable

import numpy as np
from scenes import INTERVAL, NOISE_SD, PSD, Estimates, Model
from stonesoup.dataassociator.probability import PDA
from stonesoup.functions import gm_reduce_single
from stonesoup.hypothesiser.probability import PDAHypothesiser
from stonesoup.models.measurement.linear import LinearGaussian
from stonesoup.models.transition.linear import (
    CombinedLinearGaussianTransitionModel,
    ConstantVelocity,
)
from stonesoup.predictor.kalman import KalmanPredictor
from stonesoup.types.array import StateVectors
from stonesoup.types.detection import Detection
from stonesoup.types.multihypothesis import MultipleHypothesis
from stonesoup.types.state import GaussianState
from stonesoup.types.track import Track
from stonesoup.types.update import GaussianStateUpdate
from stonesoup.updater.kalman import KalmanUpdater

from filters.track import Scans

START = datetime.datetime(2000, 1, 1)
ORDER = [0, 2, 1, 3]


def reference_pda(model: Model, scans: Scans) -> Callable[[], Estimates]:
    """Prepare to follow the target through every trial; what is returned does it."""
    predictor = KalmanPredictor(
        CombinedLinearGaussianTransitionModel([ConstantVelocity(PSD), ConstantVelocity(PSD)])
    )
    sensor = LinearGaussian(4, (0, 2), np.eye(2) * NOISE_SD**2)
    updater = KalmanUpdater(sensor)
    associator = PDA(
        PDAHypothesiser(
            predictor,
            updater,
            clutter_spatial_density=model.clutter,
            prob_detect=model.detection_probability,
            prob_gate=model.gate_probability,
        )
    )
    trials, length = scans.origins.shape
    times = [START + datetime.timedelta(seconds=INTERVAL * k) for k in range(length)]
    found = [
        [_detections(scans, trial, k, times[k], sensor) for k in range(length)]
        for trial in range(trials)
    ]
    start = GaussianState(model.mean[ORDER], model.covariance[np.ix_(ORDER, ORDER)], START)

    def run() -> Estimates:
        means, covariances = np.empty((trials, length, 4)), np.empty((trials, length, 4, 4))
        for trial in range(trials):
            track = Track([start])
            for k in range(length):
                hypotheses = associator.associate({track}, found[trial][k], times[k])[track]
                track.append(_matched(updater, hypotheses))
                means[trial, k] = np.ravel(track.mean)[ORDER]
                covariances[trial, k] = track.covar[np.ix_(ORDER, ORDER)]
        return means, covariances

    return run


def _detections(
    scans: Scans, trial: int, k: int, time: datetime.datetime, sensor: LinearGaussian
) -> set[Detection]:
    first, end = scans.offsets[trial, k : k + 2]
    return {
        Detection(z, timestamp=time, measurement_model=sensor) for z in scans.detections[first:end]
    }


def _matched(updater: KalmanUpdater, hypotheses: MultipleHypothesis) -> GaussianStateUpdate:
    """One Gaussian with the moments of all hypotheses."""
    states = [updater.update(one) if one else one.prediction for one in hypotheses]
    mean, covariance = gm_reduce_single(
        StateVectors([state.state_vector for state in states]),
        np.stack([state.covar for state in states], axis=2),
        np.asarray([one.probability for one in hypotheses]),
    )
    return GaussianStateUpdate(mean, covariance, hypotheses, states[0].timestamp)
