"""Drawn scenes: the same numbers for everyone, nested conditions, the distributions stated."""

import itertools
import math

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.stats import binomtest, chi2, kstest, poisson

from filters.hypotheses import NOT_DETECTED
from filters.models.sensor import PositionSensor
from filters.random_numbers import numbers_of
from filters.track import ORIGIN_UNKNOWN
from harness.scene.detections import draw_detections
from harness.scene.simulate import draw_scenes
from harness.scene.truth import draw_truth
from harness.study.schema import Scene

SEED = 20260101


def plane(scans=20, *, target=None, **sensor):
    """An invented scene in the plane; keys of its sensor and target may differ."""
    return Scene(
        scans=scans,
        scan_interval_s=1.5,
        target={
            "motion": "nearly-constant-velocity",
            "acceleration_psd_m2_per_s3": 0.3,
            "start_position_m": (-40.0, 25.0),
            "start_velocity_m_per_s": (3.0, -2.0),
            "start_position_sd_m": (8.0, 5.0),
            "start_velocity_sd_m_per_s": (0.5, 1.0),
        }
        | (target or {}),
        sensor={
            "kind": "position",
            "noise_sd_m": 4.0,
            "detection_probability": 0.8,
            "clutter_density_per_m2": 2e-4,
            "region_m": ((-150.0, 150.0), (-150.0, 150.0)),
        }
        | sensor,
    )


def polar(scans=20, *, target=None, **sensor):
    """The same target seen by range and bearing, clutter by the number of false detections."""
    keys = {
        "kind": "range-bearing",
        "position_m": (-60.0, -30.0),
        "noise_sd_range_m": 5.0,
        "noise_sd_bearing_deg": 2.0,
        "detection_probability": 0.8,
        "clutter_per_scan": 6.0,
        "region_range_m": (0.0, 400.0),
    }
    scene = plane(scans, target=target)
    return Scene(**(scene.model_dump() | {"sensor": keys | sensor}))


def scan_of(batch, trial, k):
    first, end = batch.scans.offsets[trial, k : k + 2]
    return batch.scans.detections[first:end]


def clutter_of(batch, trial, k):
    origin = batch.scans.origins[trial, k]
    scan = scan_of(batch, trial, k)
    return np.delete(scan, origin, axis=0) if origin != NOT_DETECTED else scan


def own_of(batch):
    """The target's own detections, (trials, scans, m), NaN where it was missed."""
    places = batch.scans.offsets[:, :-1] + batch.scans.origins
    found = batch.scans.detections[np.where(batch.scans.origins >= 0, places, 0)]
    return np.where((batch.scans.origins >= 0)[..., None], found, np.nan)


def all_clutter(batch):
    trials, scans = batch.scans.origins.shape
    return [clutter_of(batch, trial, k) for trial in range(trials) for k in range(scans)]


def as_set(points):
    return {tuple(point) for point in points}


# What is drawn for whom


@pytest.mark.parametrize("make_scene", [plane, polar])
def test_a_trial_drawn_alone_is_the_same_trial_of_a_batch(make_scene):
    scene, numbers = make_scene(), numbers_of(SEED)
    batch = draw_scenes(scene, numbers, 100, 7)
    alone = draw_scenes(scene, numbers, 104, 1)
    np.testing.assert_array_equal(alone.truth.states[0], batch.truth.states[4])
    np.testing.assert_array_equal(alone.scans.origins[0], batch.scans.origins[4])
    np.testing.assert_array_equal(alone.truth.outside[0], batch.truth.outside[4])
    for k in range(scene.scans):
        np.testing.assert_array_equal(scan_of(alone, 0, k), scan_of(batch, 4, k))
    again = draw_scenes(scene, numbers_of(SEED), 100, 7)
    np.testing.assert_array_equal(again.scans.detections, batch.scans.detections)


def test_trials_seeds_and_streams_differ():
    scene = plane()
    first = draw_scenes(scene, numbers_of(SEED), 0, 2)
    assert not np.any(first.truth.states[0] == first.truth.states[1])
    for other in (numbers_of(SEED + 1), numbers_of(SEED, stream=1)):
        assert not np.any(draw_truth(scene, other, 0, 1)[0] == first.truth.states[0])


def test_scans_of_a_longer_trial_begin_with_those_of_a_shorter_one():
    short, long = (draw_scenes(plane(scans), numbers_of(SEED), 3, 2) for scans in (6, 15))
    np.testing.assert_array_equal(short.truth.states, long.truth.states[:, :6])
    for k in range(6):
        np.testing.assert_array_equal(scan_of(short, 1, k), scan_of(long, 1, k))


def test_strategies_are_not_told_origins():
    batch = draw_scenes(plane(), numbers_of(SEED), 0, 3)
    np.testing.assert_array_equal(batch.scans_without_origins.origins, ORIGIN_UNKNOWN)
    assert batch.scans_without_origins.detections is batch.scans.detections
    assert np.any(batch.scans.origins >= 0)


def test_the_largest_scan_is_stated():
    batch = draw_scenes(plane(), numbers_of(SEED), 0, 10)
    counts = np.diff(batch.scans.offsets, axis=1)
    assert batch.scans.most_detections == counts.max()
    assert batch.scans.offsets[0, 0] == 0
    assert batch.scans.offsets[-1, -1] == len(batch.scans.detections)
    np.testing.assert_array_equal(batch.scans.offsets[1:, 0], batch.scans.offsets[:-1, -1])


def test_a_scene_without_any_detection_is_a_scene():
    batch = draw_scenes(
        plane(detection_probability=0.0, clutter_density_per_m2=0.0), numbers_of(SEED), 0, 3
    )
    assert batch.scans.detections.shape == (0, 2)
    assert batch.scans.most_detections == 0
    np.testing.assert_array_equal(batch.scans.origins, NOT_DETECTED)


# Nested conditions


def test_denser_clutter_goes_on_where_sparser_clutter_stops():
    """Truth, own detections and every false detection of the sparser scene stay, to the bit."""
    densities = (0.0, 1e-5, 2e-4, 2.1e-4, 5e-3)
    batches = [
        draw_scenes(plane(clutter_density_per_m2=density), numbers_of(SEED), 0, 20)
        for density in densities
    ]
    for sparser, denser in itertools.pairwise(batches):
        np.testing.assert_array_equal(sparser.truth.states, denser.truth.states)
        np.testing.assert_array_equal(own_of(sparser), own_of(denser))
        for few, many in zip(all_clutter(sparser), all_clutter(denser), strict=True):
            assert as_set(few) <= as_set(many)
    sizes = [len(batch.scans.detections) for batch in batches]
    assert sizes == sorted(sizes)
    assert sizes[2] < sizes[3] < 1.1 * sizes[2]


def test_a_higher_detection_probability_keeps_every_detection_of_a_lower_one():
    low, high = (
        draw_scenes(plane(detection_probability=p), numbers_of(SEED), 0, 30) for p in (0.5, 0.75)
    )
    detected = low.scans.origins >= 0
    assert np.all(high.scans.origins[detected] >= 0)
    assert np.any(high.scans.origins[~detected] >= 0)
    np.testing.assert_array_equal(own_of(low)[detected], own_of(high)[detected])
    for few, many in zip(all_clutter(low), all_clutter(high), strict=True):
        np.testing.assert_array_equal(sorted(few.tolist()), sorted(many.tolist()))


def test_noise_scales_with_its_standard_deviation():
    small, large = (draw_scenes(plane(noise_sd_m=sd), numbers_of(SEED), 0, 10) for sd in (2.0, 5.0))
    error_small = own_of(small) - small.truth.position
    error_large = own_of(large) - large.truth.position
    np.testing.assert_allclose(error_small / 2.0, error_large / 5.0, rtol=0, atol=1e-12)


def test_process_noise_scales_with_the_root_of_its_density():
    """Deviations from the straight line through the same start."""
    paths = []
    for psd in (0.1, 0.4):
        states = draw_truth(
            plane(target={"acceleration_psd_m2_per_s3": psd}), numbers_of(SEED), 0, 5
        )
        times = 1.5 * np.arange(states.shape[1])[:, None]
        straight = states[:, :1, :2] + times * states[:, :1, 2:]
        paths.append((states[..., :2] - straight) / math.sqrt(psd))
    np.testing.assert_allclose(paths[0], paths[1], rtol=0, atol=1e-10)


def test_truth_does_not_depend_on_the_sensor():
    numbers = numbers_of(SEED)
    states = draw_scenes(plane(), numbers, 0, 4).truth.states
    np.testing.assert_array_equal(draw_scenes(polar(), numbers, 0, 4).truth.states, states)
    np.testing.assert_array_equal(draw_truth(plane(), numbers, 0, 4), states)


def test_given_truth_is_measured_with_the_same_numbers():
    scene, numbers = plane(), numbers_of(SEED)
    batch = draw_scenes(scene, numbers, 5, 4)
    moved = batch.truth.states + np.array([10.0, -20.0, 0.0, 0.0])
    scans, _ = draw_detections(scene, moved, numbers, 5)
    np.testing.assert_array_equal(scans.origins >= 0, batch.scans.origins >= 0)
    offset = own_of(batch._replace(scans=scans)) - own_of(batch)
    detected = batch.scans.origins >= 0
    np.testing.assert_allclose(offset[detected] - [10.0, -20.0], 0.0, atol=1e-12)


# Distributions


def test_the_start_has_the_priors_mean_and_covariance():
    """4,000 starts against a full covariance: whitened squares sum to chi-square at level 1e-5."""
    spread = np.array(
        [[9.0, 2.0, 1.0, 0.0], [2.0, 4.0, 0.0, 0.5], [1.0, 0.0, 1.0, 0.2], [0.0, 0.5, 0.2, 0.5]]
    )
    target = {
        "start_covariance": tuple(map(tuple, spread)),
        "start_position_sd_m": None,
        "start_velocity_sd_m_per_s": None,
    }
    states = draw_truth(plane(1, target=target), numbers_of(SEED), 0, 4000)[:, 0]
    offset = states - np.array([-40.0, 25.0, 3.0, -2.0])
    white = np.linalg.solve(np.linalg.cholesky(spread), offset.T).T
    for column in white.T:
        assert kstest(column, "norm").pvalue > 1e-5
    correlation = np.corrcoef(white, rowvar=False) - np.eye(4)
    assert np.abs(correlation).max() < 4.5 / math.sqrt(4000)


def test_the_motion_has_the_transition_and_noise_of_its_model():
    """Disturbances of 6,000 steps, whitened by Q (scipy.linalg.expm for F, Q from its integral)."""
    states = draw_truth(plane(31), numbers_of(SEED), 0, 200)
    T, psd = 1.5, 0.3
    F = expm(T * np.eye(4, k=2))
    block = psd * np.array([[T**3 / 3, T**2 / 2], [T**2 / 2, T]])
    root = np.linalg.cholesky(np.kron(block, np.eye(2)))
    disturbance = (states[:, 1:] - states[:, :-1] @ F.T).reshape(-1, 4)
    white = np.linalg.solve(root, disturbance.T).T
    for column in white.T:
        assert kstest(column, "norm").pvalue > 1e-5
    correlation = np.corrcoef(white, rowvar=False) - np.eye(4)
    assert np.abs(correlation).max() < 4.5 / math.sqrt(len(white))


def test_own_detections_have_the_stated_rate_and_noise():
    """8,000 scans: binomial interval of level 1e-5, Kolmogorov-Smirnov along both axes."""
    batch = draw_scenes(plane(), numbers_of(SEED), 0, 400)
    detected = batch.scans.origins >= 0
    inside = ~batch.truth.outside
    assert not np.any(detected & ~inside)
    test = binomtest(int(detected.sum()), int(inside.sum()), 0.8)
    assert test.pvalue > 1e-5
    noise = ((own_of(batch) - batch.truth.position) / 4.0)[detected]
    for column in noise.T:
        assert kstest(column, "norm").pvalue > 1e-4
    assert abs(np.corrcoef(noise, rowvar=False)[0, 1]) < 4.5 / math.sqrt(len(noise))


def test_clutter_is_poisson_in_number():
    """6,000 scans with 18 on average: dispersion, and counts against the Poisson law."""
    batch = draw_scenes(plane(), numbers_of(SEED), 0, 300)
    counts = np.array([len(points) for points in all_clutter(batch)])
    rate = 2e-4 * 300.0**2
    index = np.sum((counts - rate) ** 2) / rate
    low, high = chi2.ppf([5e-6, 1 - 5e-6], len(counts))
    assert low < index < high
    edges = [-1, *range(10, 28), 1000]
    observed, _ = np.histogram(counts, np.array(edges) + 0.5)
    expected = len(counts) * np.diff(poisson.cdf(edges, rate))
    assert chi2.sf(np.sum((observed - expected) ** 2 / expected), len(expected) - 1) > 1e-5
    lag = np.corrcoef(counts[:-1], counts[1:])[0, 1]
    assert abs(lag) < 4.5 / math.sqrt(len(counts))


@pytest.mark.parametrize("make_scene", [plane, polar])
def test_clutter_is_uniform_over_the_region_in_units_of_the_measurement(make_scene):
    """Kolmogorov-Smirnov in each component at level 1e-5, and no correlation between them."""
    scene = make_scene()
    batch = draw_scenes(scene, numbers_of(SEED), 0, 150)
    points = np.concatenate(all_clutter(batch))
    low, high = scene.sensor.region().T
    shares = (points - low) / (high - low)
    for column in shares.T:
        assert kstest(column, "uniform").pvalue > 1e-5
    assert abs(np.corrcoef(shares, rowvar=False)[0, 1]) < 4.5 / math.sqrt(len(shares))


def test_clutter_per_scan_is_its_expected_number():
    """3,000 scans at 6 a scan: the total is Poisson, within 4.5 deviations."""
    batch = draw_scenes(polar(), numbers_of(SEED), 0, 150)
    total, expected = sum(map(len, all_clutter(batch))), 6.0 * 150 * 20
    assert abs(total - expected) < 4.5 * math.sqrt(expected)


def test_the_place_in_a_scan_says_nothing_of_origin():
    """In scans of M detections the own one is at each place equally often; M from 2 to 6."""
    scene = plane(40, clutter_density_per_m2=4.0 / 300.0**2, detection_probability=1.0)
    batch = draw_scenes(scene, numbers_of(SEED), 0, 300)
    counts = np.diff(batch.scans.offsets, axis=1)
    for count in range(2, 7):
        places = batch.scans.origins[(counts == count) & (batch.scans.origins >= 0)]
        observed = np.bincount(places, minlength=count)
        expected = len(places) / count
        assert len(observed) == count
        assert len(places) > 500
        assert chi2.sf(np.sum((observed - expected) ** 2) / expected, count - 1) > 1e-5


def test_clutter_does_not_depend_on_whether_the_target_was_detected():
    """Mean counts with and without the own detection, 4.5 standard errors of their difference."""
    batch = draw_scenes(plane(detection_probability=0.5), numbers_of(SEED), 0, 300)
    counts = np.diff(batch.scans.offsets, axis=1) - (batch.scans.origins >= 0)
    detected = counts[batch.scans.origins >= 0]
    missed = counts[batch.scans.origins < 0]
    standard_error = math.sqrt(18.0 / len(detected) + 18.0 / len(missed))
    assert abs(detected.mean() - missed.mean()) < 4.5 * standard_error


# The region


def test_a_target_outside_the_region_is_flagged_and_not_detected():
    """A precise sensor, so that the measurement is where the target is."""
    region = ((-60.0, 20.0), (-30.0, 40.0))
    scene = plane(30, noise_sd_m=1e-6, detection_probability=1.0, region_m=region)
    batch = draw_scenes(scene, numbers_of(SEED), 0, 60)
    low, high = np.array(region).T
    inside = np.all((batch.truth.position > low) & (batch.truth.position < high), axis=2)
    assert 0.05 < inside.mean() < 0.95
    np.testing.assert_array_equal(batch.truth.outside, ~inside)
    np.testing.assert_array_equal(batch.scans.origins >= 0, inside)
    assert np.all((batch.scans.detections >= low) & (batch.scans.detections <= high))


def test_a_region_of_bearings_may_cross_180_degrees():
    """Bearings 150 to 250 degrees: measurements come as +-180 and all lie within, clutter too."""
    target = {"start_position_m": (-200.0, 0.0), "start_velocity_m_per_s": (0.0, -12.0)}
    scene = polar(
        target=target,
        position_m=(0.0, 0.0),
        detection_probability=1.0,
        region_bearing_deg=(150.0, 250.0),
    )
    batch = draw_scenes(scene, numbers_of(SEED), 0, 100)
    bearings = batch.scans.detections[:, 1]
    assert np.all(np.abs(bearings) <= math.pi)
    turned = np.degrees(bearings) % 360.0
    assert np.all((turned >= 150.0 - 1e-9) & (turned <= 250.0 + 1e-9))
    clutter = np.concatenate(all_clutter(batch))
    assert kstest((np.degrees(clutter[:, 1]) % 360.0 - 150.0) / 100.0, "uniform").pvalue > 1e-5
    detected = batch.scans.origins >= 0
    np.testing.assert_array_equal(detected, ~batch.truth.outside)
    place = batch.truth.position
    true_bearing = np.degrees(np.arctan2(place[..., 1], place[..., 0])) % 360.0
    clear = (true_bearing > 165.0) & (true_bearing < 235.0) & (np.hypot(*place.T).T < 350.0)
    assert clear.mean() > 0.3
    assert not np.any(batch.truth.outside[clear])
    # Both signs occur: the target crosses the cut.
    assert len(np.unique(np.sign(own_of(batch)[detected][:, 1]))) == 2


def test_ranges_below_zero_are_outside():
    """A target at the site: noise takes half of its ranges below zero, and those go undetected."""
    target = {
        "acceleration_psd_m2_per_s3": 0.0,
        "start_position_m": (0.0, 0.0),
        "start_velocity_m_per_s": (0.0, 0.0),
        "start_position_sd_m": (1e-3, 1e-3),
        "start_velocity_sd_m_per_s": (1e-6, 1e-6),
    }
    scene = polar(target=target, position_m=(0.0, 0.0), detection_probability=1.0)
    batch = draw_scenes(scene, numbers_of(SEED), 0, 50)
    assert batch.scans.detections[:, 0].min() >= 0.0
    share = batch.truth.outside.mean()
    assert abs(share - 0.5) < 4.5 * 0.5 / math.sqrt(batch.truth.outside.size)


def test_room_for_detections_grows_where_a_scene_has_more_than_expected(monkeypatch):
    """The room first set aside is made far too small; the scenes drawn are the same."""
    expected = draw_scenes(plane(), numbers_of(SEED), 0, 5)
    monkeypatch.setattr(PositionSensor, "region_volume", lambda self: 1.0)
    batch = draw_scenes(plane(), numbers_of(SEED), 0, 5)
    assert len(batch.scans.detections) > 1000
    for found, wanted in zip(batch.scans[1:4], expected.scans[1:4], strict=True):
        np.testing.assert_array_equal(found, wanted)
