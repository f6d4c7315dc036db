"""Tracks that a strategy gives up, and the counters that stop there."""

import numpy as np
import pytest
from scipy.stats import chi2
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    exact_mixture,
    gaussian_mixture,
    known_association,
    nearest_neighbour,
    particle_filter,
    pda,
    rao_blackwellised,
    run_on,
)

STRATEGIES = {
    "nearest neighbour": nearest_neighbour,
    "pda": pda,
    "mixture": gaussian_mixture,
    "particles": lambda **keys: particle_filter(particles=300, **keys),
    "particles from detections": lambda **keys: particle_filter(
        particles=300, proposal="detections", **keys
    ),
    "histories": lambda **keys: rao_blackwellised(particles=20, **keys),
}
NEAR, FAR, NONE = [[0.0]], [[500.0]], []


def ended(present):
    """Scan at which each track was given up, its length if never."""
    return np.where(present.all(axis=1), present.shape[1], np.argmin(present, axis=1))


@pytest.mark.parametrize("strategy", STRATEGIES)
def test_empty_scans_in_a_row_end_a_track_and_any_gated_detection_starts_anew(strategy):
    world = constant_velocity_world(1, psd=1e-4)
    trials = [
        [NEAR, NONE, FAR, NEAR, NONE, NONE, NONE, NEAR],  # the third empty one in a row is scan 6
        [NONE, NONE, FAR, NEAR, NEAR, NEAR, NEAR, NEAR],  # the first scan counts too
        [NEAR, NONE, NONE, NEAR, NONE, FAR, NEAR, NONE],  # never three
        [NEAR] * 8,
    ]
    scans = as_scans(trials, 1)
    tracks = run_on(world, STRATEGIES[strategy](ends={"empty_scans": 3}), scans)
    np.testing.assert_array_equal(ended(tracks.present), [6, 2, 8, 8])
    np.testing.assert_array_equal(tracks.scans_run, [7, 3, 8, 8])
    never = run_on(world, STRATEGIES[strategy](), scans)
    assert never.present.all()
    np.testing.assert_array_equal(never.scans_run, 8)
    for trial, scan in enumerate([6, 2, 8, 8]):
        np.testing.assert_array_equal(tracks.means[trial, :scan], never.means[trial, :scan])
        assert np.isnan(tracks.means[trial, scan:]).all()
        assert np.isnan(tracks.covariances[trial, scan:]).all()
        assert not tracks.present[trial, scan:].any()


@pytest.mark.parametrize("strategy", STRATEGIES)
def test_a_track_ends_when_a_position_deviation_exceeds_the_limit(strategy):
    """Without detections the variance of a position grows as P11 + k^2 P22 + psd k^3 / 3."""
    axes = 2
    covariance = np.diag([1.0, 4.0, 0.01, 0.25])
    world = constant_velocity_world(axes, psd=0.5, covariance=covariance)
    scans = as_scans([[np.zeros((0, 2))] * 12] * 20, 2)
    k = np.arange(12)
    deviation = np.sqrt(4.0 + k**2 * 0.25 + 0.5 * k**3 / 3)  # of the second axis, the larger
    limit = 6.0
    first = int(np.argmax(deviation > limit))
    tracks = run_on(world, STRATEGIES[strategy](ends={"position_sd_above_m": limit}), scans)
    if "particles" in strategy:  # a sampled deviation of 300 is good to 4 %, a scan adds 14 %
        assert np.all(np.abs(tracks.scans_run - (first + 1)) <= 1)
    else:
        np.testing.assert_array_equal(tracks.scans_run, first + 1)
    np.testing.assert_array_equal(ended(tracks.present), tracks.scans_run - 1)
    found = np.sqrt(np.diagonal(tracks.covariances, axis1=2, axis2=3)[..., :2].max(axis=2))
    assert np.nanmax(found) <= limit


def test_hypotheses_stop_counting_where_a_track_ends():
    world = constant_velocity_world(1, psd=1e-4)
    scans = as_scans([[NEAR, NONE, NONE, NEAR, NEAR], [NEAR] * 5], 1)
    tracks = run_on(world, pda(ends={"empty_scans": 2}), scans)
    np.testing.assert_array_equal(tracks.hypotheses, [2 + 1 + 1, 2 * 5])
    particles = run_on(world, STRATEGIES["particles"](), scans)
    np.testing.assert_array_equal(particles.hypotheses, 0)


def test_hypotheses_are_counted_before_reduction_for_every_component():
    """With two detections in every gate, components go 1, 3, 9, and each forms three hypotheses."""
    world = constant_velocity_world(1, psd=1e-4)
    scans = as_scans([[[[0.0], [0.1]]] * 3], 1)
    tracks = run_on(world, exact_mixture(), scans)
    np.testing.assert_array_equal(tracks.hypotheses, [3 + 9 + 27])
    capped = run_on(world, exact_mixture(2), scans)
    np.testing.assert_array_equal(capped.hypotheses, [3 + 6 + 6])


def test_own_distance_of_known_association_is_white_chi_square():
    """NIS of a matched linear filter, so that sums over scans are chi-square as well.

    Source: Bar-Shalom, Li and Kirubarajan (2001), section 5.4. 200 trials of 50 scans; the sum lies
    within its two-sided bounds of level 1e-4, and no lag-one correlation beyond 4 / sqrt(count); by
    chance once in 6,000.
    """
    world = constant_velocity_world(2, detection_probability=0.8, clutter=0.01)
    drawn = draw_scenes_of(world, np.random.default_rng(50), 200, 50, clutter_half_width=5.0)
    scans = as_scans(drawn.trials, 2, origins=drawn.origins)
    tracks = run_on(world, known_association(), scans)
    np.testing.assert_array_equal(np.isnan(tracks.own_distance), drawn.origins < 0)
    distances = tracks.own_distance[drawn.origins == 0]
    low, high = chi2.ppf([5e-5, 1 - 5e-5], 2 * len(distances))
    assert low < distances.sum() < high
    both = (drawn.origins[:, 1:] == 0) & (drawn.origins[:, :-1] == 0)
    product = (tracks.own_distance[:, 1:] - 2) * (tracks.own_distance[:, :-1] - 2)
    assert abs(product[both].mean() / 4.0) < 4 / np.sqrt(both.sum())


def test_own_distance_is_told_of_known_association_alone():
    world = constant_velocity_world(1)
    tracks = run_on(world, pda(), as_scans([[NEAR, NEAR]], 1))
    assert np.isnan(tracks.own_distance).all()
