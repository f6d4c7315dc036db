"""PDA and nearest neighbour scan by scan against the reference library, stonesoup 1.9.1.

Conventions are the same: chi-square gate of probability PG on the innovation covariance, weights
1 - PD PG and PD N(z; zhat, S) / lambda. It admits a detection exactly on the gate's edge where ours
does not (of no account for continuous numbers), takes prob_gate = 1 as no gate, and its distance
hypothesiser compares distances, not their squares, with a limit. Its prior is predicted before the
first scan, so it is given the prior at the time of that scan.
"""

import datetime

import numpy as np
import pytest
from scipy.stats import chi2
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    nearest_neighbour,
    pda,
    run_on,
)
from stonesoup.dataassociator.neighbour import NearestNeighbour
from stonesoup.dataassociator.probability import PDA
from stonesoup.functions import gm_reduce_single
from stonesoup.hypothesiser.distance import DistanceHypothesiser
from stonesoup.hypothesiser.probability import PDAHypothesiser
from stonesoup.measures import Mahalanobis
from stonesoup.models.measurement.linear import LinearGaussian
from stonesoup.models.transition.linear import (
    CombinedLinearGaussianTransitionModel,
    ConstantVelocity,
)
from stonesoup.predictor.kalman import KalmanPredictor
from stonesoup.types.array import StateVectors
from stonesoup.types.detection import Detection
from stonesoup.types.state import GaussianState
from stonesoup.types.track import Track
from stonesoup.types.update import GaussianStateUpdate
from stonesoup.updater.kalman import KalmanUpdater

PSD, NOISE_SD, INTERVAL = 0.3, 1.5, 2.0
START = datetime.datetime(2024, 1, 1)
ORDER = [0, 2, 1, 3]  # theirs is (x, vx, y, vy), ours (x, y, vx, vy)


class Library:
    """Predictor, updater and measurement model of the reference library for the same world."""

    def __init__(self):
        moves = [ConstantVelocity(PSD), ConstantVelocity(PSD)]
        self.predictor = KalmanPredictor(CombinedLinearGaussianTransitionModel(moves))
        self.sensor = LinearGaussian(4, (0, 2), np.eye(2) * NOISE_SD**2)
        self.updater = KalmanUpdater(self.sensor)

    def follow(self, plain, scans, associator, take):
        """Means and covariances after every scan, in our order of the state."""
        state = GaussianState(plain.mean[ORDER], plain.covariance[np.ix_(ORDER, ORDER)], START)
        track = Track([state])
        means, covariances = [], []
        for k, scan in enumerate(scans):
            time = START + datetime.timedelta(seconds=INTERVAL * k)
            found = {Detection(z, timestamp=time, measurement_model=self.sensor) for z in scan}
            track.append(take(associator.associate({track}, found, time)[track]))
            means.append(np.ravel(track.mean)[ORDER])
            covariances.append(np.array(track.covar, float)[np.ix_(ORDER, ORDER)])
        return np.array(means, float), np.array(covariances)

    def match_moments(self, hypotheses):
        states, weights = [], []
        for hypothesis in hypotheses:
            states.append(self.updater.update(hypothesis) if hypothesis else hypothesis.prediction)
            weights.append(hypothesis.probability)
        mean, covariance = gm_reduce_single(
            StateVectors([state.state_vector for state in states]),
            np.stack([state.covar for state in states], axis=2),
            np.asarray(weights),
        )
        return GaussianStateUpdate(mean, covariance, hypotheses, states[0].timestamp)

    def take_one(self, hypothesis):
        return self.updater.update(hypothesis) if hypothesis else hypothesis.prediction


@pytest.fixture(scope="module")
def scenes():
    """Forty trials with 9 false detections a scan in a box of 12 x 12 m around the target."""
    world = constant_velocity_world(
        2,
        psd=PSD,
        noise_sd=NOISE_SD,
        interval=INTERVAL,
        detection_probability=0.85,
        clutter=0.0625,
        mean=[100.0, -50.0, 2.0, 1.0],
    )
    drawn = draw_scenes_of(world, np.random.default_rng(2024), 40, 12, clutter_half_width=6.0)
    return world, drawn


@pytest.mark.parametrize(("gate_probability", "trials"), [(1.0, range(20)), (0.95, range(20, 40))])
def test_pda_equals_the_reference_library_scan_by_scan(scenes, gate_probability, trials):
    world, drawn = scenes
    library = Library()
    hypothesiser = PDAHypothesiser(
        library.predictor,
        library.updater,
        clutter_spatial_density=world.plain.clutter,
        prob_detect=world.plain.detection_probability,
        prob_gate=gate_probability,
    )
    scans = as_scans(drawn.trials, 2, interval=INTERVAL)
    tracks = run_on(world, pda(gate_probability=gate_probability), scans)
    for trial in trials:
        means, covariances = library.follow(
            world.plain, drawn.trials[trial], PDA(hypothesiser), library.match_moments
        )
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-9)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-7, atol=1e-9)


def test_nearest_neighbour_equals_the_reference_library_scan_by_scan(scenes):
    world, drawn = scenes
    library = Library()
    hypothesiser = DistanceHypothesiser(
        library.predictor,
        library.updater,
        measure=Mahalanobis(),
        missed_distance=np.sqrt(chi2.ppf(0.95, 2)),
    )
    scans = as_scans(drawn.trials, 2, interval=INTERVAL)
    tracks = run_on(world, nearest_neighbour(gate_probability=0.95), scans)
    for trial in range(40):
        means, covariances = library.follow(
            world.plain, drawn.trials[trial], NearestNeighbour(hypothesiser), library.take_one
        )
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-9)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-7, atol=1e-9)
