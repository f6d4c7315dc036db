"""The proposal from the detections: its weights against NumPy densities, and what it gains."""

import math

import numpy as np
import pytest
from plain_filters import update_by_one
from scipy.special import logsumexp
from scipy.stats import multivariate_normal, norm
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    exact_mixture,
    held_acceleration_world,
    particle_filter,
    run_on,
    run_particles,
)

from filters.particles.cloud import DETECTIONS, MOTION

MOTION_SHARE = 0.1


def plain_log_weights(plain, states, scan):
    """ln of likelihood times prior over the whole mixture that particles are drawn from."""
    PD, m, P = plain.detection_probability, plain.mean, plain.covariance
    none = plain.clutter == 0.0 and len(scan) > 0
    with np.errstate(divide="ignore"):
        log_missed = -np.inf if none else np.log(1 - PD)
        log_found = np.log(PD) - (0.0 if none else np.log(plain.clutter))
    updates = [update_by_one(plain, m, P, np.array([z])) for z in scan]
    log_hypotheses = np.array([log_missed, *(log_found + update[3] for update in updates)])
    log_prior = multivariate_normal.logpdf(states, m, P)
    log_given = [log_prior]
    log_given += [multivariate_normal.logpdf(states, mean, C) for mean, C, _, _ in updates]
    log_mixture = logsumexp(
        np.array(log_given) + (log_hypotheses - logsumexp(log_hypotheses))[:, np.newaxis], axis=0
    )
    log_proposal = np.logaddexp(
        math.log(MOTION_SHARE) + log_prior, math.log(1 - MOTION_SHARE) + log_mixture
    )
    offsets = np.reshape(scan, (-1, 1)) - states[:, 0]
    log_terms = log_found + norm.logpdf(offsets, 0, math.sqrt(plain.R[0, 0]))
    missed = np.full((1, len(states)), log_missed)
    return logsumexp(np.vstack([missed, log_terms]), axis=0) + log_prior - log_proposal


SCANS = {
    "none": [],
    "one": [1.0],
    "several": [1.0, -2.0, 0.3, 2.5],
    "near and far": [1.0, 300.0, -1e5],
    "rather far": [12.0],
    "far": [60.0],
    "many": list(np.linspace(-30, 30, 300)),
}
# PD, clutter
CONDITIONS = [(0.9, 0.1), (0.9, 1e-300), (0.5, 0.0), (1.0, 0.1), (1.0, 0.0), (0.0, 0.1)]


@pytest.mark.parametrize("scan", SCANS)
@pytest.mark.parametrize(("PD", "clutter"), CONDITIONS)
@pytest.mark.parametrize("noise_sd", [1.0, 0.01])
def test_weights_divide_by_the_whole_mixture(scan, PD, clutter, noise_sd):
    """Densities of SciPy at the particles; also where weights leave the range of numbers."""
    world = constant_velocity_world(noise_sd=noise_sd, detection_probability=PD, clutter=clutter)
    tracks, cloud = run_particles(world, as_scans([[SCANS[scan]]], 1), proposal=DETECTIONS)
    if PD == 1.0 and scan == "none":
        np.testing.assert_array_equal(tracks.impossible, [1])
        np.testing.assert_allclose(cloud.weights, 1 / 400, rtol=1e-12)
        return
    np.testing.assert_array_equal(tracks.impossible, [0])
    expected = plain_log_weights(world.plain, cloud.states, SCANS[scan])
    # Exponents reach 1e9 for prior draws far from a precise detection; rounding is a share of them.
    weights = np.exp(expected - logsumexp(expected))
    np.testing.assert_allclose(cloud.weights, weights, rtol=1e-6, atol=1e-12)
    evidence = logsumexp(expected) - math.log(len(expected))
    np.testing.assert_allclose(cloud.step["log_evidence"][0], evidence, rtol=1e-9, atol=1e-6)


def effective_share(cloud):
    return 1 / np.sum(cloud.weights**2) / len(cloud.weights)


def test_after_a_precise_measurement_most_particles_count():
    """A prior 200 times as wide as the noise: of the motion's particles about one in 100 counts.

    With one detection that can be the target's alone, draws from its share all weigh the same.
    """
    world = constant_velocity_world(noise_sd=0.01, detection_probability=0.9, clutter=1e-4)
    scans = as_scans([[[0.7]]], 1)
    from_detections, by_motion = (
        effective_share(run_particles(world, scans, 4000, proposal=proposal)[1])
        for proposal in (DETECTIONS, MOTION)
    )
    assert from_detections > 0.85
    assert by_motion < 0.02


@pytest.mark.parametrize("acceleration_sd", [0.3, 0.0])
def test_singular_or_no_process_noise_is_drawn_in_its_range(acceleration_sd):
    """A held acceleration, its noise of rank one or zero, against the unreduced mixture.

    The mean over 60 runs of 2,000 particles within 4.5 standard errors and 0.02 deviations: 20
    checks, by chance once in 7,000 seeds; the slack is for the bias, 1/N, and N/5 when few count.
    """
    world = held_acceleration_world(
        acceleration_sd=acceleration_sd, noise_sd=0.5, detection_probability=0.8
    )
    drawn = draw_scenes_of(world, np.random.default_rng(8), 1, 5, clutter_half_width=8.0)
    exact = run_on(world, exact_mixture(), as_scans(drawn.trials, 1))
    strategy = particle_filter(particles=2000, proposal="detections")
    tracks = run_on(world, strategy, as_scans(drawn.trials * 60, 1))
    spread = np.sqrt(np.diagonal(exact.covariances[0], axis1=1, axis2=2))
    offset = (tracks.means - exact.means) / spread
    standard_error = offset.std(axis=0, ddof=1) / math.sqrt(60)
    assert np.all(np.abs(offset.mean(axis=0)) < 4.5 * standard_error + 0.02)


def test_a_step_of_singular_noise_stays_on_its_line():
    """x = F x_before + g a: the step across g is zero to rounding, whatever the detection says."""
    world = held_acceleration_world(noise_sd=0.05)
    nowhere = world.assumptions.prior._replace(covariance=np.zeros((2, 2)))
    start = world._replace(assumptions=world.assumptions._replace(prior=nowhere))
    _, cloud = run_particles(start, as_scans([[[], [[0.2]]]], 1), proposal=DETECTIONS)
    assert cloud.states[:, 0].std() > 0.03
    np.testing.assert_allclose(cloud.states[:, 1], 2 * cloud.states[:, 0], rtol=0, atol=1e-14)
