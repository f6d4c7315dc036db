"""Clutter maps: intensities against formulas of their own, and the boxes that bound them."""

import math

import numpy as np
import pytest
from compiled_models import values_at
from scipy.integrate import dblquad
from scipy.stats import multivariate_normal

from filters.models.clutter import PatchyClutter, RangeTableClutter, UniformClutter
from filters.models.clutter.clutter_map import MeasurementSpace

DEGREE = math.radians(1.0)
PLANE = MeasurementSpace(
    np.array([[-300.0, 500.0], [-200.0, 200.0]]), np.ones(2), np.zeros(2), None, True
)
POLAR = MeasurementSpace(
    np.array([[50.0, 850.0], [-math.pi, math.pi]]),
    np.array([1.0, DEGREE]),
    np.array([0.0, 2 * math.pi]),
    0,
    False,
)
SITE = np.array([[20.0, -30.0, 0.0, 0.0]])
ROWS = ((100.0, 4e-4), (250.0, 1e-4), (400.0, 3e-4), (700.0, 0.0))


def points_in(space, count=400, seed=1):
    low, high = space.region.T
    return np.random.default_rng(seed).uniform(low, high, (count, space.size))


def bound_at(model, points):
    """Bound of the box around each point, of which there must be one; none is on an edge."""
    m = points.shape[1]
    centre, half_width, bound = np.split(model.boxes, [m, 2 * m], axis=1)
    inside = np.all(np.abs(points[:, None] - centre) <= half_width, axis=2)
    np.testing.assert_array_equal(inside.sum(axis=1), 1)
    return bound[inside.argmax(axis=1), 0]


@pytest.mark.parametrize("space", [PLANE, POLAR])
def test_a_uniform_map_is_a_number_over_the_region_or_a_density(space):
    by_number = UniformClutter(kind="uniform", expected_number=12.0).model(space, SITE)
    np.testing.assert_allclose(values_at(by_number, SITE[0], points_in(space)), 12 / space.volume)
    by_density = UniformClutter(kind="uniform", density=2e-4).model(space, SITE)
    np.testing.assert_allclose(
        values_at(by_density, SITE[0], points_in(space)), 2e-4 / np.prod(space.units)
    )
    np.testing.assert_allclose(bound_at(by_number, points_in(space)), 12 / space.volume)


def test_a_table_against_measured_range_is_linear_between_its_points():
    """Source: numpy.interp; per m and degree in the table, per m and rad inside."""
    model = RangeTableClutter(kind="range-table", density_over_range=ROWS).model(POLAR, SITE)
    points = points_in(POLAR)
    expected = np.interp(points[:, 0], *np.transpose(ROWS)) / DEGREE
    np.testing.assert_allclose(values_at(model, SITE[0], points), expected, rtol=1e-12)


def test_a_table_against_the_distance_of_a_measured_position():
    model = RangeTableClutter(kind="range-table", density_over_range=ROWS).model(PLANE, SITE)
    points = points_in(PLANE)
    distances = np.linalg.norm(points - SITE[0, :2], axis=1)
    expected = np.interp(distances, *np.transpose(ROWS))
    np.testing.assert_allclose(values_at(model, SITE[0], points), expected, rtol=1e-12)


@pytest.mark.parametrize("space", [PLANE, POLAR])
def test_boxes_bound_the_intensity_and_do_not_waste_much(space):
    """At most three points are drawn for one kept, in the whole region."""
    model = RangeTableClutter(kind="range-table", density_over_range=ROWS).model(space, SITE)
    points = points_in(space, 4000)
    intensity, bound = values_at(model, SITE[0], points), bound_at(model, points)
    assert np.all(intensity <= bound)
    assert bound.mean() < 3.0 * intensity.mean()


def test_boxes_hold_wherever_the_sensor_comes():
    sites = np.array([[x, 0.5 * x, 1.0, 1.0] for x in np.linspace(-200, 400, 9)])
    model = RangeTableClutter(kind="range-table", density_over_range=ROWS).model(PLANE, sites)
    points = points_in(PLANE, 1000)
    for site in sites:
        assert np.all(values_at(model, site, points) <= bound_at(model, points))


@pytest.mark.parametrize("axes", [1, 3])
def test_boxes_of_positions_fill_the_region_along_one_axis_and_three(axes):
    region = np.array([[-300.0, 500.0], [-200.0, 200.0], [0.0, 90.0]])[:axes]
    space = MeasurementSpace(region, np.ones(axes), np.zeros(axes), None, True)
    site = np.zeros((1, 2 * axes))
    model = RangeTableClutter(kind="range-table", density_over_range=ROWS).model(space, site)
    points = points_in(space)
    assert np.all(values_at(model, site[0], points) <= bound_at(model, points))
    np.testing.assert_allclose(np.prod(2 * model.boxes[:, axes : 2 * axes], axis=1).sum(),
                               space.volume)  # fmt: skip


PATCHES = (
    {"centre": (0.0, 20.0), "sd": (40.0, 25.0), "expected_number": 6.0},
    {"centre": (300.0, -100.0), "sd": (15.0, 30.0), "peak_density": 2e-3},
)


def patchy(background=3.0, patches=PATCHES):
    return PatchyClutter(kind="patches", expected_number=background, patches=patches)


def test_patches_are_gaussian_densities_on_a_background():
    """Source: scipy.stats.multivariate_normal; the second's number from its peak."""
    model = patchy().model(PLANE, SITE)
    points = points_in(PLANE)
    numbers = [6.0, 2e-3 * 2 * math.pi * 15.0 * 30.0]
    expected = 3.0 / PLANE.volume + sum(
        number
        * multivariate_normal(patch["centre"], np.square(patch["sd"]) * np.eye(2)).pdf(points)
        for number, patch in zip(numbers, PATCHES, strict=True)
    )
    np.testing.assert_allclose(values_at(model, SITE[0], points), expected, rtol=1e-12)
    np.testing.assert_allclose(model.bumps[:, 4], numbers)
    np.testing.assert_array_equal(model.boxes[0, -1], 3.0 / PLANE.volume)


def test_a_patch_of_bearings_goes_around_the_cut():
    """50 degrees wide at 170: densities and number are those of a wrapped normal distribution."""
    patches = ({"centre": (400.0, 170.0), "sd": (60.0, 50.0), "expected_number": 9.0},)
    model = patchy(0.0, patches).model(POLAR, SITE)

    def intensity(bearing, distance):
        return values_at(model, SITE[0], [[distance, bearing]])[0]

    points = points_in(POLAR, 50)
    turns = 2 * math.pi * np.arange(-5, 6)
    offsets = points[:, 1:] - 170.0 * DEGREE + turns
    across = np.exp(-0.5 * (offsets / (50 * DEGREE)) ** 2).sum(axis=1)
    along = np.exp(-0.5 * ((points[:, 0] - 400.0) / 60.0) ** 2)
    expected = 9.0 * across * along / (2 * math.pi * 60.0 * 50.0 * DEGREE)
    np.testing.assert_allclose(values_at(model, SITE[0], points), expected, rtol=1e-10)
    total, _ = dblquad(intensity, 50.0, 850.0, -math.pi, math.pi, epsabs=1e-3)
    assert abs(total - 9.0) < 2e-3
