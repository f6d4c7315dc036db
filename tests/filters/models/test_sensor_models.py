"""Sensors: what they measure, its derivative, and angles that wrap."""

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from stonesoup.models.measurement.nonlinear import CartesianToBearingRange
from stonesoup.types.state import State

from filters.measurement_difference import difference
from filters.models.sensor import PositionSensor, RangeBearingSensor
from filters.models.sensor.noise import independent_noise
from filters.models.sensor.position import position_jacobian, position_of
from filters.models.sensor.range_bearing import range_and_bearing, range_and_bearing_jacobian


def measured(function, site, state, m=2, parameters=(1.0, 1.0)):
    out = np.full(m, np.nan)
    function(np.asarray(parameters, float), np.asarray(site, float), np.asarray(state, float), out)
    return out


def matrix(function, site, state, shape, parameters=(1.0, 1.0)):
    out = np.full(shape, np.nan)
    function(np.asarray(parameters, float), np.asarray(site, float), np.asarray(state, float), out)
    return out


def range_bearing(**keys):
    given = {
        "kind": "range-bearing",
        "noise_sd_range_m": 10.0,
        "noise_sd_bearing_deg": 1.0,
        "region_range_m": (0.0, 1000.0),
        "detection_probability": 0.9,
        "clutter_per_scan": 3.0,
    }
    return RangeBearingSensor(**given | keys)


places = st.floats(-1e4, 1e4).map(lambda x: round(x, 3))


@settings(derandomize=True, deadline=None)
@given(places, places, places, places)
def test_range_and_bearing_are_polar_coordinates_about_the_site(x, y, site_x, site_y):
    """Source: the reference library's bearing-range model (stonesoup 1.9.1), in its other order."""
    assume(math.hypot(x - site_x, y - site_y) > 1.0)
    state, site = [x, y, 3.0, -4.0], [site_x, site_y, 0.0, 0.0]
    found = measured(range_and_bearing, site, state)
    east, north = found[0] * math.cos(found[1]), found[0] * math.sin(found[1])
    np.testing.assert_allclose([east, north], [x - site_x, y - site_y], atol=1e-8)

    library = CartesianToBearingRange(
        ndim_state=4,
        mapping=(0, 1),
        noise_covar=np.eye(2),
        translation_offset=np.array([[site_x], [site_y]]),
    )
    bearing, distance = np.ravel(library.function(State(np.reshape(state, (4, 1)))))
    np.testing.assert_allclose(found[0], distance, rtol=1e-12)
    turn = (found[1] - float(bearing)) / (2 * math.pi)
    assert abs(turn - round(turn)) < 1e-12


@settings(derandomize=True, deadline=None)
@given(places, places, places, places)
def test_the_jacobian_of_range_and_bearing_is_their_derivative(x, y, site_x, site_y):
    """Central differences of fourth order, on both sides of the cut as well."""
    distance = math.hypot(x - site_x, y - site_y)
    assume(distance > 1.0)
    site, state = [site_x, site_y, 0.0, 0.0], np.array([x, y, 3.0, -4.0])
    found = matrix(range_and_bearing_jacobian, site, state, (2, 4))
    step = 1e-3 * distance
    for entry in range(4):
        unit = np.eye(4)[entry] * step

        def slope(factor, unit=unit):
            change = np.empty(2)
            high = measured(range_and_bearing, site, state + factor * unit)
            low = measured(range_and_bearing, site, state - factor * unit)
            difference(2, np.array([0.0, 2 * math.pi]), high, low, change)
            return change / (2 * factor * step)

        expected = (4 * slope(1.0) - slope(2.0)) / 3
        np.testing.assert_allclose(found[:, entry], expected, rtol=1e-6, atol=1e-8)


@pytest.mark.parametrize("axes", [1, 2, 3])
def test_a_position_sensor_measures_the_leading_entries_of_the_state(axes):
    n = 3 * axes
    state, site = np.arange(1.0, n + 1), np.zeros(2 * axes)
    np.testing.assert_array_equal(measured(position_of, site, state, axes), state[:axes])
    H = matrix(position_jacobian, site, state, (axes, n))
    np.testing.assert_array_equal(H, np.eye(axes, n))
    sensor = PositionSensor(
        kind="position",
        noise_sd_m=3.0,
        detection_probability=1.0,
        clutter_per_scan=0.0,
        region_m=((-10.0, 30.0),) * axes,
    )
    parameters = sensor.sensor_model(np.zeros(1)).parameters
    R = matrix(independent_noise, site, state, (axes, axes), parameters)
    np.testing.assert_array_equal(R, 9.0 * np.eye(axes))


def test_noise_of_range_and_bearing_is_in_metres_and_radians():
    model = range_bearing().sensor_model(np.zeros(1))
    R = matrix(independent_noise, np.zeros(4), np.ones(4), (2, 2), model.parameters)
    np.testing.assert_allclose(R, np.diag([100.0, math.radians(1.0) ** 2]))
    np.testing.assert_array_equal(model.periods, [0.0, 2 * math.pi])


@settings(derandomize=True, deadline=None)
@given(st.floats(-math.pi, math.pi), st.floats(-math.pi, math.pi), st.floats(-1e3, 1e3))
def test_differences_of_angles_go_the_short_way_round(a, b, offset):
    out = np.empty(2)
    difference(2, np.array([0.0, 2 * math.pi]), np.array([offset, a]), np.array([1.0, b]), out)
    assert out[0] == offset - 1.0
    assert abs(out[1]) <= math.pi * (1 + 1e-15)
    assert math.isclose(math.cos(out[1]), math.cos(a - b), abs_tol=1e-12)
    assert math.isclose(math.sin(out[1]), math.sin(a - b), abs_tol=1e-12)


def test_clutter_densities_are_stated_in_units_of_the_study():
    """Per metre and degree in a study, per metre and radian in the model; or a number a scan."""
    by_density = range_bearing(clutter_per_scan=None, clutter_density_per_m_deg=1e-5)
    volume_m_deg = 1000.0 * 360.0
    np.testing.assert_allclose(
        by_density.clutter_intensity() * by_density.region_volume(), 1e-5 * volume_m_deg
    )
    by_number = range_bearing(clutter_per_scan=7.0)
    np.testing.assert_allclose(by_number.clutter_intensity() * by_number.region_volume(), 7.0)
    plane = PositionSensor(
        kind="position",
        noise_sd_m=1.0,
        detection_probability=1.0,
        region_m=((-10.0, 30.0), (5.0, 10.0)),
        clutter_density_per_m2=0.02,
    )
    np.testing.assert_allclose(plane.region_volume(), 200.0)
    assert plane.clutter_intensity() == 0.02
