"""The point-mass filter against closed forms, unreduced mixtures and brute-force integration."""

import math

import numpy as np
import pytest
from plain_filters import keep_all, run
from scipy.integrate import quad
from scipy.stats import multivariate_normal, norm
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    gaussian_mixture,
    held_acceleration_world,
    particle_filter,
    random_walk_world,
    run_on,
)

from filters.compiled import model_function
from filters.lattice import Resolution
from filters.models.contract import (
    MEASUREMENT_MATRIX,
    MEASUREMENT_OF,
    SCALAR_OF,
    STATE_AFTER,
    STATE_MATRIX,
)
from filters.point_mass import point_mass_posteriors
from filters.track import Prior
from metrics.gaussian_mixtures import gaussian_mixtures, log_density
from metrics.posterior_gap import grid_kullback_leibler, grid_squared_error

# A scalar random walk with F = Q = R = 1, PD = 0.9, lambda = 0.1 and prior N(0, 2) at the first
# scan. Values computed once with another program, an unpruned mixture that agrees with its grid.
DETECTIONS = [[0.5, 2.0], [1.5], [-3.0, 2.5], []]
MEANS = [0.6603466374, 1.1848935480, 1.7884433623, 1.7884433623]
VARIANCES = [0.9431320103, 0.7416136046, 1.3287915840, 2.3287915840]
SCALAR_PRIOR = Prior(np.zeros(1), np.array([[2.0]]))


def posteriors_of(world, trials, prior=None, **settings):
    prior = prior or world.assumptions.prior
    m = len(world.assumptions.models.sensor.periods)
    scans = as_scans(trials, m)
    models, resolution = world.assumptions.models, Resolution(**settings)
    return list(point_mass_posteriors(models, prior, scans, resolution=resolution))


def moments_of(posteriors):
    return tuple(np.array([getattr(p, key) for p in posteriors]) for key in ("mean", "covariance"))


@pytest.mark.parametrize("n", [1, 2])
def test_the_golden_scalar_run_comes_out_to_its_last_digit(n):
    """Ten digits; with two numbers the second is a random walk that nothing is measured of."""
    world = random_walk_world()
    prior = SCALAR_PRIOR if n == 1 else world.assumptions.prior
    means, covariances = moments_of(posteriors_of(world, [DETECTIONS], prior))
    np.testing.assert_allclose(means[:, 0], MEANS, rtol=0, atol=1e-9)
    np.testing.assert_allclose(covariances[:, 0, 0], VARIANCES, rtol=0, atol=1e-9)
    if n == 2:
        np.testing.assert_allclose(covariances[:, 1, 1], [2.0, 3.0, 4.0, 5.0], atol=1e-9)


WORLDS = {
    "white-noise acceleration": constant_velocity_world(detection_probability=0.8),
    "held acceleration, its noise singular": held_acceleration_world(detection_probability=0.8),
    "no process noise": constant_velocity_world(psd=0.0, detection_probability=0.8),
    "certain detection": constant_velocity_world(detection_probability=1.0),
    "no clutter": constant_velocity_world(detection_probability=0.7, clutter=0.0),
}


@pytest.mark.parametrize("name", WORLDS)
def test_position_and_velocity_have_the_moments_of_the_unreduced_mixture(name):
    """Five scans with up to three detections; the mixture in plain NumPy."""
    world = WORLDS[name]
    rng = np.random.default_rng(3)
    half_width = 8.0 if world.plain.clutter else 0.0
    drawn = draw_scenes_of(world, rng, 1, 5, clutter_half_width=half_width)
    expected = run(world.plain, drawn.trials[0], keep_all)
    posteriors = posteriors_of(world, drawn.trials)
    for found, wanted in zip(moments_of(posteriors), expected, strict=True):
        np.testing.assert_allclose(found, wanted, rtol=0, atol=1e-8)
    assert max(p.cut_off for p in posteriors) < 1e-9
    assert not any(p.impossible for p in posteriors)


def plain_mixture(plain, scans):
    """The unreduced mixture itself after the last scan."""
    kept = []

    def keep(rows):
        kept.append(keep_all(rows))
        return kept[-1]

    run(plain, scans, keep)
    return gaussian_mixtures(*(np.array(part) for part in zip(*kept[-1], strict=True)))


def test_the_density_is_that_of_the_unreduced_mixture_at_every_point():
    """Within 1e-9 of the peak; so no gap is left beside rounding, by either measure."""
    world = constant_velocity_world(detection_probability=0.8)
    drawn = draw_scenes_of(world, np.random.default_rng(4), 1, 4, clutter_half_width=8.0)
    lattice, values = posteriors_of(world, drawn.trials)[-1].grid
    exact = plain_mixture(world.plain, drawn.trials[0])
    expected = np.exp(log_density(exact, lattice.states()))
    np.testing.assert_allclose(values.ravel(), expected, rtol=0, atol=1e-9 * expected.max())
    grid = (lattice.states(), lattice.cell, values.ravel())
    assert grid_squared_error(*grid, exact) < 1e-12
    assert abs(grid_kullback_leibler(*grid, exact)) < 1e-9


def test_errors_fall_faster_than_any_power_of_the_step():
    """Steps a standard deviation 1.2, 1.6, 2.0, 2.4: each 0.4 more takes two digits, as
    exp(-pi² s² / 2) says, and the edge of the spectrum falls with the error."""
    world = constant_velocity_world(detection_probability=0.8)
    drawn = draw_scenes_of(world, np.random.default_rng(5), 1, 4, clutter_half_width=8.0)
    expected = run(world.plain, drawn.trials[0], keep_all)
    errors, edges = [], []
    for steps_per_sd in (1.2, 1.6, 2.0, 2.4):
        posteriors = posteriors_of(world, drawn.trials, steps_per_sd=steps_per_sd)
        errors.append(np.abs(moments_of(posteriors)[1] - expected[1]).max())
        edges.append(max(p.unresolved for p in posteriors))
    assert np.all(np.diff(np.log10(errors)) < -2)
    assert np.all(np.diff(np.log10(edges)) < -2)
    assert errors[-1] < 1e-8


def test_the_evidence_without_clutter_is_that_of_the_kalman_filter():
    """PD N(z; zhat, S): where there is no clutter, the factor is PD g alone."""
    world = constant_velocity_world(detection_probability=0.7, clutter=0.0)
    plain = world.plain
    scans = [[[1.0]], [[1.5]], [[1.2]]]
    mean, covariance = plain.mean, plain.covariance
    for k, posterior in enumerate(posteriors_of(world, [scans])):
        if k > 0:
            mean, covariance = plain.F @ mean, plain.F @ covariance @ plain.F.T + plain.Q
        S = plain.H @ covariance @ plain.H.T + plain.R
        z = np.array(scans[k][0])
        evidence = math.log(0.7) + multivariate_normal.logpdf(z, plain.H @ mean, S)
        assert posterior.log_evidence == pytest.approx(evidence, abs=1e-9)
        K = covariance @ plain.H.T @ np.linalg.inv(S)
        mean = mean + K @ (z - plain.H @ mean)
        covariance = covariance - K @ S @ K.T


def test_a_scan_impossible_under_the_model_keeps_the_prediction():
    world = constant_velocity_world(detection_probability=1.0)
    scans = [[[1.0]], np.empty((0, 1)), [[2.0]]]
    first, empty, last = posteriors_of(world, [scans])
    plain = world.plain
    assert (first.impossible, empty.impossible, last.impossible) == (False, True, False)
    assert empty.log_evidence == -math.inf
    np.testing.assert_allclose(empty.mean, plain.F @ first.mean, atol=1e-9)
    expected = plain.F @ first.covariance @ plain.F.T + plain.Q
    np.testing.assert_allclose(empty.covariance, expected, atol=1e-8)


@model_function(SCALAR_OF)
def seen_less_far_out(parameters, site, state):
    return 0.95 / (1.0 + (state[0] / parameters[0]) ** 2)


@model_function(SCALAR_OF)
def denser_to_the_right(parameters, site, measurement):
    return parameters[0] * (1.0 + math.tanh(measurement[0]))


@model_function(STATE_AFTER)
def swinging(parameters, interval, state, out):
    out[0] = state[0] + math.sin(state[0])


@model_function(STATE_MATRIX)
def swinging_slope(parameters, interval, state, out):
    out[0, 0] = 1.0 + math.cos(state[0])


@model_function(STATE_MATRIX)
def noise_growing_outwards(parameters, interval, state, out):
    out[0, 0] = 0.3 + 0.1 * state[0] ** 2


@model_function(MEASUREMENT_OF)
def bent_place(parameters, site, state, out):
    out[0] = state[0] + 0.1 * state[0] ** 2


@model_function(MEASUREMENT_MATRIX)
def bent_place_slope(parameters, site, state, out):
    out[0, 0] = 1.0 + 0.2 * state[0]


@model_function(MEASUREMENT_MATRIX)
def bent_place_noise(parameters, site, state, out):
    out[0, 0] = 0.5 + 0.2 * math.cos(state[0])


def bent_world():
    """A scalar state with nothing linear or constant in it."""
    world = random_walk_world()
    models = world.assumptions.models
    models = models._replace(
        motion=models.motion._replace(
            transition=swinging.compiled,
            jacobian=swinging_slope.compiled,
            process_noise=noise_growing_outwards.compiled,
            linear=False,
        ),
        sensor=models.sensor._replace(
            measure=bent_place.compiled,
            jacobian=bent_place_slope.compiled,
            noise=bent_place_noise.compiled,
            same_noise=False,
        ),
        detection=models.detection._replace(
            probability=seen_less_far_out.compiled, parameters=np.array([2.0])
        ),
        clutter=models.clutter._replace(
            intensity=denser_to_the_right.compiled, parameters=np.array([0.15])
        ),
    )
    return world._replace(assumptions=world.assumptions._replace(models=models))


def bent_likelihood(x, detections):
    PD = 0.95 / (1 + (x / 2.0) ** 2)
    place, spread = x + 0.1 * x**2, np.sqrt(0.5 + 0.2 * np.cos(x))
    found = sum(norm.pdf(z, place, spread) / (0.15 * (1 + np.tanh(z))) for z in detections)
    return 1 - PD + PD * found


def test_one_scan_with_everything_varying_is_the_integral_of_scipy():
    """PD(x) inside the integral for detections as for a miss, lambda at each detection."""
    detections = [0.4, -1.5, 2.0]

    def moment(power):
        def integrand(x):
            return x**power * norm.pdf(x, 0, math.sqrt(2)) * bent_likelihood(x, detections)

        return quad(integrand, -12, 12, epsabs=1e-13, epsrel=1e-12, limit=400)[0]

    evidence = moment(0)
    mean = moment(1) / evidence
    variance = moment(2) / evidence - mean**2
    (found,) = posteriors_of(bent_world(), [[detections]], SCALAR_PRIOR, steps_per_sd=4.0)
    assert found.log_evidence == pytest.approx(math.log(evidence), abs=1e-8)
    assert found.mean[0] == pytest.approx(mean, abs=1e-8)
    assert found.covariance[0, 0] == pytest.approx(variance, abs=1e-8)


def test_nonlinear_motion_with_varying_noise_is_the_integral_over_both_states():
    """The state after two scans, by a Gauss-Legendre rule of 500 x 500 points."""
    first, second = [0.4, -1.5], [1.0]
    nodes, weights = np.polynomial.legendre.leggauss(500)
    before, after = 11 * nodes, 30 * nodes[:, np.newaxis]
    joint = norm.pdf(before, 0, math.sqrt(2)) * bent_likelihood(before, first)
    joint = joint * norm.pdf(after, before + np.sin(before), np.sqrt(0.3 + 0.1 * before**2))
    mass = 30 * weights * bent_likelihood(30 * nodes, second) * (joint @ (11 * weights))
    evidence = mass.sum()
    mean = mass @ (30 * nodes) / evidence
    variance = mass @ (30 * nodes - mean) ** 2 / evidence
    found = posteriors_of(bent_world(), [[first, second]], SCALAR_PRIOR, steps_per_sd=4.0)
    total = found[0].log_evidence + found[1].log_evidence
    assert total == pytest.approx(math.log(evidence), abs=1e-8)
    assert found[1].mean[0] == pytest.approx(mean, abs=1e-8)
    assert found[1].covariance[0, 0] == pytest.approx(variance, abs=1e-7)


@model_function(STATE_AFTER)
def turned(parameters, interval, state, out):
    cosine, sine = math.cos(parameters[1]), math.sin(parameters[1])
    out[0] = cosine * state[0] - sine * state[1]
    out[1] = sine * state[0] + cosine * state[1]


@model_function(STATE_MATRIX)
def turn_matrix(parameters, interval, state, out):
    cosine, sine = math.cos(parameters[1]), math.sin(parameters[1])
    out[0, 0], out[0, 1] = cosine, -sine
    out[1, 0], out[1, 1] = sine, cosine


@pytest.mark.parametrize("variance", [0.5, 0.05])
def test_a_motion_that_mixes_both_numbers_is_integrated_point_by_point(variance):
    """A turn by 50 degrees, its matrix not triangular; the finer noise needs a finer grid."""
    angle = math.radians(50.0)
    world = random_walk_world(variance=variance, noise_variance=0.5)
    models = world.assumptions.models
    motion = models.motion._replace(
        transition=turned.compiled,
        jacobian=turn_matrix.compiled,
        parameters=np.array([variance, angle]),
    )
    world = world._replace(
        assumptions=world.assumptions._replace(models=models._replace(motion=motion)),
        plain=world.plain._replace(
            F=np.array([[math.cos(angle), -math.sin(angle)], [math.sin(angle), math.cos(angle)]]),
            covariance=np.diag([0.5, 0.3]),
        ),
    )
    scans = [[[0.5], [-1.0]], [[0.2]], [[1.0], [0.4]]]
    expected = run(world.plain, [np.array(scan) for scan in scans], keep_all)
    prior = Prior(world.plain.mean, world.plain.covariance)
    for found, wanted in zip(
        moments_of(posteriors_of(world, [scans], prior)), expected, strict=True
    ):
        np.testing.assert_allclose(found, wanted, rtol=0, atol=1e-7)


@model_function(MEASUREMENT_OF)
def bearing(parameters, site, state, out):
    out[0] = math.atan2(state[1], state[0])


@model_function(MEASUREMENT_MATRIX)
def bearing_slope(parameters, site, state, out):
    square = state[0] ** 2 + state[1] ** 2
    out[0, 0], out[0, 1] = -state[1] / square, state[0] / square


@model_function(MEASUREMENT_MATRIX)
def bearing_noise(parameters, site, state, out):
    out[0, 0] = parameters[0] ** 2


def bearing_world():
    """A random walk in the plane, of which the bearing is seen: the state is the position."""
    world = random_walk_world(variance=0.2)
    models = world.assumptions.models
    sensor = models.sensor._replace(
        measure=bearing.compiled,
        jacobian=bearing_slope.compiled,
        noise=bearing_noise.compiled,
        parameters=np.array([0.05]),
        periods=np.array([2 * math.pi]),
    )
    models = models._replace(sensor=sensor)
    return world._replace(assumptions=world.assumptions._replace(models=models))


def test_bearings_on_both_sides_of_the_cut_are_those_beside_zero_turned():
    """The world turned by 180 degrees, its bearings then next to 0 instead of +-180 degrees."""
    bearings = [0.03, -0.04, 0.01]
    across = [[[math.remainder(b + math.pi, 2 * math.pi)]] for b in bearings]
    ahead = [[[b]] for b in bearings]
    prior = np.array([6.0, 0.5]), np.diag([1.0, 0.6])
    found = posteriors_of(bearing_world(), [across], Prior(-prior[0], prior[1]))
    expected = posteriors_of(bearing_world(), [ahead], Prior(*prior))
    assert {math.copysign(1.0, scan[0][0]) for scan in across} == {1.0, -1.0}
    for one, other in zip(found, expected, strict=True):
        np.testing.assert_allclose(one.mean, -other.mean, atol=1e-9)
        np.testing.assert_allclose(one.covariance, other.covariance, atol=1e-9)
        assert one.log_evidence == pytest.approx(other.log_evidence, abs=1e-9)


def test_a_bearing_gives_the_posterior_of_brute_force():
    """A wedge, not an ellipse: one scan against sums over 1,000 x 1,000 points."""
    mean, covariance = np.array([9.0, 0.5]), np.diag([1.0, 0.6])
    x = np.linspace(1.0, 17.0, 1000)[:, np.newaxis]
    y = np.linspace(-6.0, 7.0, 1000)
    prior = norm.pdf(x, 9.0, 1.0) * norm.pdf(y, 0.5, math.sqrt(0.6))
    offset = 0.1 - np.arctan2(y, x)
    seen = norm.pdf(offset - 2 * math.pi * np.round(offset / (2 * math.pi)), 0, 0.05)
    mass = prior * (0.1 + 0.9 * seen / 0.1)
    mass /= mass.sum()
    expected = [np.sum(mass * x), np.sum(mass * y)]
    settings = {"steps_per_sd": 4.0}
    (found,) = posteriors_of(bearing_world(), [[[[0.1]]]], Prior(mean, covariance), **settings)
    np.testing.assert_allclose(found.mean, expected, atol=1e-8)
    assert found.covariance[0, 1] == pytest.approx(
        np.sum(mass * (x - expected[0]) * (y - expected[1])), abs=1e-8
    )


def fixed_grid_means(plain, scans):
    """A scalar random walk on one fixed fine grid, moved on by convolution."""
    places = np.linspace(-60.0, 60.0, 6001)
    step = places[1] - places[0]
    kernel = norm.pdf(np.arange(-500, 501) * step, 0, math.sqrt(plain.Q[0, 0])) * step
    mass = norm.pdf(places, 0, math.sqrt(plain.covariance[0, 0]))
    for k, scan in enumerate(scans):
        if k > 0:
            mass = np.convolve(mass, kernel, mode="same")
        found = sum(norm.pdf(z, places, math.sqrt(plain.R[0, 0])) for z in np.ravel(scan))
        mass = mass * (1 + plain.detection_probability * (found / plain.clutter - 1))
        mass /= mass.sum()
        yield mass @ places


def test_fifty_scans_agree_with_a_fixed_grid_a_mixture_and_particles():
    """A scalar random walk with a false detection near it every other scan or so.

    The mixture is itself an approximation: what it merges costs it 1e-3 standard deviations. The
    mean of 20 runs of 5,000 particles lies within 4.5 of its standard errors, and 0.01 for its bias
    of 1/N: 50 checks, by chance about once in 500 seeds.
    """
    world = random_walk_world(detection_probability=0.9, clutter=0.05)
    drawn = draw_scenes_of(world, np.random.default_rng(12), 1, 50, clutter_half_width=4.0)
    means, covariances = moments_of(posteriors_of(world, drawn.trials, SCALAR_PRIOR))
    spread = np.sqrt(covariances[:, 0, 0])
    fixed = list(fixed_grid_means(world.plain, drawn.trials[0]))
    np.testing.assert_allclose(means[:, 0], fixed, rtol=0, atol=1e-9)

    mixture = gaussian_mixture(
        max_components=300, prune_below=1e-8, merge_below=1e-3, gate_probability=1.0
    )
    tracks = run_on(world, mixture, as_scans(drawn.trials, 1))
    assert np.abs((tracks.means[0, :, 0] - means[:, 0]) / spread).max() < 3e-3
    np.testing.assert_allclose(tracks.covariances[0, :, 0, 0], covariances[:, 0, 0], rtol=3e-3)

    tracks = run_on(world, particle_filter(particles=5000), as_scans(drawn.trials * 20, 1))
    offset = (tracks.means[..., 0] - means[:, 0]) / spread
    standard_error = offset.std(axis=0, ddof=1) / np.sqrt(20)
    assert np.all(np.abs(offset.mean(axis=0)) < 4.5 * standard_error + 0.01)


def test_singular_noise_is_refused_where_it_would_have_to_be_integrated():
    world = held_acceleration_world()
    models = world.assumptions.models
    models = models._replace(motion=models.motion._replace(linear=False))
    world = world._replace(assumptions=world.assumptions._replace(models=models))
    with pytest.raises(ValueError, match="trial 0, scan 2: the process noise is singular"):
        posteriors_of(world, [[[[0.0]], [[0.0]]]])


def test_what_the_grid_cannot_hold_is_refused_with_the_reason():
    world = constant_velocity_world()
    scans = [[[[0.0]], [[0.0]]]]
    with pytest.raises(ValueError, match="states of one or two numbers, got 4"):
        posteriors_of(constant_velocity_world(2), [[[[0.0, 0.0]]]])
    with pytest.raises(ValueError, match=r"scan 1: .* would need 82 x 38 points, more than"):
        posteriors_of(world, scans, most_points=1000)
    with pytest.raises(ValueError, match="prior's covariance must be positive definite"):
        posteriors_of(world, scans, Prior(np.zeros(2), np.ones((2, 2))))
    with pytest.raises(ValueError, match=r"steps_per_sd must be at least 1, got 0\.5"):
        posteriors_of(world, scans, steps_per_sd=0.5)
    with pytest.raises(ValueError, match=r"tail must lie between 0 and 0\.01, got 0"):
        posteriors_of(world, scans, tail=0.0)
    certain = constant_velocity_world(detection_probability=1.0)
    with pytest.raises(ValueError, match="scan 1: the detections lie in the tail"):
        posteriors_of(certain, [[[[40.0]]]])
