"""The particle filter against exact posteriors, its likelihood against NumPy, and its limits."""

import math

import numpy as np
import pytest
from scipy.special import logsumexp
from scipy.stats import norm
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    exact_mixture,
    particle_filter,
    random_walk_world,
    run_on,
    run_particles,
    skipping_nothing,
)

from filters.compiled import model_function
from filters.models.contract import STATE_MATRIX
from filters.particles.cloud import DETECTIONS as FROM_DETECTIONS
from filters.particles.cloud import MOTION
from filters.particles.resampling import STRATIFIED, SYSTEMATIC
from filters.point_mass import point_mass_posteriors
from filters.strategies.particles import RESAMPLINGS
from filters.track import Prior

DETECTIONS = [[0.5, 2.0], [1.5, -3.0], [-3.0, 2.5], [], [4.0, 1.0]]


def point_mass_posterior(plain, scans, half_width=25.0, points=5001):
    """Means and variances of a scalar random walk on a grid of places, after each scan."""
    places = np.linspace(-half_width, half_width, points)
    step = places[1] - places[0]
    reach = np.arange(-600, 601) * step
    kernel = norm.pdf(reach, 0, math.sqrt(plain.Q[0, 0])) * step
    mass = norm.pdf(places, plain.mean[0], math.sqrt(plain.covariance[0, 0]))
    means, variances = [], []
    for k, scan in enumerate(scans):
        if k > 0:
            mass = np.convolve(mass, kernel, mode="same")
        found = sum(norm.pdf(z, places, math.sqrt(plain.R[0, 0])) for z in scan)
        PD = plain.detection_probability
        mass = mass * (1 - PD + PD * found / plain.clutter)
        mass /= mass.sum()
        means.append(mass @ places)
        variances.append(mass @ (places - means[-1]) ** 2)
    return np.array(means), np.array(variances)


def test_errors_fall_with_the_root_of_the_number_of_particles():
    """Against a point-mass grid, 200 trials of the same scans for each number of particles.

    The slope of log error over log N is -1/2; its standard error is 0.02 (each root mean square of
    200 is good to 5 %), allowed are 0.08. The bias, of order 1/N, stays within 4 standard errors.
    """
    world = random_walk_world(detection_probability=0.8, clutter=0.2)
    means, variances = point_mass_posterior(world.plain, DETECTIONS)
    scans = as_scans([DETECTIONS] * 200, 1)
    counts = np.array([125, 500, 2000, 8000])
    errors = []
    for count in counts:
        tracks = run_on(world, particle_filter(particles=int(count)), scans)
        offset = (tracks.means[..., 0] - means) / np.sqrt(variances)
        errors.append(np.sqrt(np.mean(offset**2)))
    slope = np.polyfit(np.log(counts), np.log(errors), 1)[0]
    assert abs(slope + 0.5) < 0.08
    assert errors[-1] < 3 / np.sqrt(counts[-1])
    bias = offset.mean(axis=0) / (offset.std(axis=0, ddof=1) / np.sqrt(len(offset)))
    assert np.all(np.abs(bias) < 4)
    ratio = tracks.covariances[..., 0, 0] / variances
    assert np.all(np.abs(ratio.mean(axis=0) - 1) < 0.03)


def test_the_unreduced_mixture_equals_the_point_mass_grid():
    world = random_walk_world(detection_probability=0.8, clutter=0.2)
    means, variances = point_mass_posterior(world.plain, DETECTIONS)
    tracks = run_on(world, exact_mixture(), as_scans([DETECTIONS], 1))
    np.testing.assert_allclose(tracks.means[0, :, 0], means, atol=1e-8)
    np.testing.assert_allclose(tracks.covariances[0, :, 0, 0], variances, atol=1e-7)


@pytest.mark.parametrize("proposal", ["motion", "detections"])
def test_in_the_plane_particles_come_to_the_unreduced_mixture(proposal):
    """The mean over 60 runs of the same scans, within 4.5 standard errors and 0.01 deviations.

    20 entries at 4.5 standard errors fail by chance once in 7,000; the slack is for the bias, 1/N.
    """
    world = constant_velocity_world(2, detection_probability=0.8, clutter=0.02)
    drawn = draw_scenes_of(world, np.random.default_rng(17), 1, 5, clutter_half_width=6.0)
    exact = run_on(world, exact_mixture(), as_scans(drawn.trials, 2))
    strategy = particle_filter(particles=3000, proposal=proposal)
    tracks = run_on(world, strategy, as_scans(drawn.trials * 60, 2))
    spread = np.sqrt(np.diagonal(exact.covariances[0], axis1=1, axis2=2))
    offset = (tracks.means - exact.means) / spread
    standard_error = offset.std(axis=0, ddof=1) / np.sqrt(60)
    assert np.all(np.abs(offset.mean(axis=0)) < 4.5 * standard_error + 0.01)


def cloud_after(world, scan, particles=400):
    """States and weights of particles after one scan, before any resampling."""
    tracks, cloud = run_particles(world, as_scans([[scan]], 1), particles)
    return cloud.states, cloud.weights, tracks


def plain_weights(plain, states, scan):
    """Normalised weights of equally likely particles, by logarithms throughout."""
    offsets = np.reshape(scan, (-1, 1)) - states[:, 0]
    logs = norm.logpdf(offsets, 0, math.sqrt(plain.R[0, 0]))
    with np.errstate(divide="ignore"):
        log_missed, log_detected = np.log(
            [1 - plain.detection_probability, plain.detection_probability]
        )
        log_clutter = np.log(plain.clutter)
    if plain.clutter == 0.0 and len(scan):
        log_missed, log_clutter = -np.inf, 0.0
    terms = np.vstack([np.full((1, len(states)), log_missed), logs + log_detected - log_clutter])
    total = logsumexp(terms, axis=0)
    return np.exp(total - logsumexp(total))


SCANS = {
    "none": [],
    "one": [1.0],
    "several": [1.0, -2.0, 0.3, 2.5],
    "near and far": [1.0, 300.0, -1e5],
    "rather far": [12.0],
    "all far": [300.0, -900.0],
    "very far": [1e6],
    "many": list(np.linspace(-30, 30, 300)),
}
# PD, clutter
CONDITIONS = [
    (0.9, 0.1),
    (0.9, 1e-300),
    (0.9, 1e30),
    (0.5, 0.0),
    (1.0, 0.1),
    (1.0, 0.0),
    (1.0, 1e-300),
    (1.0, 1e30),
    (1 - 2**-53, 1e-3),
    (0.0, 0.1),
]


@pytest.mark.parametrize("scan", SCANS)
@pytest.mark.parametrize(("PD", "clutter"), CONDITIONS)
@pytest.mark.parametrize("noise_sd", [1.0, 1e-9])
def test_weights_are_the_likelihoods_of_numpy(scan, PD, clutter, noise_sd):
    """1 - PD + PD sum g / lambda, also where it leaves the range of numbers."""
    world = constant_velocity_world(noise_sd=noise_sd, detection_probability=PD, clutter=clutter)
    states, weights, tracks = cloud_after(world, SCANS[scan])
    if PD == 1.0 and scan == "none":
        np.testing.assert_array_equal(tracks.impossible, [1])
        expected = np.full(len(weights), 1 / len(weights))
    else:
        np.testing.assert_array_equal(tracks.impossible, [0])
        expected = plain_weights(world.plain, states, SCANS[scan])
    if noise_sd == 1.0:
        # Exponents reach 5e11 for a detection 1e6 away, and rounding is a share of them.
        tolerance = 1e-3 if scan == "very far" else 1e-9
        np.testing.assert_allclose(weights, expected, rtol=tolerance, atol=1e-200)
    else:  # they reach 1e21 and leave one particle
        np.testing.assert_array_equal(np.argmax(weights), np.argmax(expected))
    np.testing.assert_allclose(weights.sum(), 1.0, rtol=1e-12)
    np.testing.assert_allclose(tracks.means[0, 0], weights @ states, rtol=1e-10, atol=1e-13)
    offsets = states - weights @ states
    np.testing.assert_allclose(
        tracks.covariances[0, 0], (offsets.T * weights) @ offsets, rtol=1e-8, atol=1e-13
    )


@pytest.mark.parametrize(
    "scan", [[1.0, 40.0, -25.0, 300.0], list(np.linspace(-40, 40, 400)), [90.0]]
)
def test_skipping_far_detections_changes_no_bit(scan):
    world = constant_velocity_world()
    _, weights, tracks = cloud_after(world, scan)
    _, expected, all_tracks = cloud_after(skipping_nothing(world), scan)
    np.testing.assert_array_equal(weights, expected)
    np.testing.assert_array_equal(tracks.means, all_tracks.means)


def test_skipping_changes_no_bit_of_whole_runs():
    world = constant_velocity_world(2, clutter=0.01)
    drawn = draw_scenes_of(world, np.random.default_rng(5), 3, 15, clutter_half_width=60.0)
    scans = as_scans(drawn.trials, 2)
    strategy = particle_filter(particles=300)
    found, expected = (run_on(w, strategy, scans) for w in (world, skipping_nothing(world)))
    np.testing.assert_array_equal(found.means, expected.means)
    np.testing.assert_array_equal(found.covariances, expected.covariances)


@pytest.mark.parametrize("proposal", ["motion", "detections"])
def test_a_trial_alone_is_the_same_trial_in_a_batch(proposal):
    world = constant_velocity_world(1)
    drawn = draw_scenes_of(world, np.random.default_rng(21), 6, 8, clutter_half_width=8.0)
    settings = {"resampling": "stratified", "roughening": 0.1} if proposal == "detections" else {}
    strategy = particle_filter(particles=100, proposal=proposal, **settings)
    batch = run_on(world, strategy, as_scans(drawn.trials, 1), first_trial=40)
    alone = run_on(world, strategy, as_scans(drawn.trials[4:5], 1), first_trial=44)
    np.testing.assert_array_equal(alone.means[0], batch.means[4])
    assert np.any(
        batch.means[4] != run_on(world, strategy, as_scans(drawn.trials[4:5], 1)).means[0]
    )


@model_function(STATE_MATRIX)
def noise_by_own_speed(parameters, interval, state, out):
    out[:] = 0.0
    out[0, 0] = parameters[0] * state[1] ** 2


def test_noise_that_varies_with_the_state_moves_every_particle_by_its_own():
    """With a variance of q s^2, Var x grows by q E[s^2]: from 2 to 2 + 0.5 (2 + 3^2), s ~ N(3, 2).

    20,000 particles; the variance of a sample is good to sqrt(2 / N) = 1 %, here a little less as
    the tails are heavier; allowed are 5 %.
    """
    world = random_walk_world()
    motion = world.assumptions.models.motion._replace(
        process_noise=noise_by_own_speed.compiled, parameters=np.array([0.5]), linear=False
    )
    models = world.assumptions.models._replace(motion=motion)
    prior = Prior(np.array([0.0, 3.0]), 2.0 * np.eye(2))
    uneven = world._replace(assumptions=world.assumptions._replace(models=models, prior=prior))
    tracks = run_on(uneven, particle_filter(particles=20_000), as_scans([[[], []]], 1))
    np.testing.assert_allclose(tracks.covariances[0, :, 0, 0], [2.0, 7.5], rtol=0.05)


VARIANTS = {
    "never resampled": {"resample_below": 0.0},
    "resampled when uneven": {},
    "resampled every scan": {"resample_below": 1.0},
    "stratified": {"resampling": "stratified", "resample_below": 1.0},
    "detections": {"proposal": "detections"},
    "detections, stratified every scan": {
        "proposal": "detections",
        "resampling": "stratified",
        "resample_below": 1.0,
    },
}


@pytest.mark.parametrize("variant", VARIANTS)
def test_no_setting_but_roughening_moves_the_posterior(variant):
    """200 runs of 500 particles against the grid: means within 4 standard errors and 0.02."""
    world = random_walk_world(detection_probability=0.8, clutter=0.2)
    means, variances = point_mass_posterior(world.plain, DETECTIONS)
    strategy = particle_filter(particles=500, **VARIANTS[variant])
    tracks = run_on(world, strategy, as_scans([DETECTIONS] * 200, 1))
    offset = (tracks.means[..., 0] - means) / np.sqrt(variances)
    standard_error = offset.std(axis=0, ddof=1) / np.sqrt(200)
    assert np.all(np.abs(offset.mean(axis=0)) < 4 * standard_error + 0.02)
    ratio = tracks.covariances[..., 0, 0] / variances
    assert np.all(np.abs(ratio.mean(axis=0) - 1) < 0.05)


@pytest.mark.parametrize("variant", ["never resampled", "resampled every scan", "stratified"])
@pytest.mark.parametrize("proposal", [MOTION, FROM_DETECTIONS])
def test_the_evidence_is_unbiased(proposal, variant):
    """The mean of estimate over truth, the grid's, in 1,500 runs of 50 particles.

    Within 4 standard errors of 1: six checks fail by chance once in 2,600 seeds.
    """
    world = random_walk_world(detection_probability=0.8, clutter=0.2)
    prior = Prior(world.plain.mean[:1], world.plain.covariance[:1, :1])
    scans = as_scans([DETECTIONS], 1)
    exact = sum(
        posterior.log_evidence
        for posterior in point_mass_posteriors(world.assumptions.models, prior, scans)
    )
    settings = VARIANTS[variant] | {"proposal": proposal}
    settings["resampling"] = RESAMPLINGS[settings.get("resampling", "systematic")]
    ratios = np.empty(1500)
    for seed in range(len(ratios)):
        _, cloud = run_particles(world, scans, 50, first_trial=seed, **settings)
        ratios[seed] = math.exp(cloud.step["log_evidence"][0] - exact)
    standard_error = ratios.std(ddof=1) / math.sqrt(len(ratios))
    assert standard_error < 0.03
    assert abs(ratios.mean() - 1) < 4 * standard_error


@pytest.mark.parametrize("scheme", [SYSTEMATIC, STRATIFIED])
def test_resampling_keeps_every_particle_about_as_often_as_its_weight_says(scheme):
    """N w copies, rounded down or up, or less than two off with a number for each stratum.

    Without further motion, so that copies can be told by their states.
    """
    world = random_walk_world(clutter=0.05)
    scans = as_scans([[[1.0]]], 1)
    _, before = run_particles(world, scans)
    _, after = run_particles(world, scans, resample_below=1.0, resampling=scheme)
    copies = np.array([np.sum(after.states[:, 0] == state) for state in before.states[:, 0]])
    assert copies.sum() == 400
    off = np.abs(copies - 400 * before.weights)
    assert np.all(off < (1 if scheme == SYSTEMATIC else 2) + 1e-9)
    assert (off > 1).any() == (scheme == STRATIFIED)
    np.testing.assert_array_equal(after.weights, 1 / 400)
    np.testing.assert_array_equal(after.sources, np.repeat(np.arange(400), copies))


def test_roughening_is_done_if_asked_for_and_after_resampling_alone():
    """Jitter of standard deviation K E N^(-1/n) in each number, on copies that are known.

    E is the range over the particles. 400 jitters: their deviation is good to 3.5 %; allowed 16 %.
    """
    world = random_walk_world(clutter=0.05)
    scans = as_scans([[[1.0]]], 1)
    _, kept = run_particles(world, scans, roughening=0.3)
    _, plain = run_particles(world, scans)
    np.testing.assert_array_equal(kept.states, plain.states)
    _, copied = run_particles(world, scans, resample_below=1.0)
    _, rough = run_particles(world, scans, resample_below=1.0, roughening=0.3)
    expected = 0.3 * np.ptp(copied.states, axis=0) / math.sqrt(400)
    jitter = rough.states - copied.states
    np.testing.assert_allclose(jitter.std(axis=0), expected, rtol=0.16)
    assert np.all(np.abs(jitter.mean(axis=0)) < 4.5 * expected / 20)
    assert abs(np.corrcoef(jitter.T)[0, 1]) < 4.5 / 20
