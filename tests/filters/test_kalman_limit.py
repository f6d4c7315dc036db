"""With certain detection, no clutter and no gate, every strategy is the Kalman filter."""

import numpy as np
import pytest
from plain_filters import keep_nearest, run
from scipy.linalg import solve_discrete_are
from small_worlds import (
    as_scans,
    constant_acceleration_world,
    constant_velocity_world,
    draw_scenes_of,
    gaussian_mixture,
    held_acceleration_world,
    known_association,
    most_probable_hypothesis,
    nearest_neighbour,
    particle_filter,
    pda,
    random_walk_world,
    run_on,
)

from metrics.consistency import nees

STRATEGIES = {
    "nearest neighbour": nearest_neighbour(gate_probability=1.0),
    "most probable hypothesis": most_probable_hypothesis(gate_probability=1.0),
    "pda": pda(gate_probability=1.0),
    "mixture": gaussian_mixture(gate_probability=1.0),
    "known association": known_association(),
}
WORLDS = {
    "white acceleration, 1-D": lambda **keys: constant_velocity_world(1, **keys),
    "white acceleration, 2-D": lambda **keys: constant_velocity_world(2, **keys),
    "held acceleration, 1-D": lambda **keys: held_acceleration_world(1, **keys),
    "white jerk, 1-D": lambda **keys: constant_acceleration_world(1, **keys),
}


def certain(world_named, **keys):
    return WORLDS[world_named](detection_probability=1.0, clutter=0.0, **keys)


def updated_steady_state(plain):
    """Covariance after an update in the long run, from the Riccati equation of the prediction."""
    predicted = solve_discrete_are(plain.F.T, plain.H.T, plain.Q, plain.R)
    S = plain.H @ predicted @ plain.H.T + plain.R
    return predicted - predicted @ plain.H.T @ np.linalg.solve(S, plain.H @ predicted)


@pytest.mark.parametrize("strategy", STRATEGIES)
@pytest.mark.parametrize("world_named", WORLDS)
def test_every_gaussian_strategy_equals_a_textbook_kalman_filter(world_named, strategy):
    """Source: the predict and update equations as every textbook has them."""
    world = certain(world_named, interval=0.7)
    drawn = draw_scenes_of(world, np.random.default_rng(5), trials=3, scans=40)
    scans = as_scans(drawn.trials, len(world.plain.H), interval=0.7, origins=drawn.origins)
    tracks = run_on(world, STRATEGIES[strategy], scans)
    for trial, detections in enumerate(drawn.trials):
        means, covariances = run(world.plain, detections, keep_nearest)
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-8, atol=1e-10)
    assert tracks.present.all()
    assert not tracks.impossible.any()
    np.testing.assert_array_equal(tracks.hypotheses, 2 * 40)


@pytest.mark.parametrize("world_named", WORLDS)
def test_the_covariance_settles_at_the_solution_of_the_riccati_equation(world_named):
    """Source: scipy.linalg.solve_discrete_are."""
    world = certain(world_named)
    m = len(world.plain.H)
    scans = as_scans([[np.zeros((1, m))] * 200], m)
    tracks = run_on(world, STRATEGIES["pda"], scans)
    expected = updated_steady_state(world.plain)
    np.testing.assert_allclose(tracks.covariances[0, -1], expected, rtol=1e-9, atol=1e-12)


# (index, alpha, beta, P22 T^2 / R): the index is acceleration sd T^2 / noise sd for an acceleration
# held over the interval, psd T^3 / noise variance for white noise.
HELD = [
    (0.1, 0.36, 0.08, 0.04),
    (1 / 6, 7 / 16, 1 / 8, 1 / 12),
    (1 / 3, 5 / 9, 2 / 9, 2 / 9),
    (1.0, 0.75, 0.5, 1.0),
    (10.0, 0.978714, 1.458980, 17.082039),
]
WHITE = [
    (0.01, 0.360592, 0.079963, 0.040095),
    (1.0, 0.756738, 0.493216, 1.034294),
    (10.0, 0.918057, 0.905224, 5.141771),
    (100.0, 0.985803, 1.191507, 32.735832),
]


@pytest.mark.parametrize(
    ("kind", "row"), [("held", r) for r in HELD] + [("white", r) for r in WHITE]
)
def test_the_gains_settle_at_the_published_alpha_and_beta(kind, row):
    """Sources: Kalata (1984) for an acceleration held over the interval; Bar-Shalom, Li and

    Kirubarajan (2001), section 6.5, for both. The closed forms are from memory, their values were
    confirmed by the Riccati equation. An updated covariance over R is the gain: (alpha, beta / T).
    """
    index, alpha, beta, velocity = row
    interval, noise_sd = 2.0, 3.0
    keys = {
        "interval": interval,
        "noise_sd": noise_sd,
        "detection_probability": 1.0,
        "clutter": 0.0,
    }
    if kind == "held":
        world = held_acceleration_world(acceleration_sd=index * noise_sd / interval**2, **keys)
    else:
        world = constant_velocity_world(psd=index * noise_sd**2 / interval**3, **keys)
    scans = as_scans([[np.zeros((1, 1))] * 200], 1, interval=interval)
    settled = run_on(world, STRATEGIES["nearest neighbour"], scans).covariances[0, -1] / noise_sd**2
    np.testing.assert_allclose(settled[0, 0], alpha, rtol=0, atol=1e-6)
    np.testing.assert_allclose(settled[0, 1] * interval, beta, rtol=0, atol=1e-6)
    np.testing.assert_allclose(settled[1, 1] * interval**2, velocity, rtol=0, atol=1e-6)


def test_errors_are_as_large_as_the_settled_covariance_says():
    """600 trials; mean squared errors over settled scans within 4 standard errors, mean NEES too.

    Six comparisons at 4 standard errors: fresh seeds would fail once in 2,600 times.
    """
    world = certain("white acceleration, 2-D")
    drawn = draw_scenes_of(world, np.random.default_rng(77), trials=600, scans=40)
    tracks = run_on(world, STRATEGIES["pda"], as_scans(drawn.trials, 2))
    error = (tracks.means - drawn.states)[:, 15:]
    expected = np.append(np.diag(updated_steady_state(world.plain)), 4.0)
    consistency = nees(error, tracks.covariances[:, 15:])
    found = np.concatenate([error**2, consistency[..., None]], axis=-1).mean(axis=1)
    standard_error = found.std(axis=0, ddof=1) / np.sqrt(len(found))
    assert np.all(np.abs(found.mean(axis=0) - expected) < 4 * standard_error)
    root = np.sqrt(found[:, :2].mean())
    np.testing.assert_allclose(root, np.sqrt(expected[0]), rtol=0.02)


def test_known_association_is_the_kalman_filter_on_the_own_detections():
    """Clutter and missed scans: it updates with its own detection or only predicts."""
    world = constant_velocity_world(2, detection_probability=0.6, clutter=0.02)
    drawn = draw_scenes_of(world, np.random.default_rng(8), 10, 30, clutter_half_width=5.0)
    scans = as_scans(drawn.trials, 2, origins=drawn.origins)
    tracks = run_on(world, known_association(), scans)
    for trial, detections in enumerate(drawn.trials):
        own = [
            scan[: origin + 1]
            for scan, origin in zip(detections, drawn.origins[trial], strict=True)
        ]
        means, covariances = run(world.plain, own, keep_nearest)
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-8, atol=1e-10)
    np.testing.assert_array_equal(tracks.hypotheses, np.sum(1 + (drawn.origins == 0), axis=1))


# PD, bounds of the mean predicted variance, and its value.
INTERMITTENT = [
    (0.5, 2.0, 2.732051, 2.7013),
    (0.7, 1.428571, 2.106685, 2.0901),
    (0.9, 1.111111, 1.747089, 1.7421),
]


@pytest.mark.parametrize(("PD", "low", "high", "mean"), INTERMITTENT)
def test_missed_detections_raise_the_variance_as_for_intermittent_observations(PD, low, high, mean):
    """Sinopoli et al. (2004), IEEE Transactions on Automatic Control 49(9): a scalar random walk.

    F = Q = R = 1; bounds in closed form, the value by iterating the variance's density. 2,000
    trials, their means over 40 settled scans within 4 standard errors and the value's rounding.
    """
    world = random_walk_world(detection_probability=PD, clutter=0.0)
    drawn = draw_scenes_of(world, np.random.default_rng(14), trials=2000, scans=60)
    scans = as_scans(drawn.trials, 1, origins=drawn.origins)
    predicted = run_on(world, known_association(), scans).covariances[:, 20:, 0, 0] + 1.0
    per_trial = predicted.mean(axis=1)
    standard_error = per_trial.std(ddof=1) / np.sqrt(2000)
    assert abs(per_trial.mean() - mean) < 4 * standard_error + 5e-4
    assert low < per_trial.mean() < high


def test_particles_come_close_to_the_kalman_filter():
    """2,000 particles: means within a tenth of a standard deviation on average over 40 trials.

    The error of a mean of N independent samples is 1 / sqrt(N) = 0.022 deviations; weighting and
    resampling cost a factor of about two here.
    """
    world = certain("white acceleration, 1-D")
    drawn = draw_scenes_of(world, np.random.default_rng(6), trials=40, scans=15)
    scans = as_scans(drawn.trials, 1)
    exact = run_on(world, STRATEGIES["pda"], scans)
    cloud = run_on(world, particle_filter(particles=2000), scans)
    spread = np.sqrt(np.diagonal(exact.covariances, axis1=2, axis2=3))
    offset = (cloud.means - exact.means) / spread
    assert np.sqrt(np.mean(offset**2)) < 0.1
    ratio = cloud.covariances[..., 0, 0] / exact.covariances[..., 0, 0]
    assert abs(ratio.mean() - 1.0) < 0.02
