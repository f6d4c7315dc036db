"""Nearest neighbour, most probable hypothesis and PDA against plain Python, and their limits."""

import numpy as np
import pytest
from plain_filters import keep_heaviest, keep_nearest, match_moments, run
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    exact_mixture,
    gaussian_mixture,
    held_acceleration_world,
    known_association,
    most_probable_hypothesis,
    nearest_neighbour,
    particle_filter,
    pda,
    run_on,
)

KINDS = {
    "nearest neighbour": (nearest_neighbour, keep_nearest),
    "most probable hypothesis": (most_probable_hypothesis, keep_heaviest),
    "pda": (pda, match_moments),
}
ALL = [nearest_neighbour, most_probable_hypothesis, pda, gaussian_mixture]
# PD, clutter, gate probability
CONDITIONS = [
    (0.9, 0.1, 0.999),
    (0.5, 0.02, 0.9),
    (1.0, 0.1, 0.99),
    (0.9, 0.0, 0.99),
    (0.9, 0.1, 1.0),
    (0.0, 0.1, 0.99),
]


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(("PD", "clutter", "gate_probability"), CONDITIONS)
@pytest.mark.parametrize("make_world", [constant_velocity_world, held_acceleration_world])
def test_a_strategy_equals_its_plain_twin(kind, PD, clutter, gate_probability, make_world):
    """Ten false detections a scan in the plane, one on a line; PD and clutter are as assumed."""
    strategy, reduce = KINDS[kind]
    axes = 2 if make_world is constant_velocity_world else 1
    drawn = draw_scenes_of(
        make_world(axes, clutter=0.1), np.random.default_rng(12), 4, 20, clutter_half_width=5.0
    )
    world = make_world(axes, detection_probability=PD, clutter=clutter)
    scans = as_scans(drawn.trials, axes)
    tracks = run_on(world, strategy(gate_probability=gate_probability), scans)
    for trial, detections in enumerate(drawn.trials):
        means, covariances = run(world.plain, detections, reduce, gate_probability)
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-8, atol=1e-8)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-7, atol=1e-9)


@pytest.mark.parametrize("strategy", ALL)
def test_with_nothing_in_the_gate_the_prediction_is_kept(strategy):
    world = constant_velocity_world(1, mean=[3.0, 2.0])
    tracks = run_on(world, strategy(gate_probability=0.99), as_scans([[[], [[900.0]], []]], 1))
    F, Q, P = world.plain.F, world.plain.Q, world.plain.covariance
    np.testing.assert_allclose(tracks.means[0, :, 0], [3.0, 5.0, 7.0], rtol=1e-14)
    for k in range(3):
        np.testing.assert_allclose(tracks.covariances[0, k], P, rtol=1e-12)
        P = F @ P @ F.T + Q
    np.testing.assert_array_equal(tracks.hypotheses, [3])
    np.testing.assert_array_equal(tracks.impossible, [0])


@pytest.mark.parametrize("gate_probability", [0.99, 1.0])
@pytest.mark.parametrize("strategy", ALL)
def test_scans_impossible_under_the_model_are_counted_and_keep_the_prediction(
    strategy, gate_probability
):
    """PD = 1 and nothing in the gate; without a gate only a scan that is empty is impossible."""
    world = constant_velocity_world(1, detection_probability=1.0)
    scans = as_scans([[[[0.0]], [], [[1e4]], [[0.5]]], [[[0.0]], [[0.1]], [[0.2]], [[0.3]]]], 1)
    tracks = run_on(world, strategy(gate_probability=gate_probability), scans)
    far_is_gated = gate_probability == 1.0
    np.testing.assert_array_equal(tracks.impossible, [1 if far_is_gated else 2, 0])
    F, Q = world.plain.F, world.plain.Q
    P = F @ tracks.covariances[0, 0] @ F.T + Q
    np.testing.assert_allclose(tracks.means[0, 1], F @ tracks.means[0, 0], rtol=1e-13)
    np.testing.assert_allclose(tracks.covariances[0, 1], P, rtol=1e-13)
    assert np.isfinite(tracks.means).all()


def test_known_association_counts_a_missed_certain_target_as_impossible():
    world = constant_velocity_world(1, detection_probability=1.0)
    scans = as_scans([[[[0.0]], [[0.3]]]], 1, origins=[[0, -1]])
    tracks = run_on(world, known_association(), scans)
    np.testing.assert_array_equal(tracks.impossible, [1])


def test_particles_count_impossible_scans_and_keep_the_prediction():
    world = constant_velocity_world(1, detection_probability=1.0)
    strategy = particle_filter(particles=400)
    tracks = run_on(world, strategy, as_scans([[[], [[0.5]]], [[[0.1]], []]], 1))
    np.testing.assert_array_equal(tracks.impossible, [1, 1])
    # 400 samples of N(0, 4): within 4 standard errors.
    assert abs(tracks.means[0, 0, 0]) < 4 * 2.0 / np.sqrt(400)
    assert np.isfinite(tracks.means).all()


@pytest.mark.parametrize("kind", KINDS)
def test_of_two_detections_equally_good_the_first_counts_or_both(kind):
    """Nearest neighbour and most probable hypothesis take the first; PDA stays in the middle."""
    strategy, reduce = KINDS[kind]
    world = constant_velocity_world(1)
    for pair in ([[1.5], [-1.5]], [[-1.5], [1.5]]):
        tracks = run_on(world, strategy(), as_scans([[pair]], 1))
        plain, _ = run(world.plain, [np.array(pair)], reduce, 0.9997)
        np.testing.assert_allclose(tracks.means[0], plain, atol=1e-14)
        sign = 0 if kind == "pda" else np.sign(pair[0][0])
        assert np.sign(np.round(tracks.means[0, 0, 0], 12)) == sign


def test_the_most_probable_hypothesis_may_be_that_the_target_was_not_detected():
    world = constant_velocity_world(1, detection_probability=0.3, clutter=1.0)
    scan = as_scans([[[[3.0]]]], 1)
    taken = run_on(world, nearest_neighbour(), scan).means[0, 0, 0]
    left = run_on(world, most_probable_hypothesis(), scan).means[0, 0, 0]
    assert left == 0.0
    assert taken > 2.0


@pytest.mark.parametrize("strategy", [pda(), exact_mixture()], ids=["pda", "mixture"])
def test_certain_non_detection_leaves_the_prediction_alone(strategy):
    """PD = 0: no detection can be the target's, whatever lies in the gate."""
    world = constant_velocity_world(1, detection_probability=0.0)
    scans = as_scans([[[[0.1]], [[0.2], [0.4]]]], 1)
    nothing = as_scans([[[], []]], 1)
    found, expected = run_on(world, strategy, scans), run_on(world, strategy, nothing)
    np.testing.assert_allclose(found.means, expected.means, atol=1e-15)
    np.testing.assert_allclose(found.covariances, expected.covariances, rtol=1e-15)
