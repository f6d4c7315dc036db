"""Prune and cap against the definition in plain Python, and against merging that merges nothing."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plain_filters import prune_and_cap as plain_prune_and_cap
from plain_filters import run
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    exact_mixture,
    gaussian_mixture,
    pruned_mixture,
    run_on,
)
from tables import Row, random_rows, reduce_rows

from filters.reductions.prune_and_cap import prune_and_cap


@settings(derandomize=True, deadline=None, max_examples=150)
@given(
    st.integers(0, 2**32 - 1),
    st.integers(1, 40),
    st.sampled_from([0.0, 1e-3, 0.03, 0.2, 0.95]),
    st.integers(1, 45),
)
def test_what_is_left_are_the_heaviest_rows_as_they_were(seed, count, prune_below, most):
    rows = random_rows(np.random.default_rng(seed), count, modes=3)
    left = reduce_rows(prune_and_cap(prune_below, most), rows)
    expected = plain_prune_and_cap(prune_below, most)(rows)
    kept = sorted(rows, key=lambda row: -row.weight)[: len(expected)]
    assert len(left.components) == len(expected)
    for found, part, row, mode in zip(left.components, expected, kept, left.modes, strict=True):
        np.testing.assert_allclose(found[0], part[0], rtol=1e-13)
        np.testing.assert_array_equal(found[1], row.mean)
        np.testing.assert_array_equal(found[2], row.covariance)
        assert mode == row.mode


def test_of_equals_the_first_are_kept():
    rows = [Row(weight, [i, 0.0], np.eye(2)) for i, weight in enumerate([0.2, 0.3, 0.2, 0.3])]
    left = reduce_rows(prune_and_cap(0.0, 3), rows)
    assert [part[1][0] for part in left.components] == [1.0, 3.0, 0.0]


def test_pruning_never_leaves_nothing():
    rows = [Row(weight, [weight, 0.0], np.eye(2)) for weight in (0.3, 0.4, 0.3, 0.0)]
    left = reduce_rows(prune_and_cap(0.5, 9), rows)
    assert [part[:1] for part in left.components] == [(1.0,)]
    assert left.components[0][1][0] == 0.4


@pytest.mark.parametrize("estimate", ["mean", "heaviest"])
def test_a_run_of_scans_is_that_of_the_mixture_that_merges_nothing(estimate):
    """Pruned alike, capped alike, merged below a squared distance of zero."""
    world = constant_velocity_world(2, clutter=0.05)
    drawn = draw_scenes_of(world, np.random.default_rng(6), 5, 8, clutter_half_width=6.0)
    scans = as_scans(drawn.trials, 2)
    keys = {"max_components": 7, "prune_below": 1e-3, "estimate": estimate}
    found = run_on(world, pruned_mixture(**keys), scans)
    expected = run_on(world, gaussian_mixture(merge_below=0.0, **keys), scans)
    np.testing.assert_allclose(found.means, expected.means, rtol=1e-10, atol=1e-10)
    np.testing.assert_allclose(found.covariances, expected.covariances, rtol=1e-10, atol=1e-10)
    np.testing.assert_array_equal(found.hypotheses, expected.hypotheses)


def test_a_run_of_scans_is_that_of_the_definition():
    world = constant_velocity_world(1, clutter=0.1)
    drawn = draw_scenes_of(world, np.random.default_rng(7), 5, 6, clutter_half_width=5.0)
    strategy = pruned_mixture(gate_probability=0.99, max_components=5, prune_below=0.01)
    tracks = run_on(world, strategy, as_scans(drawn.trials, 1))
    for trial, scans in enumerate(drawn.trials):
        means, covariances = run(world.plain, scans, plain_prune_and_cap(0.01, 5), 0.99)
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-9, atol=1e-9)


def test_with_room_for_all_it_is_the_exact_mixture():
    world = constant_velocity_world(1, clutter=0.05)
    drawn = draw_scenes_of(world, np.random.default_rng(8), 10, 4, clutter_half_width=5.0)
    scans = as_scans(drawn.trials, 1)
    unpruned = pruned_mixture(gate_probability=1.0, prune_below=0.0, max_components=10_000)
    found, exact = run_on(world, unpruned, scans), run_on(world, exact_mixture(), scans)
    np.testing.assert_allclose(found.means, exact.means, rtol=1e-11, atol=1e-11)
    np.testing.assert_array_equal(found.hypotheses, exact.hypotheses)
