"""Prune, merge, cap against the definition in plain Python."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from plain_filters import Hypothesis, hypotheses_of, moments, predict, prune_merge_cap, run
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    exact_mixture,
    gaussian_mixture,
    look_inside,
    random_walk_world,
    run_on,
)

from filters.reductions.prune_merge_cap import prune_merge_cap as reduction_with

SETTINGS = [
    (1e-3, 0.5, 20),  # all three at work
    (0.0, 0.0, 7),  # cap alone
    (0.05, 0.0, 500),  # pruning alone
    (0.0, 4.0, 500),  # merging alone
    (0.9, 0.5, 5),  # only the heaviest is left, however light
    (1e-3, 1e9, 5),  # all merge: probabilistic data association but for what is pruned
    (1e-3, 0.5, 1),
]


def table_of(found):
    """The rows of a table as plain hypotheses."""
    return [
        Hypothesis(row["weight"], mean, covariance, row["distance"], row["detection"])
        for row, mean, covariance in zip(found.table, found.means, found.covariances, strict=True)
    ]


def assert_same_mixture(found, expected, tolerance=1e-9):
    assert len(found) == len(expected)
    for (weight, mean, covariance), (w, mu, P) in zip(found, expected, strict=True):
        np.testing.assert_allclose(weight, w, rtol=tolerance)
        np.testing.assert_allclose(mean, mu, rtol=tolerance, atol=tolerance)
        np.testing.assert_allclose(covariance, P, rtol=tolerance, atol=tolerance)


@settings(derandomize=True, deadline=None, max_examples=150)
@given(
    st.lists(st.floats(-6, 6), min_size=0, max_size=25),
    st.sampled_from([0.0, 1e-6, 1e-3, 0.03, 0.2, 0.95]),
    st.sampled_from([0.0, 0.05, 0.5, 3.0, 50.0]),
    st.integers(1, 12),
)
def test_the_mixture_left_is_that_of_the_definition(detections, prune_below, merge_below, most):
    """Order of the steps, order of the components, weights and moments, for one table each."""
    world = constant_velocity_world(1, clutter=0.3)
    scan = np.array(detections).reshape(-1, 1)
    limits = reduction_with(prune_below, merge_below, most)
    found = look_inside(world, as_scans([[scan]], 1), reduction=limits)
    rows = table_of(found)
    weights = np.sort([row.weight for row in rows])
    assume(np.all(np.diff(weights) > 1e-9 * weights[1:]))  # rounding would decide between equals
    expected = prune_merge_cap(prune_below, merge_below, most)(rows)
    assert_same_mixture(found.mixture(len(expected)), expected)
    np.testing.assert_allclose(found.room.mixture.weights[: len(expected)].sum(), 1.0, rtol=1e-14)


@pytest.mark.parametrize("limits", SETTINGS)
@pytest.mark.parametrize("axes", [1, 2])
def test_a_run_of_scans_is_that_of_the_definition(axes, limits):
    """Component by component after the last scan, so that any slip on the way would show."""
    world = constant_velocity_world(axes, clutter=0.1)
    drawn = draw_scenes_of(world, np.random.default_rng(40 + axes), 5, 6, clutter_half_width=5.0)
    reduce = prune_merge_cap(*limits)
    for scans in drawn.trials:
        mixture = [(1.0, world.plain.mean, world.plain.covariance)]
        for k, scan in enumerate(scans):
            predicted = predict(world.plain, mixture) if k else mixture
            mixture = reduce(hypotheses_of(world.plain, predicted, scan, 0.999))
        found = look_inside(
            world, as_scans([scans], axes), 0.999, reduction=reduction_with(*limits)
        )
        assert_same_mixture(found.mixture(len(mixture)), mixture)

        strategy = gaussian_mixture(
            gate_probability=0.999,
            prune_below=limits[0],
            merge_below=limits[1],
            max_components=limits[2],
        )
        tracks = run_on(world, strategy, as_scans([scans], axes))
        mean, covariance = moments(mixture)
        np.testing.assert_allclose(tracks.means[0, -1], mean, rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(tracks.covariances[0, -1], covariance, rtol=1e-9, atol=1e-9)

        heaviest = strategy.model_copy(update={"estimate": "heaviest"})
        tracks = run_on(world, heaviest, as_scans([scans], axes))
        np.testing.assert_allclose(tracks.means[0, -1], mixture[0][1], rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(tracks.covariances[0, -1], mixture[0][2], rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize(("PD", "clutter"), [(1.0, 0.1), (0.9, 0.0), (1.0, 0.0)])
def test_several_components_keep_to_the_limits_of_the_model(PD, clutter):
    """Certain detection and no clutter, assumed of scans in which the gates are empty at times."""
    world = constant_velocity_world(1, clutter=0.15)
    drawn = draw_scenes_of(world, np.random.default_rng(44), 12, 8, clutter_half_width=8.0)
    assumed = constant_velocity_world(1, detection_probability=PD, clutter=clutter)
    reduce = prune_merge_cap(1e-3, 0.5, 6)
    strategy = gaussian_mixture(
        gate_probability=0.9, prune_below=1e-3, merge_below=0.5, max_components=6
    )
    tracks = run_on(assumed, strategy, as_scans(drawn.trials, 1))
    for trial, scans in enumerate(drawn.trials):
        means, covariances = run(assumed.plain, scans, reduce, 0.9)
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-8, atol=1e-8)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-7, atol=1e-9)
    assert (tracks.impossible.sum() > 0) == (PD == 1.0)


def test_merging_keeps_mean_and_covariance():
    """Whatever merges, the moments of the whole are those of the unreduced table."""
    world = constant_velocity_world(2, clutter=0.1)
    drawn = draw_scenes_of(world, np.random.default_rng(3), 20, 1, clutter_half_width=6.0)
    for scans in drawn.trials:
        for merge_below in (0.01, 1.0, 1e6):
            limits = reduction_with(0.0, merge_below, 500)
            found = look_inside(world, as_scans([scans], 2), reduction=limits)
            heads = np.unique(found.table["group"][found.table["weight"] > 0])
            mean, covariance = moments(found.mixture(len(heads)))
            before = moments(table_of(found))
            np.testing.assert_allclose(mean, before[0], rtol=1e-12, atol=1e-12)
            np.testing.assert_allclose(covariance, before[1], rtol=1e-12, atol=1e-12)


def test_the_distance_of_merging_is_in_units_of_the_heavier_component():
    """A precise heavy component leaves a vague light one alone; the other way round they merge.

    Moves of 'not detected' (variance 4) against a detection (variance 4/5) that lies 1.6 away:
    squared distances 1.6^2 / 4 = 0.64 and 1.6^2 / 0.8 = 3.2.
    """
    limits = reduction_with(0.0, 1.0, 10)
    for detection_probability, components in ((0.99, 2), (0.01, 1)):
        world = random_walk_world(
            prior_variance=4.0, detection_probability=detection_probability, clutter=0.1
        )
        found = look_inside(world, as_scans([[[[2.0]]]], 1), reduction=limits)
        assert (found.table["weight"][1] > 0.5) == (components == 2)
        assert len(np.unique(found.table["group"])) == components


def test_pruning_never_leaves_nothing():
    """Twenty detections share the weight, all of them below the limit: the heaviest stays."""
    world = constant_velocity_world(1, clutter=1e-6)
    scan = np.linspace(0.5, 0.6, 20).reshape(-1, 1)
    limits = reduction_with(0.5, 0.0, 10)
    found = look_inside(world, as_scans([[scan]], 1), reduction=limits)
    assert found.room.mixture.weights[0] == 1.0
    np.testing.assert_array_equal(found.room.mixture.means[0], found.means[1])


def test_without_reduction_the_estimate_is_exact_and_a_generous_reduction_comes_close():
    """Pruning at 1e-4 and merging at 0.5 moves means by less than a tenth of a deviation here."""
    world = constant_velocity_world(1, clutter=0.05)
    drawn = draw_scenes_of(world, np.random.default_rng(4), 50, 5, clutter_half_width=5.0)
    scans = as_scans(drawn.trials, 1)
    exact = run_on(world, exact_mixture(), scans)
    reduced = run_on(world, gaussian_mixture(gate_probability=1.0), scans)
    spread = np.sqrt(np.diagonal(exact.covariances, axis1=2, axis2=3))
    assert np.max(np.abs(reduced.means - exact.means) / spread) < 0.1
    assert np.all(reduced.hypotheses < exact.hypotheses)
