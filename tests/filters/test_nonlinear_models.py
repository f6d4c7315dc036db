"""Coordinated turn and range-bearing sensor, against a plain extended Kalman filter."""

import cmath
import math

import numpy as np
import pytest
from plain_filters import moments
from scipy.special import logsumexp
from small_worlds import (
    World,
    as_scans,
    gaussian_mixture,
    known_association,
    models_of,
    most_probable_hypothesis,
    nearest_neighbour,
    particle_filter,
    pda,
    rao_blackwellised,
    run_on,
    skipping_nothing,
)

from filters.models.motion import CoordinatedTurn, NearlyConstantVelocity
from filters.models.sensor import RangeBearingSensor
from filters.strategies.strategy import Assumptions
from filters.track import Prior

RANGE_SD, BEARING_SD_DEG, PD, CLUTTER = 5.0, 0.8, 0.85, 0.02
PSD, RATE_PSD_DEG, INTERVAL = 0.4, 0.3, 1.5
SITE = (-300.0, 200.0)


def sensor(site=SITE, detection_probability=PD):
    return RangeBearingSensor(
        kind="range-bearing",
        position_m=site,
        noise_sd_range_m=RANGE_SD,
        noise_sd_bearing_deg=BEARING_SD_DEG,
        region_range_m=(0.0, 2000.0),
        detection_probability=detection_probability,
        clutter_density_per_m_deg=CLUTTER * math.radians(1.0),
    )


def turning_world():
    target = CoordinatedTurn(
        motion="coordinated-turn",
        acceleration_psd_m2_per_s3=PSD,
        turn_rate_psd_deg2_per_s3=RATE_PSD_DEG,
        start_position_m=(100.0, -50.0),
        start_velocity_m_per_s=(12.0, 5.0),
        start_turn_rate_deg_per_s=4.0,
        start_position_sd_m=(15.0, 10.0),
        start_velocity_sd_m_per_s=(2.0, 3.0),
        start_turn_rate_sd_deg_per_s=2.0,
    )
    prior = Prior(target.start_mean(), target.start_spread())
    return World(Assumptions(models_of(target.motion_model(), sensor()), prior, 2), None)


def turn(state):
    """Along the arc, in complex numbers: v (exp(i w T) - 1) / (i w)."""
    place, velocity, rate = complex(*state[:2]), complex(*state[2:4]), state[4]
    swing = cmath.exp(1j * rate * INTERVAL)
    place += velocity * ((swing - 1) / (1j * rate) if rate else INTERVAL)
    velocity *= swing
    return np.array([place.real, place.imag, velocity.real, velocity.imag, rate])


def look(state):
    offset = complex(*state[:2]) - complex(*SITE)
    return np.array([abs(offset), cmath.phase(offset)])


def jacobian(function, state, steps):
    columns = []
    for entry, step in enumerate(steps):
        unit = np.eye(len(state))[entry] * step
        columns.append((function(state + unit) - function(state - unit)) / (2 * step))
    return np.array(columns).T


STEPS = [1e-2, 1e-2, 1e-2, 1e-2, 1e-5]
T = INTERVAL
Q = np.zeros((5, 5))
Q[:4, :4] = PSD * np.kron([[T**3 / 3, T**2 / 2], [T**2 / 2, T]], np.eye(2))
Q[4, 4] = RATE_PSD_DEG * math.radians(1.0) ** 2 * T
R = np.diag([RANGE_SD**2, math.radians(BEARING_SD_DEG) ** 2])


def plain_pda(prior, scans):
    """PDA on an extended Kalman filter without a gate, by finite differences throughout."""
    mean, P = prior.mean, prior.covariance
    for k, scan in enumerate(scans):
        if k > 0:
            F = jacobian(turn, mean, STEPS)
            mean, P = turn(mean), F @ P @ F.T + Q
        H = jacobian(look, mean, STEPS)
        S = H @ P @ H.T + R
        K = P @ H.T @ np.linalg.inv(S)
        parts, logs = [(mean, P)], [math.log(1 - PD)]
        for z in scan:
            innovation = z - look(mean)
            innovation[1] = math.remainder(innovation[1], 2 * math.pi)
            parts.append((mean + K @ innovation, P - K @ S @ K.T))
            distance = innovation @ np.linalg.solve(S, innovation)
            log_density = -0.5 * (distance + np.linalg.slogdet(2 * np.pi * S)[1])
            logs.append(math.log(PD / CLUTTER) + log_density)
        weights = np.exp(np.array(logs) - logsumexp(logs))
        mean, P = moments([(w, *part) for w, part in zip(weights, parts, strict=True)])
        yield mean, P


def turning_trial(seed, scans=25):
    """One truth and scans in which a gated false detection or two turn up."""
    rng = np.random.default_rng(seed)
    prior = turning_world().assumptions.prior
    state = rng.multivariate_normal(prior.mean, prior.covariance)
    states, drawn, origins = [], [], []
    for k in range(scans):
        if k > 0:
            state = turn(state) + rng.multivariate_normal(np.zeros(5), Q)
        states.append(state)
        z = look(state)
        own = [z + rng.multivariate_normal(np.zeros(2), R)] if rng.random() < PD else []
        false = z + rng.uniform(-1, 1, (rng.poisson(1.2), 2)) * [20.0, 0.08]
        scan = np.array([*own, *false]).reshape(-1, 2)
        scan[:, 1] = [math.remainder(bearing, 2 * math.pi) for bearing in scan[:, 1]]
        drawn.append(scan)
        origins.append(0 if own else -1)
    return np.array(states), drawn, origins


@pytest.mark.parametrize("seed", range(4))
def test_pda_on_a_turning_target_equals_a_plain_extended_kalman_filter(seed):
    """Five states, two measured; central differences are good to 1e-8 here."""
    world = turning_world()
    _, scans, _ = turning_trial(seed)
    tracks = run_on(world, pda(gate_probability=1.0), as_scans([scans], 2, interval=INTERVAL))
    plain = list(plain_pda(world.assumptions.prior, scans))
    for k, (mean, covariance) in enumerate(plain):
        np.testing.assert_allclose(tracks.means[0, k], mean, rtol=1e-5, atol=1e-6)
        np.testing.assert_allclose(tracks.covariances[0, k], covariance, rtol=1e-4, atol=1e-7)


def test_turning_targets_are_followed_within_their_claimed_spread():
    """40 trials; known association's mean NEES lies between 4 and 6.5 for five states.

    A linearised filter is not exactly consistent, so the bounds are wider than chi-square's (4.7 to
    5.3); mixtures and PDA hold the target too.
    """
    world = turning_world()
    trials = [turning_trial(100 + seed) for seed in range(40)]
    states = np.array([trial[0] for trial in trials])
    scans = as_scans([trial[1] for trial in trials], 2, interval=INTERVAL)
    told = scans._replace(origins=np.array([trial[2] for trial in trials]))
    tracks = run_on(world, known_association(), told)
    error = tracks.means - states
    squares = np.einsum("tki,tkij,tkj->tk", error, np.linalg.inv(tracks.covariances), error)
    assert 4.0 < squares.mean() < 6.5
    for strategy in (pda(), gaussian_mixture(max_components=5)):
        far = np.linalg.norm((run_on(world, strategy, scans).means - states)[..., :2], axis=2)
        assert np.median(far) < 10.0
        assert np.mean(far[:, -1] > 60.0) < 0.1


def straight_world(position, velocity, site=(0.0, 0.0)):
    target = NearlyConstantVelocity(
        motion="nearly-constant-velocity",
        acceleration_psd_m2_per_s3=0.01,
        start_position_m=position,
        start_velocity_m_per_s=velocity,
        start_position_sd_m=(10.0, 10.0),
        start_velocity_sd_m_per_s=(2.0, 2.0),
    )
    prior = Prior(target.start_mean(), target.start_spread())
    return World(Assumptions(models_of(target.motion_model(), sensor(site, 0.9)), prior, 2), None)


def crossing_scans(rng, count=30):
    """A target near x = -400 m that crosses the x axis, bearings on both sides of 180 degrees.

    Noise, one miss in ten and two false detections near it.
    """
    places = np.array([[-400.0 + 1.0 * k, 150.0 - 10.0 * k] for k in range(count)])
    scans = []
    for place in places:
        z = np.array([math.hypot(*place), math.atan2(place[1], place[0])])
        own = z + rng.normal(size=2) * np.sqrt(np.diag(R))
        scan = np.array([own, *(z + rng.uniform(-1, 1, (2, 2)) * [60.0, 0.2])])[
            rng.random() < 0.1 :
        ]
        scan[:, 1] = np.remainder(scan[:, 1] + math.pi, 2 * math.pi) - math.pi
        scans.append(scan)
    return places, scans


STRATEGIES = {
    "nearest neighbour": nearest_neighbour(),
    "most probable hypothesis": most_probable_hypothesis(),
    "pda": pda(),
    "mixture": gaussian_mixture(max_components=5),
    "histories": rao_blackwellised(particles=20),
    "particles": particle_filter(particles=1000),
    "particles from detections": particle_filter(particles=200, proposal="detections"),
}
SAMPLING = {"histories", "particles", "particles from detections"}


@pytest.mark.parametrize("strategy", STRATEGIES)
def test_a_target_crossing_180_degrees_is_followed_without_a_jump(strategy):
    """No position error beyond 30 m in 20 trials, where one of 360 degrees would make 800 m."""
    rng = np.random.default_rng(180)
    trials = [crossing_scans(rng) for _ in range(20)]
    places = trials[0][0]
    signs = {math.copysign(1.0, z[1]) for _, scans in trials for scan in scans for z in scan}
    assert signs == {1.0, -1.0}
    world = straight_world((-400.0, 150.0), (1.0, -10.0))
    tracks = run_on(world, STRATEGIES[strategy], as_scans([scans for _, scans in trials], 2))
    assert np.linalg.norm(tracks.means[..., :2] - places, axis=2).max() < 30.0


@pytest.mark.parametrize("strategy", [name for name in STRATEGIES if name not in SAMPLING])
def test_turning_the_world_by_180_degrees_turns_the_estimates(strategy):
    """The crossing of the cut becomes one of zero degrees; estimates change their sign alone."""
    rng = np.random.default_rng(181)
    trials = [crossing_scans(rng)[1] for _ in range(10)]
    turned = []
    for scans in trials:
        turned.append([])
        for scan in scans:
            bearing = np.remainder(scan[:, 1] + 2 * math.pi, 2 * math.pi) - math.pi
            turned[-1].append(np.column_stack([scan[:, 0], bearing]))
    world = straight_world((-400.0, 150.0), (1.0, -10.0))
    opposite = straight_world((400.0, -150.0), (-1.0, 10.0))
    found = run_on(opposite, STRATEGIES[strategy], as_scans(turned, 2))
    expected = run_on(world, STRATEGIES[strategy], as_scans(trials, 2))
    np.testing.assert_allclose(found.means, -expected.means, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(found.covariances, expected.covariances, rtol=1e-8, atol=1e-9)


@pytest.mark.parametrize("distance", [5.0, 30.0, 200.0])
def test_skipping_far_detections_changes_no_bit_among_angles(distance):
    """Clouds around the site, across the cut, and clear of both; detections in all directions."""
    rng = np.random.default_rng(int(distance))
    world = straight_world((-distance, 3.0), (-1.0, 0.0))
    ends = [[0.0, -math.pi], [2.0 * distance, math.pi]]
    scans = as_scans([[rng.uniform(*ends, (60, 2)) for _ in range(4)] for _ in range(6)], 2)
    strategy = particle_filter(particles=200)
    found, expected = (run_on(w, strategy, scans) for w in (world, skipping_nothing(world)))
    np.testing.assert_array_equal(found.means, expected.means)
    np.testing.assert_array_equal(found.covariances, expected.covariances)


def test_a_prediction_right_on_the_site_has_no_bearing_and_is_kept():
    """The Jacobian is not finite there; a scan says nothing, and no NaN comes of it."""
    world = straight_world((0.0, 0.0), (0.0, 0.0))
    scans = as_scans([[[[30.0, 0.3]], [[30.0, 0.3]]]], 2)
    for strategy in (nearest_neighbour(), pda(), gaussian_mixture()):
        tracks = run_on(world, strategy, scans)
        np.testing.assert_array_equal(tracks.means, 0.0)
        assert np.isfinite(tracks.covariances).all()
        np.testing.assert_array_equal(tracks.hypotheses, 2)
