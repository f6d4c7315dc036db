"""Clutter drawn from maps: counts and places pass goodness-of-fit tests, and conditions nest."""

import math

import numpy as np
import pytest
from scipy.integrate import dblquad, quad
from scipy.stats import chi2, chisquare, kstest, norm, poisson

from filters.hypotheses import NOT_DETECTED
from filters.random_numbers import numbers_of
from harness.scene.simulate import draw_scenes
from harness.study.schema import Scene

SEED = 20260303
TARGET = {
    "motion": "nearly-constant-velocity",
    "acceleration_psd_m2_per_s3": 0.1,
    "start_position_m": (250.0, 50.0),
    "start_velocity_m_per_s": (3.0, -2.0),
    "start_position_sd_m": (8.0, 5.0),
    "start_velocity_sd_m_per_s": (0.5, 1.0),
}
POSITION = {
    "kind": "position",
    "noise_sd_m": 4.0,
    "detection_probability": 0.8,
    "region_m": ((-300.0, 500.0), (-200.0, 200.0)),
    "position_m": (20.0, -30.0),
}
POLAR = {
    "kind": "range-bearing",
    "noise_sd_range_m": 5.0,
    "noise_sd_bearing_deg": 2.0,
    "detection_probability": 0.8,
    "region_range_m": (50.0, 850.0),
}
ROWS = ((100.0, 3e-4), (250.0, 3e-5), (400.0, 2e-4), (700.0, 0.0))
PATCHES = (
    {"centre": (0.0, 20.0), "sd": (40.0, 25.0), "expected_number": 6.0},
    {"centre": (480.0, -150.0), "sd": (60.0, 30.0), "expected_number": 8.0},
)


def scene(sensor, clutter, scans=20, **unmodelled):
    return Scene(
        scans=scans,
        scan_interval_s=1.0,
        target=TARGET,
        sensor=sensor | {"clutter": clutter},
        unmodelled=unmodelled,
    )


def clutter_of(batch):
    """False detections of each scan of each trial."""
    found = []
    for trial in range(len(batch.scans.origins)):
        for k, origin in enumerate(batch.scans.origins[trial]):
            first, end = batch.scans.offsets[trial, k : k + 2]
            scan = batch.scans.detections[first:end]
            found.append(np.delete(scan, origin, axis=0) if origin != NOT_DETECTED else scan)
    return found


def drawn(stated, trials=150):
    return clutter_of(draw_scenes(stated, numbers_of(SEED), 0, trials))


def table_in(rows, factor=1.0):
    return {
        "kind": "range-table",
        "density_over_range": tuple((place, factor * value) for place, value in rows),
    }


def patches_of(factor=1.0, background=3.0):
    patches = tuple(p | {"expected_number": factor * p["expected_number"]} for p in PATCHES)
    return {"kind": "patches", "expected_number": background, "patches": patches}


def assert_poisson(scans, rate):
    """Dispersion and counts of the scans at level 1e-5 each, and the mean within 4.5 deviations."""
    counts = np.array([len(scan) for scan in scans])
    assert abs(counts.mean() - rate) < 4.5 * math.sqrt(rate / len(counts))
    index = np.sum((counts - counts.mean()) ** 2) / counts.mean()
    low, high = chi2.ppf([5e-6, 1 - 5e-6], len(counts) - 1)
    assert low < index < high
    edges = np.unique(poisson.ppf(np.linspace(0.02, 0.98, 15), rate))
    expected = len(counts) * np.diff(poisson.cdf(edges, rate), prepend=0.0, append=1.0)
    observed = np.histogram(counts, np.concatenate([[-1], edges + 0.5, [np.inf]]))[0]
    expected[-1] = len(counts) * poisson.sf(edges[-1], rate)
    assert chisquare(observed, expected).pvalue > 1e-5


def assert_spread_as(points, intensity, region, cells=(8, 6)):
    """Counts in cells of the region against the integral of the intensity, at level 1e-5."""
    edges = [np.linspace(*ends, count + 1) for ends, count in zip(region, cells, strict=True)]
    observed, _, _ = np.histogram2d(*points.T, edges)
    expected = np.array(
        [
            [
                dblquad(lambda y, x: intensity(x, y), *edges[0][i : i + 2], *edges[1][j : j + 2],
                        epsabs=1e-6, epsrel=1e-4)[0]
                for j in range(cells[1])
            ]
            for i in range(cells[0])
        ]
    )  # fmt: skip
    expected *= len(points) / expected.sum()
    plenty = expected > 8
    observed = [*observed[plenty], observed[~plenty].sum()]
    expected = [*expected[plenty], max(expected[~plenty].sum(), 1e-9)]
    assert chisquare(observed, expected, sum_check=False).pvalue > 1e-5


# Counts and places


def test_clutter_by_a_table_against_measured_range():
    """3,000 scans: Poisson counts of the table's integral; ranges by their law, bearings even."""
    scans = drawn(scene(POLAR, table_in(ROWS)))

    def density(distance):
        return np.interp(distance, *np.transpose(ROWS))

    breaks = [100.0, 250.0, 400.0, 700.0]
    rate = 360.0 * quad(density, 50.0, 850.0, points=breaks)[0]
    assert_poisson(scans, rate)
    points = np.concatenate(scans)
    grid = np.linspace(50.0, 850.0, 8001)
    law = np.concatenate([[0.0], np.cumsum((density(grid)[1:] + density(grid)[:-1]) / 2)])
    assert kstest(points[:, 0], lambda r: np.interp(r, grid, law / law[-1])).pvalue > 1e-5
    assert kstest(points[:, 1], "uniform", args=(-math.pi, 2 * math.pi)).pvalue > 1e-5
    assert abs(np.corrcoef(points.T)[0, 1]) < 4.5 / math.sqrt(len(points))


def test_clutter_by_a_table_against_the_distance_of_positions():
    """3,000 scans: Poisson counts of the integral over the region; 48 cells of it."""
    stated = scene(POSITION, table_in(ROWS))
    scans = drawn(stated)

    def density(x, y):
        return np.interp(math.hypot(x - 20.0, y + 30.0), *np.transpose(ROWS))

    grid = [np.linspace(*ends, 801)[:-1] + np.diff(ends) / 1600 for ends in POSITION["region_m"]]
    east, north = np.meshgrid(*grid, indexing="ij")
    distances = np.hypot(east - 20.0, north + 30.0)
    rate = np.interp(distances, *np.transpose(ROWS)).mean() * 800.0 * 400.0
    assert_poisson(scans, rate)
    assert_spread_as(np.concatenate(scans), density, POSITION["region_m"])


def test_clutter_in_patches():
    """3,000 scans: counts of the part within the region; 48 cells against the sum of the bells."""
    scans = drawn(scene(POSITION, patches_of()))
    region = POSITION["region_m"]

    def share_inside(patch):
        return np.prod(
            [
                np.diff(norm.cdf(ends, centre, sd))[0]
                for ends, centre, sd in zip(region, patch["centre"], patch["sd"], strict=True)
            ]
        )

    rate = 3.0 + sum(patch["expected_number"] * share_inside(patch) for patch in PATCHES)
    assert_poisson(scans, rate)

    def density(x, y):
        return 3.0 / (800.0 * 400.0) + sum(
            p["expected_number"]
            * norm.pdf(x, p["centre"][0], p["sd"][0])
            * norm.pdf(y, p["centre"][1], p["sd"][1])
            for p in PATCHES
        )

    assert_spread_as(np.concatenate(scans), density, region)


def test_a_uniform_map_draws_the_very_clutter_of_a_density():
    density = scene(POSITION, {"kind": "uniform", "density": 1e-4})
    keys = density.model_dump()
    keys["sensor"] |= {"clutter": None, "clutter_density_per_m2": 1e-4}
    by_map, by_key = (draw_scenes(s, numbers_of(SEED), 0, 5) for s in (density, Scene(**keys)))
    np.testing.assert_array_equal(by_map.scans.detections, by_key.scans.detections)


def test_a_patch_of_bearings_is_drawn_around_the_cut():
    """Bearings of a patch at 175 degrees: a wrapped normal law, at level 1e-5."""
    patches = ({"centre": (400.0, 175.0), "sd": (30.0, 20.0), "expected_number": 5.0},)
    scans = drawn(scene(POLAR, {"kind": "patches", "expected_number": 0.0, "patches": patches}))
    bearings = np.degrees(np.concatenate(scans)[:, 1])
    assert np.abs(bearings).max() <= 180.0
    offsets = (bearings - 175.0 + 180.0) % 360.0 - 180.0
    assert kstest(offsets, "norm", args=(0.0, 20.0)).pvalue > 1e-5
    assert_poisson(scans, 5.0)


@pytest.mark.parametrize(("sensor", "clutter"), [(POLAR, table_in(ROWS)), (POSITION, patches_of())])
def test_the_place_in_a_scan_says_nothing_of_where_clutter_comes_from(sensor, clutter):
    """First and last false detections of 3,000 scans have the same law of their first component."""
    scans = [scan for scan in drawn(scene(sensor, clutter)) if len(scan) > 1]
    first, last = (np.array([scan[place, 0] for scan in scans]) for place in (0, -1))
    assert kstest(first, last).pvalue > 1e-5
    middle = np.median(np.concatenate([first, last]))
    assert abs(np.mean(first < middle) - np.mean(last < middle)) < 4.5 / math.sqrt(len(scans))


# Nesting


def as_set(points):
    return {tuple(point) for point in points}


def assert_nested(sparse, dense):
    """Every false detection of the sparser scenes is in the denser ones, to the bit."""
    few, many = (drawn(stated, 20) for stated in (sparse, dense))
    assert sum(map(len, few)) < sum(map(len, many))
    for ours, theirs in zip(few, many, strict=True):
        assert as_set(ours) <= as_set(theirs)


@pytest.mark.parametrize("sensor", [POSITION, POLAR])
def test_a_denser_table_contains_a_sparser_one(sensor):
    """All of it denser, or one point of it only."""
    assert_nested(scene(sensor, table_in(ROWS)), scene(sensor, table_in(ROWS, 2.7)))
    more = ((100.0, 3e-4), (250.0, 9e-5), (400.0, 2e-4), (700.0, 0.0))
    assert_nested(scene(sensor, table_in(ROWS)), scene(sensor, table_in(more)))


def test_denser_patches_contain_sparser_ones():
    """Patches and background each apart, and from none."""
    assert_nested(scene(POSITION, patches_of()), scene(POSITION, patches_of(1.5)))
    for fewer, more in ((0.0, 0.5), (3.0, 9.0)):
        assert_nested(
            scene(POSITION, patches_of(background=fewer)),
            scene(POSITION, patches_of(background=more)),
        )


def test_patches_add_to_the_clutter_of_their_background():
    alone = scene(POSITION, {"kind": "uniform", "expected_number": 3.0})
    assert_nested(alone, scene(POSITION, patches_of()))


def test_clutter_of_maps_does_not_move_the_target_or_its_detections():
    sparse, dense = (
        draw_scenes(scene(POSITION, patches_of(factor)), numbers_of(SEED), 0, 10)
        for factor in (0.2, 3.0)
    )
    np.testing.assert_array_equal(sparse.truth.states, dense.truth.states)
    np.testing.assert_array_equal(sparse.scans.origins >= 0, dense.scans.origins >= 0)


# Cost


def test_at_most_three_points_are_dropped_for_one_that_is_kept(monkeypatch):
    """Narrow patches and rings far above their background: what is expected to be drawn at all."""
    from harness.scene import detections

    asked = []

    def watched(models, hidden):
        asked.append(most(models, hidden))
        return asked[-1]

    most = detections._most_clutter
    monkeypatch.setattr(detections, "_most_clutter", watched)
    narrow = ({"centre": (0.0, 20.0), "sd": (0.5, 0.5), "expected_number": 20.0},)
    near = ((40.0, 2e-3), (60.0, 1e-5))
    for sensor, clutter in (
        (POSITION, {"kind": "patches", "expected_number": 1.0, "patches": narrow}),
        (POSITION, table_in(near)),
        (POLAR, table_in(near)),
    ):
        scans = drawn(scene(sensor, clutter), 30)
        kept = np.mean([len(scan) for scan in scans])
        assert asked.pop() < 4.0 * kept
