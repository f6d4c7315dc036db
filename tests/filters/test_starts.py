"""Tracks started from detections: which are chosen, what they give, and how filters go on."""

import numpy as np
import pytest
from plain_filters import hypotheses_of, match_moments, predict
from scipy.stats import chi2
from small_worlds import (
    as_scans,
    constant_acceleration_world,
    constant_velocity_world,
    draw_scenes_of,
    known_association,
    models_of,
    nearest_neighbour,
    particle_filter,
    pda,
    rao_blackwellised,
    run_on,
)

from filters.models.sensor import BearingSensor, PositionSensor, RangeBearingSensor
from filters.random_numbers import numbers_of
from filters.starts import StartRule, started_from_detections
from filters.track import ORIGIN_UNKNOWN

FAMILIES = {
    "gaussian": pda,
    "particles": lambda **keys: particle_filter(particles=4000, **keys),
    "histories": lambda **keys: rao_blackwellised(particles=20, **keys),
}


def one_point(velocity_sd, **settings):
    return {"kind": "one-point", "velocity_sd_m_per_s": velocity_sd, **settings}


def two_point(fastest, **settings):
    return {"kind": "two-point", "fastest_m_per_s": fastest, **settings}


# what a start says


def test_two_points_give_position_and_difference_with_the_textbook_covariance():
    """P0 = r [[1, 1/T], [1/T, 2/T^2]] a plane axis: Bar-Shalom, Li and Kirubarajan (2001), section
    5.5.3 (from memory)."""
    r, T = 0.7**2, 2.5
    world = constant_velocity_world(2, noise_sd=0.7)
    scans = as_scans([[[[1.0, -2.0]], [[4.0, -4.5]], []]], 2, interval=T)
    tracks = run_on(world, nearest_neighbour(start=two_point(5.0)), scans)
    np.testing.assert_array_equal(tracks.present, [[False, True, True]])
    np.testing.assert_allclose(tracks.means[0, 1], [4.0, -4.5, 3.0 / T, -2.5 / T], rtol=1e-14)
    expected = np.kron(r * np.array([[1, 1 / T], [1 / T, 2 / T**2]]), np.eye(2))
    np.testing.assert_allclose(tracks.covariances[0, 1], expected, rtol=1e-13, atol=1e-15)


def test_one_point_gives_its_position_and_a_velocity_of_zero_as_wide_as_stated():
    world = constant_velocity_world(2, noise_sd=0.7)
    scans = as_scans([[[], [[1.0, -2.0]], []]], 2)
    tracks = run_on(world, nearest_neighbour(start=one_point(6.0)), scans)
    np.testing.assert_array_equal(tracks.present, [[False, True, True]])
    np.testing.assert_array_equal(tracks.means[0, 1], [1.0, -2.0, 0.0, 0.0])
    expected = np.diag([0.49, 0.49, 36.0, 36.0])
    np.testing.assert_allclose(tracks.covariances[0, 1], expected, rtol=1e-14)


def test_from_two_points_on_a_kalman_filter_fits_a_straight_line():
    """Without process noise it is weighted least squares through all detections: numpy.polyfit."""
    world = constant_velocity_world(1, psd=0.0, detection_probability=1.0, clutter=0.0)
    rng = np.random.default_rng(4)
    places = 0.5 + 0.8 * np.arange(6) + rng.normal(size=6)
    scans = as_scans([[[[place]] for place in places]], 1)
    start = two_point(50.0, gate_probability=1.0)
    tracks = run_on(world, nearest_neighbour(gate_probability=1.0, start=start), scans)
    for k in range(2, 6):
        times = np.arange(k + 1.0) - k
        fit, spread = np.polyfit(times, places[: k + 1], 1, cov="unscaled")
        np.testing.assert_allclose(tracks.means[0, k], fit[::-1], rtol=1e-9)
        np.testing.assert_allclose(tracks.covariances[0, k], spread[::-1, ::-1], rtol=1e-9)


def test_a_start_from_two_points_says_how_far_off_it_is():
    """NEES of 2,000 trials, chi-square of 8,000; fails by chance once in 10,000 seeds a scan."""
    world = constant_velocity_world(2, psd=0.0, detection_probability=1.0, clutter=0.0)
    drawn = draw_scenes_of(world, np.random.default_rng(12), 2000, 4)
    start = two_point(100.0, gate_probability=1.0)
    tracks = run_on(world, pda(start=start), as_scans(drawn.trials, 2))
    error = tracks.means - drawn.states
    for k in (1, 3):
        inverse = np.linalg.inv(tracks.covariances[:, k])
        nees = np.einsum("ti,tij,tj->", error[:, k], inverse, error[:, k])
        assert abs(nees / 2000 - 4) < chi2.isf(5e-5, 8000) / 2000 - 4


def range_bearing_world():
    sensor = RangeBearingSensor(
        kind="range-bearing",
        noise_sd_range_m=3.0,
        noise_sd_bearing_deg=4.0,
        region_range_m=(0.0, 1e4),
        detection_probability=0.9,
        clutter_per_scan=1.0,
        position_m=(20.0, -10.0),
    )
    world = constant_velocity_world(2, mean=[50.0, 60.0, 0.0, 0.0], covariance=100.0 * np.eye(4))
    models = models_of(world.assumptions.models.motion, sensor)
    return world._replace(assumptions=world.assumptions._replace(models=models))


def test_a_start_from_range_and_bearing_is_unbiased_and_as_wide_as_it_says():
    """True places drawn uniformly around, 4,000 trials; fails by chance once in 10,000 seeds.

    The conversion averages over the true places that a measurement leaves open, so with true places
    spread evenly its covariance is right but for a few hundredths.
    """
    world, trials = range_bearing_world(), 4000
    rng = np.random.default_rng(3)
    offset = np.array([30.0, 70.0]) + rng.uniform(-8, 8, (trials, 2))
    measured = np.column_stack([np.hypot(*offset.T), np.arctan2(offset[:, 1], offset[:, 0])])
    measured += rng.normal(size=(trials, 2)) * [3.0, np.radians(4.0)]
    scans = as_scans([[[one]] for one in measured], 2)
    start = one_point(1.0, gate_probability=1.0)
    tracks = run_on(world, nearest_neighbour(start=start), scans)
    error = tracks.means[:, 0, :2] - offset - [20.0, -10.0]
    spread = tracks.covariances[:, 0, :2, :2]
    nees = np.einsum("ti,tij,tj->t", error, np.linalg.inv(spread), error)
    assert abs(nees.mean() - 2) < 3.9 * nees.std() / trials**0.5 + 0.05
    assert np.all(np.abs(error.mean(axis=0)) < 4.1 * error.std(axis=0) / trials**0.5)


def test_a_position_converted_is_itself_with_the_noise_at_its_range():
    sensor = PositionSensor(
        kind="position",
        noise_sd_m=2.0,
        noise_factor_over_range=((0.0, 1.0), (100.0, 3.0)),
        region_m=((-200.0, 200.0), (-200.0, 200.0)),
        detection_probability=1.0,
        clutter_per_scan=0.0,
    )
    out = np.full((3, 2), np.nan)
    stretch = sensor.convert(sensor.model_parameters(), np.zeros(4), np.array([30.0, 40.0]), out)
    assert stretch == 1.0
    np.testing.assert_allclose(out, [[30.0, 40.0], [16.0, 0.0], [0.0, 16.0]])
    assert sensor.fixes_position()
    assert not BearingSensor.fixes_position()


# which detections


def distance_of(difference, covariance):
    return difference @ np.linalg.solve(covariance, difference)


def plain_start(plain, scans, interval, points, speed, limit):
    """The start as its definition says: scan, mean and covariance, or None."""
    R, m = plain.R, len(plain.H)
    mean, covariance, first = plain.mean, plain.covariance, None
    for k, detections in enumerate(scans):
        if k > 0:
            ((_, mean, covariance),) = predict(plain, [(1.0, mean, covariance)])
        started, spread = mean.copy(), covariance.copy()
        spread[: 2 * m], spread[:, : 2 * m] = 0.0, 0.0
        spread[:m, :m] = R
        if first is not None:
            ways = [(np.linalg.norm(z - first), z) for z in detections]
            left = [max(0.0, 1 - speed * interval / way) * (z - first) for way, z in ways]
            ways = [
                pair for pair, e in zip(ways, left, strict=True) if distance_of(e, 2 * R) < limit
            ]
            if ways:
                _, second = min(ways, key=lambda pair: pair[0])
                started[:m], started[m : 2 * m] = second, (second - first) / interval
                spread[:m, m : 2 * m] = spread[m : 2 * m, :m] = R / interval
                spread[m : 2 * m, m : 2 * m] = 2 * R / interval**2
                return k, started, spread
        distances = [distance_of(z - mean[:m], covariance[:m, :m] + R) for z in detections]
        first = None
        if distances and min(distances) < limit:
            first = detections[int(np.argmin(distances))]
            if points == 1:
                started[:m], started[m : 2 * m] = first, 0.0
                spread[m : 2 * m, m : 2 * m] = speed**2 * np.eye(m)
                return k, started, spread
    return None


WORLDS = {
    "velocity in a plane": constant_velocity_world(2, detection_probability=0.4, clutter=0.003),
    "acceleration along a line": constant_acceleration_world(
        1, detection_probability=0.4, clutter=0.03
    ),
}


@pytest.mark.parametrize("world", WORLDS.values(), ids=WORLDS)
@pytest.mark.parametrize(("points", "speed"), [(1, 3.0), (2, 1.5)])
def test_detections_are_chosen_and_used_as_the_definition_says(world, points, speed):
    """Random scenes with misses and clutter; some trials find no start at all."""
    plain, limit = world.plain, 4.0
    drawn = draw_scenes_of(world, np.random.default_rng(points), 250, 5, clutter_half_width=12.0)
    scans = as_scans(drawn.trials, len(plain.H))
    rule = StartRule(points, speed, limit)
    found = started_from_detections(world.assumptions.models, rule, world.assumptions.prior, scans)
    starts = [plain_start(plain, trial, 1.0, points, speed, limit) for trial in drawn.trials]
    expected = [5 if start is None else start[0] for start in starts]
    np.testing.assert_array_equal(found.scans, expected)
    assert set(expected) == {*range(points - 1, 6)}
    for trial, start in enumerate(starts):
        if start is not None:
            np.testing.assert_allclose(found.means[trial], start[1], rtol=1e-9, atol=1e-9)
            np.testing.assert_allclose(found.covariances[trial], start[2], rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize("start", [one_point(3.0), two_point(3.0)], ids=["one", "two"])
def test_who_is_told_origins_starts_from_the_targets_own_detections(start):
    """Nearer clutter, gates and the greatest speed matter to those who must guess."""
    world = constant_velocity_world(1)
    scans = as_scans(
        [[[[0.0]], [[0.1], [40.0]], [[0.0]], [[45.0]], [[52.0], [45.1]], [[52.0]]]],
        1,
        origins=[[-1, 1, -1, 0, 0, -1]],
    )
    tracks = run_on(world, known_association(start=start), scans)
    guessed = run_on(world, nearest_neighbour(start=start), scans._replace(
        origins=np.full((1, 6), ORIGIN_UNKNOWN)
    ))  # fmt: skip
    is_two = start["kind"] == "two-point"
    expected, at = ([52.0, 7.0], 4) if is_two else ([40.0, 0.0], 1)
    assert np.argmax(tracks.present[0]) == at
    np.testing.assert_allclose(tracks.means[0, at], expected, atol=1e-12)
    assert np.argmax(guessed.present[0]) == (1 if is_two else 0)


# how filters go on


def scenes(trials=40, scans=5, seed=9):
    world = constant_velocity_world(2, detection_probability=0.7, clutter=0.002)
    drawn = draw_scenes_of(world, np.random.default_rng(seed), trials, scans, 12.0)
    return world, as_scans(drawn.trials, 2), drawn


def test_a_filter_goes_on_from_its_start_as_from_any_posterior():
    world, scans, drawn = scenes()
    start = one_point(2.0)
    tracks = run_on(world, pda(gate_probability=1.0, start=start), scans)
    limit = chi2.ppf(0.9997, 2)
    for trial in range(len(drawn.trials)):
        begun = plain_start(world.plain, drawn.trials[trial], 1.0, 1, 2.0, limit)
        at = 5 if begun is None else begun[0]
        np.testing.assert_array_equal(tracks.present[trial], np.arange(5) >= at)
        assert np.isnan(tracks.means[trial, :at]).all()
        if begun is None:
            continue
        mixture = [(1.0, *begun[1:])]
        for k in range(at + 1, 5):
            detections = drawn.trials[trial][k]
            mixture = match_moments(
                hypotheses_of(world.plain, predict(world.plain, mixture), detections)
            )
            np.testing.assert_allclose(tracks.means[trial, k], mixture[0][1], rtol=1e-8, atol=1e-8)
            np.testing.assert_allclose(
                tracks.covariances[trial, k], mixture[0][2], rtol=1e-8, atol=1e-8
            )
        assert tracks.scans_run[trial] == 4 - at


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("start", [one_point(2.0), two_point(4.0)], ids=["one", "two"])
def test_every_family_starts_from_the_same_detections(family, start):
    """4,000 particles, five standard errors: of 1,000 values one would be off by chance in 2,000
    seeds; the other families say the start itself."""
    world, scans, _ = scenes()
    tracks = run_on(world, FAMILIES[family](start=start), scans)
    begun = nearest_neighbour(start=start).prior_for(world.assumptions, scans)
    present = np.arange(5) >= begun.scans[:, None]
    np.testing.assert_array_equal(tracks.present, present)
    np.testing.assert_array_equal(np.isnan(tracks.means[..., 0]), ~present)
    for trial in np.flatnonzero(begun.scans < 5):
        mean, covariance = begun.means[trial], begun.covariances[trial]
        at = trial, begun.scans[trial]
        if family != "particles":
            np.testing.assert_array_equal(tracks.means[at], mean)
            np.testing.assert_array_equal(tracks.covariances[at], covariance)
            continue
        variance = np.diag(covariance)
        assert np.all(np.abs(tracks.means[at] - mean) < 5 * np.sqrt(variance / 4000))
        squares = covariance**2 + np.outer(variance, variance)
        off = np.abs(tracks.covariances[at] - covariance)
        assert np.all(off < 5 * np.sqrt(squares / 4000) + variance.max() * 25 / 4000)


@pytest.mark.parametrize("family", FAMILIES)
def test_a_start_wider_than_the_track_may_be_is_given_up_at_once(family):
    world, scans, _ = scenes(trials=4)
    narrow = {"position_sd_above_m": 0.5}  # the noise has 1 m
    tracks = run_on(world, FAMILIES[family](start=one_point(2.0), ends=narrow), scans)
    assert not tracks.present.any()
    assert np.isnan(tracks.means).all()
    np.testing.assert_array_equal(tracks.scans_run, 0)


@pytest.mark.parametrize("family", FAMILIES)
def test_posteriors_are_kept_from_the_start_on(family):
    world, scans, _ = scenes()
    strategy = FAMILIES[family](start=two_point(4.0))
    tracks = strategy.run(world.assumptions, scans, numbers_of(1), 0, record=True)
    counts = tracks.posteriors.counts
    np.testing.assert_array_equal(counts > 0, tracks.present)
    ends = np.cumsum(counts.ravel()).reshape(counts.shape)
    assert tracks.posteriors.used[0] == ends[-1, -1]
    for trial in np.flatnonzero(tracks.present.any(axis=1)):
        k = np.argmax(tracks.present[trial])
        part = slice(ends[trial, k] - counts[trial, k], ends[trial, k])
        kept = tracks.posteriors.weights[part] @ tracks.posteriors.means[part]
        np.testing.assert_allclose(kept, tracks.means[trial, k], rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("family", FAMILIES)
def test_starts_do_not_depend_on_how_trials_are_put_together(family):
    world, whole, drawn = scenes(trials=12)
    strategy = FAMILIES[family](start=two_point(4.0))
    together = run_on(world, strategy, whole)
    parts = [run_on(world, strategy, as_scans(drawn.trials[:5], 2))]
    parts.append(run_on(world, strategy, as_scans(drawn.trials[5:], 2), first_trial=5))
    for name in ("means", "covariances", "present"):
        apart = np.concatenate([getattr(part, name) for part in parts])
        assert apart.tobytes() == getattr(together, name).tobytes()


def test_a_prior_of_each_trials_own_points_to_its_detection():
    """As where the truth is stated and priors are drawn around it."""
    world = constant_velocity_world(1)
    scans = as_scans([[[[0.0], [100.0]]]] * 2, 1)
    prior = world.assumptions.prior._replace(means=np.array([[1.0, 0.0], [99.0, 0.0]]))
    world = world._replace(assumptions=world.assumptions._replace(prior=prior))
    tracks = run_on(world, nearest_neighbour(start=one_point(2.0)), scans)
    np.testing.assert_array_equal(tracks.means[:, 0, 0], [0.0, 100.0])
