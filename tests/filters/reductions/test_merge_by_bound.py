"""Runnalls' merging: its bound by hand and by integration, its merges against brute force.

Formula: Runnalls (2007), IEEE Transactions on Aerospace and Electronic Systems 43(3), equation 21.
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plain_filters import merge_by_bound as plain_merge_by_bound
from plain_filters import moments, run
from scipy.special import xlogy
from scipy.stats import multivariate_normal
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    pruned_mixture,
    run_on,
    runnalls_mixture,
)
from tables import Row, random_rows, reduce_rows

from filters.reductions.merge_by_bound import merge_by_bound


def on_a_line(*parts):
    """Rows of (weight, mean, variance) along the first axis; the second is standard normal."""
    return [
        Row(weight, np.array([mean, 0.0]), np.diag([variance, 1.0]))
        for weight, mean, variance in parts
    ]


def two_rows(first, second):
    weight, mean, covariance = first
    other_weight, other_mean, other_covariance = second
    return [
        Row(weight, np.array(mean), np.array(covariance)),
        Row(other_weight, np.array(other_mean), np.array(other_covariance)),
    ]


IN_THE_PLANE = two_rows(
    (0.6, [0.0, 0.0], [[1.0, 0.0], [0.0, 4.0]]), (0.4, [5.0, -5.0], [[2.0, 0.5], [0.5, 1.0]])
)


def merge_of_two(rows):
    """The one component that two rows leave, and the bound that the reduction worked out."""
    left = reduce_rows(merge_by_bound(0.0, 2, 1), rows)
    return left.components[0], left.table["cost"][1]


def divergence(rows, merged, half_width=25.0, steps=1001):
    """Integral of f ln(f / g) of the rows and a mixture in the plane, by the midpoint rule."""
    edges = np.linspace(-half_width, half_width, steps + 1)
    middles = (edges[1:] + edges[:-1]) / 2
    points = np.stack(np.meshgrid(middles, middles, indexing="ij"), axis=-1)
    f, g = (
        sum(part[0] * multivariate_normal(part[1], part[2]).pdf(points) for part in parts)
        for parts in (rows, merged)
    )
    terms = xlogy(f, f) - xlogy(f, np.maximum(g, 1e-300))
    return terms.sum() * (edges[1] - edges[0]) ** 2


@pytest.mark.parametrize(
    ("rows", "mean", "covariance", "bound"),
    [
        # 1/2 ln 2, as the variances are 1, 1 and 2.
        (on_a_line((0.5, -1, 1), (0.5, 1, 1)), [0, 0], np.diag([2, 1]), 0.3465735903),
        # 1/2 (ln 4.25 - 1/4 ln 2): the mean is 1, the variance 3/4 + 2/4 + 3/16 x 16.
        (on_a_line((0.75, 0, 1), (0.25, 4, 2)), [1, 0], np.diag([4.25, 1]), 0.6368160939),
        # 1/2 (ln 31.48 - 0.6 ln 4 - 0.4 ln 1.75)
        (IN_THE_PLANE, [2, -2], [[7.4, -5.8], [-5.8, 8.8]], 1.1968647459),
    ],
)
def test_two_components_merge_to_their_moments_at_the_bound_worked_out_by_hand(
    rows, mean, covariance, bound
):
    merged, found = merge_of_two(rows)
    np.testing.assert_allclose(merged[1], mean, atol=1e-14)
    np.testing.assert_allclose(merged[2], covariance, rtol=1e-14, atol=1e-14)
    np.testing.assert_allclose(found, bound, rtol=2e-10)


def test_the_bound_is_proportional_to_the_weights():
    halved = [row._replace(weight=row.weight / 2) for row in IN_THE_PLANE]
    np.testing.assert_allclose(merge_of_two(halved)[1], 0.5984323729, rtol=2e-10)


@pytest.mark.parametrize(
    ("rows", "exact"),
    [
        # From adaptive quadrature in one dimension.
        (on_a_line((0.5, -1, 1), (0.5, 1, 1)), 0.0097427699),
        (on_a_line((0.75, 0, 1), (0.25, 4, 2)), 0.1732331067),
    ],
)
def test_the_divergence_that_merging_costs_is_far_below_the_bound_for_close_components(rows, exact):
    merged, bound = merge_of_two(rows)
    found = divergence(rows, [merged])
    np.testing.assert_allclose(found, exact, rtol=1e-6)
    assert found < bound


@pytest.mark.parametrize("seed", range(8))
def test_no_merge_costs_more_divergence_than_its_bound(seed):
    """Four components to three: the whole mixture before against the whole mixture after."""
    rows = random_rows(np.random.default_rng(seed), 4)
    left = reduce_rows(merge_by_bound(0.0, 4, 3), rows)
    (bound,) = left.table["cost"][left.table["group_weight"] == 0.0]  # of the one gone into another
    found = divergence(rows, left.components, half_width=40.0)
    assert -1e-6 < found < bound


def test_the_pair_of_least_bound_merges_first():
    """Of weights .5, .3, .2 at 0, 1, 5 the bounds are .084226 (first two), .633018 and .394229."""
    rows = on_a_line((0.5, 0, 1), (0.3, 1, 1), (0.2, 5, 1))
    left = reduce_rows(merge_by_bound(0.0, 3, 2), rows)
    np.testing.assert_allclose(left.table["cost"][1], 0.084226, atol=5e-7)
    np.testing.assert_allclose([part[0] for part in left.components], [0.8, 0.2], rtol=1e-14)
    np.testing.assert_allclose(left.components[0][1], [0.375, 0.0], rtol=1e-14)
    for pair, bound in (((0, 2), 0.633018), ((1, 2), 0.394229)):
        _, found = merge_of_two([rows[i] for i in pair])
        np.testing.assert_allclose(found, bound, atol=5e-7)


@pytest.mark.parametrize("prune_below", [0.0, 1e-3, 0.01, 0.95])
@pytest.mark.parametrize("seed", range(12))
def test_the_mixture_left_is_that_of_brute_force(seed, prune_below):
    """Every pair anew before every merge; the twin's order of components differs."""
    rng = np.random.default_rng(seed)
    rows = random_rows(rng, int(rng.integers(1, 20)))
    most, more = int(rng.integers(1, 5)), int(rng.integers(0, 16))
    left = reduce_rows(merge_by_bound(prune_below, most + more, most), rows)
    expected = plain_merge_by_bound(prune_below, most + more, most)(rows)
    assert len(left.components) == len(expected)
    by_weight = [sorted(parts, key=lambda part: part[0]) for parts in (left.components, expected)]
    for found, part in zip(*by_weight, strict=True):
        for number, wanted in zip(found, part, strict=True):
            np.testing.assert_allclose(number, wanted, rtol=1e-10, atol=1e-11)


def test_what_was_merged_may_be_the_best_partner_of_one_that_had_another():
    """Far apart the bound grows with the logarithm of the spread, so a broad one takes in more.

    The first two are closest; after them the last costs less with both than with the third, which
    is nearer to it than either.
    """
    rows = on_a_line((0.25, 0, 1), (0.25, 1000, 1), (0.25, 3150, 1), (0.25, 2100, 1))
    left = reduce_rows(merge_by_bound(0.0, 4, 2), rows)
    assert [part[0] for part in left.components] == [0.75, 0.25]
    assert left.components[1][1][0] == 3150


@settings(derandomize=True, deadline=None, max_examples=40)
@given(st.integers(0, 2**32 - 1), st.integers(2, 20), st.integers(1, 6))
def test_merging_keeps_mean_and_covariance_of_the_whole(seed, count, most):
    rows = random_rows(np.random.default_rng(seed), count)
    left = reduce_rows(merge_by_bound(0.0, count, most), rows)
    for found, expected in zip(moments(left.components), moments(rows), strict=True):
        np.testing.assert_allclose(found, expected, rtol=1e-11, atol=1e-12)


@settings(derandomize=True, deadline=None, max_examples=40)
@given(st.integers(0, 2**32 - 1), st.integers(2, 14), st.integers(1, 6))
def test_what_merges_does_not_depend_on_units(seed, count, most):
    """The bound is the same after any linear change of the state; here one with a shift."""
    rng = np.random.default_rng(seed)
    rows = random_rows(rng, count)
    change, shift = np.array([[3.0, -40.0], [0.02, 1.0]]), np.array([7.0, -3.0])
    changed = [
        row._replace(mean=change @ row.mean + shift, covariance=change @ row.covariance @ change.T)
        for row in rows
    ]
    reduction = merge_by_bound(0.0, count, most)
    found, expected = reduce_rows(reduction, changed), reduce_rows(reduction, rows)
    for (weight, mean, _), (w, mu, _) in zip(found.components, expected.components, strict=True):
        np.testing.assert_allclose(weight, w, rtol=1e-10)
        np.testing.assert_allclose(mean, change @ mu + shift, rtol=1e-8, atol=1e-8)


def test_it_merges_however_far_apart_components_are():
    rows = on_a_line((0.5, -1e6, 1e-6), (0.5, 1e6, 1e-6))
    (weight, mean, covariance), bound = merge_of_two(rows)
    assert (weight, mean[0]) == (1.0, 0.0)
    np.testing.assert_allclose(covariance[0, 0], 1e12, rtol=1e-12)
    assert bound > 20


def test_only_the_heaviest_are_merged_among():
    """Of four, three are compared; the lightest is dropped though it lies beside the heaviest."""
    rows = on_a_line((0.1, 0.01, 1), (0.4, 0, 1), (0.3, 2, 1), (0.2, 9, 1))
    left = reduce_rows(merge_by_bound(0.0, 3, 2), rows)
    weights = sorted(part[0] for part in left.components)
    np.testing.assert_allclose(weights, [0.2 / 0.9, 0.7 / 0.9], rtol=1e-14)


@pytest.mark.parametrize("seed", range(5))
def test_components_of_different_modes_never_merge(seed):
    """Each mode keeps mean and covariance of its own; where only modes are left, weight decides."""
    rows = random_rows(np.random.default_rng(seed), 12, modes=3)
    left = reduce_rows(merge_by_bound(0.0, 12, 3), rows)
    weights = {mode: sum(row.weight for row in rows if row.mode == mode) for mode in range(3)}
    assert sorted(left.modes) == [0, 1, 2]
    for part, mode in zip(left.components, left.modes, strict=True):
        mean, covariance = moments([row for row in rows if row.mode == mode])
        np.testing.assert_allclose(part[0], weights[mode], rtol=1e-12)
        np.testing.assert_allclose(part[1], mean, rtol=1e-11, atol=1e-12)
        np.testing.assert_allclose(part[2], covariance, rtol=1e-11, atol=1e-12)

    capped = reduce_rows(merge_by_bound(0.0, 12, 2), rows)
    assert sorted(capped.modes) == sorted(sorted(weights, key=weights.get)[1:])


def test_a_run_of_scans_is_that_of_the_definition():
    for axes, clutter in ((1, 0.1), (2, 0.05)):
        world = constant_velocity_world(axes, clutter=clutter)
        drawn = draw_scenes_of(world, np.random.default_rng(60 + axes), 4, 6, 5.0)
        strategy = runnalls_mixture(
            gate_probability=0.99, max_components=4, merge_among=9, prune_below=1e-3
        )
        tracks = run_on(world, strategy, as_scans(drawn.trials, axes))
        for trial, scans in enumerate(drawn.trials):
            reduce = plain_merge_by_bound(1e-3, 9, 4)
            means, covariances = run(world.plain, scans, reduce, 0.99)
            np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-8, atol=1e-8)
            np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-8, atol=1e-8)


def test_merging_few_components_comes_closer_to_the_posterior_than_dropping_the_others():
    """Means of 40 trials, three components each, against 200 components.

    The mean squared gap was below a hundredth of pruning's in 200 trials of each of twelve seeds.
    """
    world = constant_velocity_world(1, clutter=0.1)
    drawn = draw_scenes_of(world, np.random.default_rng(61), 40, 6, clutter_half_width=5.0)
    scans = as_scans(drawn.trials, 1)
    reference = run_on(world, pruned_mixture(max_components=200, prune_below=0.0), scans).means
    merged = run_on(world, runnalls_mixture(max_components=3, prune_below=0.0), scans).means
    dropped = run_on(world, pruned_mixture(max_components=3, prune_below=0.0), scans).means
    gaps = [np.mean((means - reference) ** 2) for means in (merged, dropped)]
    assert gaps[0] < 0.05 * gaps[1]
