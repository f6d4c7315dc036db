"""PDA and nearest neighbour scan by scan against the reference library, stonesoup 1.9.1.

On a linear sensor, and PDA on one of range and bearing: first order and unscented.

Conventions are the same: chi-square gate of probability PG on the innovation covariance, weights
1 - PD PG and PD N(z; zhat, S) / lambda. It admits a detection exactly on the gate's edge where ours
does not (of no account for continuous numbers), takes prob_gate = 1 as no gate, and its distance
hypothesiser compares distances, not their squares, with a limit. Its prior is predicted before the
first scan, so it is given the prior at the time of that scan.

Its unscented transform is ours if alpha, beta and kappa are (its own default of alpha is 0.5), but
for angles: it averages their sines and cosines, we their offsets from that of the mean. The two
differ by the third power of the spread of the angle, here some 1e-7 rad or 1e-4 m. Its Jacobian of
range and bearing is a difference quotient good to 1e-5, so it is given a formula. Its measurements
are in the order bearing, range.
"""

import datetime
import math

import numpy as np
import pytest
from one_scan import world_of
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
from stonesoup.models.measurement.nonlinear import CartesianToBearingRange
from stonesoup.models.transition.linear import (
    CombinedLinearGaussianTransitionModel,
    ConstantVelocity,
)
from stonesoup.predictor.kalman import KalmanPredictor, UnscentedKalmanPredictor
from stonesoup.types.angle import Bearing
from stonesoup.types.array import StateVector, StateVectors
from stonesoup.types.detection import Detection
from stonesoup.types.state import GaussianState
from stonesoup.types.track import Track
from stonesoup.types.update import GaussianStateUpdate
from stonesoup.updater.kalman import (
    ExtendedKalmanUpdater,
    KalmanUpdater,
    UnscentedKalmanUpdater,
)

from filters.models.sensor import RangeBearingSensor

PSD, NOISE_SD, INTERVAL = 0.3, 1.5, 2.0
START = datetime.datetime(2024, 1, 1)
ORDER = [0, 2, 1, 3]  # theirs is (x, vx, y, vy), ours (x, y, vx, vy)


class Library:
    """Predictor, updater and measurement model of the reference library for the same world."""

    def __init__(self):
        self.motion = CombinedLinearGaussianTransitionModel([ConstantVelocity(PSD)] * 2)
        self.predictor = KalmanPredictor(self.motion)
        self.sensor = LinearGaussian(4, (0, 2), np.eye(2) * NOISE_SD**2)
        self.updater = KalmanUpdater(self.sensor)

    def detection(self, z, time):
        return Detection(z, timestamp=time, measurement_model=self.sensor)

    def follow(self, prior, scans, associator, take):
        """Means and covariances after every scan, in our order of the state."""
        state = GaussianState(prior.mean[ORDER], prior.covariance[np.ix_(ORDER, ORDER)], START)
        track = Track([state])
        means, covariances = [], []
        for k, scan in enumerate(scans):
            time = START + datetime.timedelta(seconds=INTERVAL * k)
            found = {self.detection(z, time) for z in scan}
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


class BearingRange(CartesianToBearingRange):
    """The library's sensor with a Jacobian in closed form."""

    def jacobian(self, state, **kwargs):
        east, north = np.array(state.state_vector, float)[[0, 2], 0] - SITE
        distance = math.hypot(east, north)
        of_bearing = np.array([-north, 0.0, east, 0.0]) / distance**2
        return np.array([of_bearing, np.array([east, 0.0, north, 0.0]) / distance])


class RangeBearingLibrary(Library):
    """The same with range and bearing measured, by its extended or its unscented filter."""

    def __init__(self, unscented):
        super().__init__()
        noise = np.diag([math.radians(BEARING_SD_DEG) ** 2, RANGE_SD**2])
        self.sensor = BearingRange(4, (0, 2), noise, translation_offset=SITE[:, None])
        if unscented:
            self.predictor = UnscentedKalmanPredictor(self.motion, **unscented)
            self.updater = UnscentedKalmanUpdater(self.sensor, **unscented)
        else:
            self.updater = ExtendedKalmanUpdater(self.sensor)

    def detection(self, z, time):
        state = StateVector([Bearing(z[1]), z[0]])
        return Detection(state, timestamp=time, measurement_model=self.sensor)


SITE = np.array([-1200.0, 300.0])
RANGE_SD, BEARING_SD_DEG, RANGE_BEARING_PD, RANGE_BEARING_CLUTTER = 3.0, 0.3, 0.85, 2.0
RANGE_BEARING = RangeBearingSensor(
    kind="range-bearing",
    position_m=tuple(SITE),
    noise_sd_range_m=RANGE_SD,
    noise_sd_bearing_deg=BEARING_SD_DEG,
    region_range_m=(0.0, 4000.0),
    detection_probability=RANGE_BEARING_PD,
    clutter_density_per_m_deg=RANGE_BEARING_CLUTTER * math.radians(1.0),
)


def range_bearing_trial(seed, place, scans=12):
    """Range and bearing of a target at constant velocity, two false detections near it a scan."""
    rng = np.random.default_rng(seed)
    drawn = []
    for k in range(scans):
        offset = complex(*(place + INTERVAL * k * np.array([2.0, 1.0]))) - complex(*SITE)
        z = np.array([abs(offset), np.angle(offset)])
        own = z + rng.normal(size=(1, 2)) * RANGE_BEARING.noise_deviations()
        false = z + rng.uniform(-1, 1, (2, 2)) * [12.0, 0.02]
        scan = np.concatenate([own[: int(rng.random() < RANGE_BEARING_PD)], false])
        scan[:, 1] = np.angle(np.exp(1j * scan[:, 1]))
        drawn.append(scan)
    return drawn


UNSCENTED = {
    "first order": {},
    "unscented": {"alpha": 1.0, "beta": 2.0, "kappa": -1.0},
    "unscented, scaled": {"alpha": 0.5, "beta": 1.5, "kappa": 2.0},
}


@pytest.mark.parametrize("kind", UNSCENTED)
@pytest.mark.parametrize("place", [(100.0, -50.0), (-2500.0, 290.0)], ids=["ahead", "at the cut"])
def test_pda_on_range_and_bearing_equals_the_reference_library_scan_by_scan(kind, place):
    """Ten trials of 12 scans; the second place lies where bearings pass 180 degrees.

    First order to rounding, unscented to 5e-4 m and 5e-5 of a variance; the two differ by more
    than ten times that.
    """
    settings = UNSCENTED[kind]
    world = world_of(RANGE_BEARING, [*place, 2.0, 1.0], np.diag([25.0, 16.0, 1.0, 0.25]))
    motion = constant_velocity_world(2, psd=PSD).assumptions.models.motion
    models = world.assumptions.models._replace(motion=motion)
    world = world._replace(assumptions=world.assumptions._replace(models=models))
    library = RangeBearingLibrary(settings)
    hypothesiser = PDAHypothesiser(
        library.predictor,
        library.updater,
        clutter_spatial_density=RANGE_BEARING_CLUTTER,
        prob_detect=RANGE_BEARING_PD,
        prob_gate=0.99,
    )
    trials = [range_bearing_trial(seed, place) for seed in range(10)]
    ours = {"kind": "unscented", **settings} if settings else {"kind": "first-order"}
    strategy = pda(gate_probability=0.99, linearisation=ours)
    tracks = run_on(world, strategy, as_scans(trials, 2, interval=INTERVAL))
    for trial, scans in enumerate(trials):
        prior = world.assumptions.prior
        means, covariances = library.follow(prior, scans, PDA(hypothesiser), library.match_moments)
        near = 5e-4 if settings else 1e-8
        np.testing.assert_allclose(tracks.means[trial], means, rtol=0, atol=near)
        np.testing.assert_allclose(
            tracks.covariances[trial], covariances, rtol=near / 10, atol=near
        )
    if settings:
        first_order = run_on(world, pda(gate_probability=0.99), as_scans(trials, 2, interval=2.0))
        assert np.abs(first_order.means - tracks.means).max() > 5e-3


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
