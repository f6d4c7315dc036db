"""The Rao-Blackwellised particle filter against exact posteriors and evidence."""

import math

import numpy as np
import pytest
from small_worlds import (
    NEVER,
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    exact_mixture,
    gaussian_mixture,
    particle_filter,
    pda,
    random_walk_world,
    rao_blackwellised,
    run_on,
)

from filters.detecting import AtMean
from filters.hypothesis_filter import room_for
from filters.interacting import OneMode
from filters.linearisation.first_order import ByJacobian
from filters.particles.resampling import STRATIFIED, SYSTEMATIC
from filters.point_mass import point_mass_posteriors
from filters.random_numbers import numbers_of
from filters.rao_blackwellised import (
    RaoBlackwellisedStrategy,
    compiled_rao_blackwellised_filter,
    room_for_sampling,
)
from filters.reductions.keep_all import keep_all
from filters.strategies import UnreducedMixture
from filters.strategies.gate import gate_of
from filters.track import Prior, room_for_tracks
from filters.update import UpdateRules

DETECTIONS = [[0.5, 2.0], [1.5, -3.0], [-3.0, 2.5], [], [4.0, 1.0]]
AMBIGUOUS = {"detection_probability": 0.8, "clutter": 0.2}


def look_at_particles(
    world, scans, particles, *, resample_below=0.0, resampling=SYSTEMATIC, trial=0
):
    """Run the kernel on one trial; return tracks, mixture and what was sampled."""
    n, m = len(world.assumptions.prior.mean), scans.detections.shape[1]
    rules = UpdateRules(gate_of(1.0, m), ByJacobian(), AtMean())
    modes = OneMode(world.assumptions.models.motion)
    strategy = RaoBlackwellisedStrategy(resample_below, resampling, rules, modes, NEVER)
    tracks = room_for_tracks(scans, n)
    room = room_for(n, m, rules, modes, keep_all(particles), scans.most_detections)
    sampling = room_for_sampling(particles)
    compiled_rao_blackwellised_filter(n, m)(
        world.assumptions.models,
        strategy,
        world.assumptions.prior,
        scans,
        trial,
        numbers_of(3),
        tracks,
        room,
        sampling,
    )
    return tracks, room.mixture, sampling


def recorded(world, strategy, scans):
    """The posteriors of all trials and scans."""
    return strategy.run(world.assumptions, scans, numbers_of(1), 0, record=True).posteriors


@pytest.mark.parametrize("resampling", ["systematic", "stratified"])
@pytest.mark.parametrize("resample_below", [0.0, 0.5, 1.0])
def test_estimates_come_to_those_of_the_unreduced_mixture(resample_below, resampling):
    """300 runs of 60 particles, means within 4.5 standard errors and 0.02 deviations.

    Five means a setting: fails by chance once in 5,000 seeds; the slack is for the bias, 1/N.
    """
    world = random_walk_world(**AMBIGUOUS)
    exact = run_on(world, exact_mixture(), as_scans([DETECTIONS], 1))
    strategy = rao_blackwellised(
        particles=60, gate_probability=1.0, resample_below=resample_below, resampling=resampling
    )
    tracks = run_on(world, strategy, as_scans([DETECTIONS] * 300, 1))
    spread = np.sqrt(exact.covariances[..., 0, 0])
    offset = (tracks.means[..., 0] - exact.means[..., 0]) / spread
    standard_error = offset.std(axis=0, ddof=1) / math.sqrt(300)
    assert np.all(np.abs(offset.mean(axis=0)) < 4.5 * standard_error + 0.02)
    ratio = tracks.covariances[..., 0, 0] / exact.covariances[..., 0, 0]
    assert np.all(np.abs(ratio.mean(axis=0) - 1) < 0.06)


def test_errors_fall_with_the_root_of_the_number_of_particles():
    """200 runs each; the slope of log error over log N is -1/2 within 0.1, see the bootstrap's."""
    world = random_walk_world(**AMBIGUOUS)
    exact = run_on(world, exact_mixture(), as_scans([DETECTIONS], 1))
    scans = as_scans([DETECTIONS] * 200, 1)
    counts = np.array([40, 160, 640])
    errors = []
    for count in counts:
        strategy = rao_blackwellised(particles=int(count), gate_probability=1.0)
        offset = (run_on(world, strategy, scans).means - exact.means)[..., 1:, 0]
        errors.append(np.sqrt(np.mean(offset**2)))
    slope = np.polyfit(np.log(counts), np.log(errors), 1)[0]
    assert abs(slope + 0.5) < 0.1


def test_in_the_plane_its_estimates_come_to_those_of_the_unreduced_mixture():
    """The mean over 60 runs, within 4.5 standard errors and 0.01 deviations; 1 seed in 7,000."""
    world = constant_velocity_world(2, detection_probability=0.8, clutter=0.02)
    drawn = draw_scenes_of(world, np.random.default_rng(17), 1, 5, clutter_half_width=6.0)
    exact = run_on(world, exact_mixture(), as_scans(drawn.trials, 2))
    strategy = rao_blackwellised(particles=300, gate_probability=1.0)
    tracks = run_on(world, strategy, as_scans(drawn.trials * 60, 2))
    spread = np.sqrt(np.diagonal(exact.covariances[0], axis1=1, axis2=2))
    offset = (tracks.means - exact.means) / spread
    standard_error = offset.std(axis=0, ddof=1) / math.sqrt(60)
    assert np.all(np.abs(offset.mean(axis=0)) < 4.5 * standard_error + 0.01)


@pytest.mark.parametrize("resampling", [SYSTEMATIC, STRATIFIED])
@pytest.mark.parametrize("resample_below", [0.0, 1.0])
def test_the_evidence_is_unbiased(resample_below, resampling):
    """The mean of estimate over truth, the grid's, in 1,000 runs of 20 particles.

    Within 4 standard errors of 1; four checks fail by chance once in 4,000 seeds.
    """
    world = random_walk_world(**AMBIGUOUS)
    prior = Prior(world.plain.mean[:1], world.plain.covariance[:1, :1])
    scans = as_scans([DETECTIONS], 1)
    exact = sum(
        p.log_evidence for p in point_mass_posteriors(world.assumptions.models, prior, scans)
    )
    settings = {"resample_below": resample_below, "resampling": resampling}
    ratios = np.empty(1000)
    for trial in range(len(ratios)):
        _, _, sampling = look_at_particles(world, scans, 20, trial=trial, **settings)
        ratios[trial] = math.exp(sampling.log_evidence[0] - exact)
    standard_error = ratios.std(ddof=1) / math.sqrt(len(ratios))
    assert standard_error < 0.03
    assert abs(ratios.mean() - 1) < 4 * standard_error


def test_associations_are_sampled_in_proportion_to_their_weights():
    """After one scan: particles of equal weight, each a hypothesis of the update, in its share.

    4,000 particles; shares within 4.5 standard errors, three checks, by chance 1 seed in 50,000.
    """
    world = random_walk_world(**AMBIGUOUS)
    scans = as_scans([[[0.5, 2.0]]], 1)
    _, mixture, sampling = look_at_particles(world, scans, 4000)
    np.testing.assert_allclose(mixture.weights, 1 / 4000, rtol=1e-12)
    full = recorded(world, UnreducedMixture(kind="unreduced-mixture"), scans)
    shares = np.bincount(sampling.chosen % 3, minlength=3) / 4000
    weights = full.weights[:3]
    assert np.all(np.abs(shares - weights) < 4.5 * np.sqrt(weights * (1 - weights) / 4000))
    np.testing.assert_allclose(mixture.means, full.means[sampling.chosen % 3], rtol=1e-13)
    np.testing.assert_allclose(
        mixture.covariances, full.covariances[sampling.chosen % 3], rtol=1e-13
    )


def test_without_ambiguity_it_is_the_kalman_filter():
    """No clutter and certain detection: every particle is the one history that there is."""
    world = constant_velocity_world(1, detection_probability=1.0, clutter=0.0)
    drawn = draw_scenes_of(world, np.random.default_rng(2), 3, 12)
    scans = as_scans(drawn.trials, 1)
    expected = run_on(world, pda(gate_probability=1.0), scans)
    found = run_on(world, rao_blackwellised(particles=7, gate_probability=1.0), scans)
    np.testing.assert_allclose(found.means, expected.means, rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(found.covariances, expected.covariances, rtol=1e-11)
    np.testing.assert_array_equal(found.hypotheses, 7 * expected.hypotheses)


def test_it_errs_less_than_as_many_samples_of_the_state():
    """100 particles of either kind, 200 runs: about a quarter of the squared error."""
    world = random_walk_world(**AMBIGUOUS)
    exact = run_on(world, exact_mixture(), as_scans([DETECTIONS], 1))
    scans = as_scans([DETECTIONS] * 200, 1)
    histories, states = (
        np.mean((run_on(world, one, scans).means[..., 0] - exact.means[..., 0]) ** 2)
        for one in (
            rao_blackwellised(particles=100, gate_probability=1.0),
            particle_filter(particles=100),
        )
    )
    assert histories < 0.5 * states


def test_its_posteriors_are_mixtures_with_a_component_a_particle():
    world = random_walk_world(**AMBIGUOUS)
    scans = as_scans([DETECTIONS] * 2, 1)
    posteriors = recorded(world, rao_blackwellised(particles=9), scans)
    np.testing.assert_array_equal(posteriors.counts, np.full((2, 5), 9))
    weights = posteriors.weights[: posteriors.used[0]].reshape(2, 5, 9)
    np.testing.assert_allclose(weights.sum(axis=2), 1.0, rtol=1e-12)


def test_a_trial_alone_is_the_same_trial_in_a_batch():
    world = constant_velocity_world(1)
    drawn = draw_scenes_of(world, np.random.default_rng(21), 6, 8, clutter_half_width=8.0)
    strategy = rao_blackwellised(particles=20, resampling="stratified")
    batch = run_on(world, strategy, as_scans(drawn.trials, 1), first_trial=40)
    alone = run_on(world, strategy, as_scans(drawn.trials[4:5], 1), first_trial=44)
    np.testing.assert_array_equal(alone.means[0], batch.means[4])
    np.testing.assert_array_equal(alone.covariances[0], batch.covariances[4])
    other = run_on(world, strategy, as_scans(drawn.trials[4:5], 1), first_trial=45)
    assert np.any(other.means[0] != batch.means[4])


def test_a_hundred_histories_follow_what_a_mixture_follows():
    """40 scans with two false ones each: errors within 10 % of a mixture's of twenty."""
    world = constant_velocity_world(1, detection_probability=0.9, clutter=0.1)
    drawn = draw_scenes_of(world, np.random.default_rng(6), 40, 40, clutter_half_width=10.0)
    scans = as_scans(drawn.trials, 1)
    found, expected = (
        np.sqrt(np.mean((run_on(world, strategy, scans).means - drawn.states)[..., 0] ** 2))
        for strategy in (rao_blackwellised(), gaussian_mixture())
    )
    assert found < 1.1 * expected
