"""N-scan pruning against whole histories kept in plain Python, and against the exact posterior."""

import numpy as np
import pytest
from plain_filters import hypotheses_of, moments, n_scan_mixtures, predict
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    look_inside,
    n_scan_mixture,
    pruned_mixture,
    run_on,
)
from tables import Row, reduce_rows

from filters.mixture import NO_SCAN
from filters.reductions.n_scan_pruning import n_scan_pruning

WORLD = constant_velocity_world(1, clutter=0.15)
SCENES = draw_scenes_of(WORLD, np.random.default_rng(50), 6, 6, clutter_half_width=5.0).trials


def newest_first(history, depth):
    """A plain history as the kernel keeps it: so many scans, newest first."""
    numbers = [-1 if association is None else association for association in reversed(history)]
    return (numbers + [NO_SCAN] * depth)[:depth]


@pytest.mark.parametrize("scans_back", [1, 2, 3, 9])
def test_components_and_their_histories_are_those_of_the_definition(scans_back):
    """After every scan of every scene, component by component, heaviest first."""
    limits = (1e-3, 12)
    for scans in SCENES:
        expected = n_scan_mixtures(WORLD.plain, scans, scans_back, *limits, 0.99)
        for k, mixture in enumerate(expected):
            reduction = n_scan_pruning(scans_back, *limits)
            found = look_inside(WORLD, as_scans([scans[: k + 1]], 1), 0.99, reduction=reduction)
            histories = found.room.mixture.histories[: len(mixture)]
            for (weight, mean, _), (w, mu, _, history), kept in zip(
                found.mixture(len(mixture)), mixture, histories, strict=True
            ):
                np.testing.assert_allclose(weight, w, rtol=1e-9)
                np.testing.assert_allclose(mean, mu, rtol=1e-9, atol=1e-9)
                assert kept.tolist() == newest_first(history, scans_back)


def exact_posteriors(scans):
    """After each scan every history, unpruned: parts (weight, mean, covariance) and histories."""
    parts, histories = [(1.0, WORLD.plain.mean, WORLD.plain.covariance)], [()]
    for k, detections in enumerate(scans):
        rows = hypotheses_of(WORLD.plain, predict(WORLD.plain, parts) if k else parts, detections)
        parts = [row[:3] for row in rows]
        histories = [(*histories[row.parent], row.detection) for row in rows]
        yield parts, histories


@pytest.mark.parametrize("scans_back", [1, 2, 3])
def test_survivors_share_their_associations_up_to_n_scans_ago(scans_back):
    """Every survivor is found, by its mean, among all histories of the exact posterior.

    Nothing is pruned or capped here, so that survivors' weights stand to one another as there, and
    all of the histories that agree with the heaviest survive.
    """
    for scans in SCENES[:3]:
        for k, (exact, histories) in enumerate(exact_posteriors(scans[:4])):
            reduction = n_scan_pruning(scans_back, 0.0, 2000)
            begun = as_scans([scans[: k + 1]], 1)
            mixture = look_inside(WORLD, begun, reduction=reduction).room.mixture
            count = 1 + np.argmax(np.cumsum(mixture.weights) > 1.0 - 1e-12)
            gaps = np.array([part[1] for part in exact]) - mixture.means[:count, None]
            found = np.abs(gaps).max(axis=2).argmin(axis=1)
            assert np.abs(gaps[np.arange(count), found]).max() < 1e-9

            settled = max(k + 1 - scans_back, 0)
            shared = histories[found[0]][:settled]
            assert all(histories[place][:settled] == shared for place in found)
            assert count == len(set(found)) == sum(own[:settled] == shared for own in histories)
            weights = np.array([exact[place][0] for place in found])
            np.testing.assert_allclose(mixture.weights[:count], weights / weights.sum(), rtol=1e-8)


@pytest.mark.parametrize("scans_back", [6, 100])
def test_with_n_of_all_scans_it_is_prune_and_cap(scans_back):
    world = constant_velocity_world(2, clutter=0.05)
    drawn = draw_scenes_of(world, np.random.default_rng(51), 5, 6, clutter_half_width=5.0)
    scans = as_scans(drawn.trials, 2)
    limits = {"max_components": 9, "prune_below": 1e-3}
    found = run_on(world, n_scan_mixture(scans_back=scans_back, **limits), scans)
    expected = run_on(world, pruned_mixture(**limits), scans)
    np.testing.assert_allclose(found.means, expected.means, rtol=1e-12, atol=1e-12)
    np.testing.assert_array_equal(found.hypotheses, expected.hypotheses)


def test_the_estimate_is_the_mean_of_the_definition():
    strategy = n_scan_mixture(
        gate_probability=0.99, scans_back=2, max_components=12, prune_below=1e-3
    )
    tracks = run_on(WORLD, strategy, as_scans(SCENES, 1))
    for trial, scans in enumerate(SCENES):
        for k, mixture in enumerate(n_scan_mixtures(WORLD.plain, scans, 2, 1e-3, 12, 0.99)):
            mean, covariance = moments([part[:3] for part in mixture])
            np.testing.assert_allclose(tracks.means[trial, k], mean, rtol=1e-9, atol=1e-9)
            np.testing.assert_allclose(
                tracks.covariances[trial, k], covariance, rtol=1e-9, atol=1e-9
            )


def test_a_track_starts_without_the_associations_of_the_trial_before():
    reduction = n_scan_pruning(3, 0.0, 200)
    trials = as_scans([[[[0.2]], [[0.4], [1.0]]], [[[0.1]], [[0.3], [0.9]]]], 1)
    histories = look_inside(WORLD, trials, reduction=reduction).room.mixture.histories[:6]
    assert sorted(map(tuple, histories)) == sorted(
        (newer, older, NO_SCAN) for newer in (-1, 0, 1) for older in (-1, 0)
    )


def test_the_heaviest_hypothesis_settles_even_what_most_of_the_weight_denies():
    """Parents 0 and 1 took detections 5 and 7 two scans ago; 0.4 against 0.3 and 0.3."""
    rows = [
        Row(0.3, [0.0, 0.0], np.eye(2), parent=0, detection=0),
        Row(0.3, [1.0, 0.0], np.eye(2), parent=0, detection=1),
        Row(0.4, [2.0, 0.0], np.eye(2), parent=1, detection=2),
    ]
    left = reduce_rows(n_scan_pruning(2, 0.0, 9), rows, histories=[[3, 5], [4, 7]])
    assert [(part[0], part[1][0]) for part in left.components] == [(1.0, 2.0)]
    assert left.histories.tolist() == [[2, 4]]
    left = reduce_rows(n_scan_pruning(2, 0.0, 9), rows, histories=[[3, 5], [4, 5]])
    assert [part[1][0] for part in left.components] == [2.0, 0.0, 1.0]
    assert left.histories.tolist() == [[2, 4], [0, 3], [1, 3]]


def test_weights_are_pruned_as_shares_of_what_agrees():
    """0.04 of all is 0.1 of what agrees: a limit of 0.08 keeps it."""
    rows = [
        Row(0.36, [0.0, 0.0], np.eye(2), parent=0),
        Row(0.04, [1.0, 0.0], np.eye(2), parent=0, mode=1),
        Row(0.30, [2.0, 0.0], np.eye(2), parent=1),
        Row(0.30, [3.0, 0.0], np.eye(2), parent=1),
    ]
    left = reduce_rows(n_scan_pruning(1, 0.08, 9), rows, histories=[[0], [1]])
    np.testing.assert_allclose([part[0] for part in left.components], [0.9, 0.1], rtol=1e-14)
    assert left.modes.tolist() == [0, 1]
