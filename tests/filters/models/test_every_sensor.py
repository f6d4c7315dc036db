"""Every kind of sensor: what it measures, its derivative, its noise, its place and its units."""

import math

import numpy as np
import pytest
from stonesoup.models.measurement.nonlinear import (
    CartesianToBearingRangeRate2D,
    CartesianToElevationBearingRange,
)
from stonesoup.types.state import State

from filters.measurement_difference import difference
from filters.models.record import BadValue
from filters.models.sensor import SENSORS
from filters.models.sensor.noise import noise_over_range

KEYS = {
    "position": {"noise_sd_m": 2.0, "region_m": ((-500.0, 500.0), (-400.0, 300.0))},
    "range": {"noise_sd_range_m": 3.0, "region_range_m": (0.0, 900.0)},
    "bearing": {"noise_sd_bearing_deg": 1.5},
    "range-bearing": {
        "noise_sd_range_m": 3.0,
        "noise_sd_bearing_deg": 1.5,
        "region_range_m": (0.0, 900.0),
    },
    "range-bearing-range-rate": {
        "noise_sd_range_m": 3.0,
        "noise_sd_bearing_deg": 1.5,
        "noise_sd_range_rate_m_per_s": 0.5,
        "region_range_m": (0.0, 900.0),
        "region_range_rate_m_per_s": (-60.0, 60.0),
    },
    "range-azimuth-elevation": {
        "noise_sd_range_m": 3.0,
        "noise_sd_azimuth_deg": 1.5,
        "noise_sd_elevation_deg": 0.7,
        "region_range_m": (0.0, 900.0),
    },
}
KINDS = {record.model_fields["kind"].annotation.__args__[0]: record for record in SENSORS}
TIMES = np.arange(6) * 2.0


def sensor(kind, **keys):
    given = {"kind": kind, "detection_probability": 0.9, "clutter_per_scan": 3.0}
    return KINDS[kind](**given | KEYS[kind] | keys)


def measured(record, site, state):
    out = np.full(record.measurement_size, np.nan)
    record.measure(np.zeros(1), np.asarray(site, float), np.asarray(state, float), out)
    return out


def jacobian(record, site, state):
    out = np.full((record.measurement_size, len(state)), np.nan)
    record.jacobian(np.zeros(1), np.asarray(site, float), np.asarray(state, float), out)
    return out


def derivative(record, site, state):
    """Central differences of two step sizes combined, angles the short way round."""
    columns = []
    for entry in range(len(state)):

        def slope(step, entry=entry):
            change = np.empty(record.measurement_size)
            offset = step * np.eye(len(state))[entry]
            high, low = (measured(record, site, state + sign * offset) for sign in (1, -1))
            difference(record.measurement_size, record.periods(), high, low, change)
            return change / (2 * step)

        columns.append((4 * slope(0.05) - slope(0.1)) / 3)
    return np.array(columns).T


def test_every_kind_is_tested_here():
    assert set(KINDS) == set(KEYS)


@pytest.mark.parametrize("orders", [2, 3])
@pytest.mark.parametrize("kind", KEYS)
def test_the_jacobian_is_the_derivative_of_the_measurement(kind, orders):
    """40 states around moving sites, position and velocity, with acceleration behind or not."""
    record = sensor(kind)
    rng = np.random.default_rng(5)
    for _ in range(40):
        state = rng.uniform(-300, 300, orders * record.axes)
        state[record.axes :] /= 20
        site = rng.uniform(-100, 100, 2 * record.axes)
        expected = derivative(record, site, state)
        np.testing.assert_allclose(jacobian(record, site, state), expected, rtol=1e-6, atol=1e-8)


@pytest.mark.parametrize("axes", [1, 2, 3])
def test_range_is_a_distance_along_any_number_of_axes(axes):
    record = sensor("range", position_m=(1.0,) * axes)
    assert record.axes == axes
    state = np.arange(2.0, 2 + 2 * axes)
    site = record.sites(axes, TIMES)[0]
    expected = np.linalg.norm(state[:axes] - 1.0)
    np.testing.assert_allclose(measured(record, site, state), [expected])


def test_range_alone_and_bearing_alone_are_the_parts_of_range_and_bearing():
    site, state = [3.0, -4.0, 1.0, 1.0], [-20.0, 15.0, 2.0, 3.0]
    both = measured(sensor("range-bearing"), site, state)
    assert measured(sensor("range"), site, state) == both[:1]
    assert measured(sensor("bearing"), site, state) == both[1:]


def test_range_rate_equals_the_reference_librarys():
    """Source: stonesoup 1.9.1, whose rate is that of a moving sensor too."""
    rng = np.random.default_rng(8)
    for _ in range(20):
        state, site = rng.uniform(-100, 100, 4), rng.uniform(-50, 50, 4)
        library = CartesianToBearingRangeRate2D(
            ndim_state=4,
            mapping=(0, 1),
            velocity_mapping=(2, 3),
            noise_covar=np.eye(3),
            translation_offset=site[:2, None],
            velocity=site[2:, None],
        )
        bearing, distance, rate = np.ravel(library.function(State(state[:, None]))).astype(float)
        found = measured(sensor("range-bearing-range-rate"), site, state)
        np.testing.assert_allclose(found[[0, 2]], [distance, rate], rtol=1e-10, atol=1e-10)
        assert abs(math.remainder(found[1] - bearing, 2 * math.pi)) < 1e-10


def test_azimuth_and_elevation_equal_the_reference_librarys():
    """Source: stonesoup 1.9.1."""
    rng = np.random.default_rng(9)
    for _ in range(20):
        state, site = rng.uniform(-100, 100, 6), rng.uniform(-50, 50, 6)
        library = CartesianToElevationBearingRange(
            ndim_state=6,
            mapping=(0, 1, 2),
            noise_covar=np.eye(3),
            translation_offset=site[:3, None],
        )
        elevation, bearing, distance = np.ravel(library.function(State(state[:, None])))
        found = measured(sensor("range-azimuth-elevation"), site, state)
        np.testing.assert_allclose(found[[0, 2]], [distance, float(elevation)], atol=1e-10)
        assert abs(math.remainder(found[1] - float(bearing), 2 * math.pi)) < 1e-10


# Units, region and noise


@pytest.mark.parametrize("kind", KEYS)
def test_components_are_in_metres_and_radians_inside(kind):
    record = sensor(kind)
    degree = math.radians(1.0)
    units = {
        "position": [1, 1],
        "range": [1],
        "bearing": [degree],
        "range-bearing": [1, degree],
        "range-bearing-range-rate": [1, degree, 1],
        "range-azimuth-elevation": [1, degree, degree],
    }[kind]
    stated = [value for key, value in KEYS[kind].items() if key.startswith("noise")]
    deviations = np.array(stated * (2 if kind == "position" else 1)) * units
    model = record.sensor_model(TIMES)
    np.testing.assert_array_equal(record.units(), units)
    np.testing.assert_allclose(model.parameters[: len(units)], deviations)
    out = np.full((len(units),) * 2, np.nan)
    model.noise(model.parameters, np.zeros(2 * record.axes), np.ones(2 * record.axes), out)
    np.testing.assert_allclose(out, np.diag(deviations**2))
    assert model.same_noise
    wraps = [unit == degree for unit in units]
    if kind == "range-azimuth-elevation":
        wraps[2] = False  # from pole to pole
    np.testing.assert_array_equal(model.periods, np.where(wraps, 2 * math.pi, 0.0))
    np.testing.assert_allclose(model.region_centre - model.region_half_width, record.region()[:, 0])
    np.testing.assert_allclose(model.region_centre + model.region_half_width, record.region()[:, 1])


@pytest.mark.parametrize(
    ("kind", "key", "volume"),
    [
        ("range", "clutter_density_per_m", 900.0),
        ("bearing", "clutter_density_per_deg", 360.0),
        ("range-bearing", "clutter_density_per_m_deg", 900.0 * 360.0),
        (
            "range-bearing-range-rate",
            "clutter_density_per_m_deg_m_per_s",
            900.0 * 360.0 * 120.0,
        ),
        ("range-azimuth-elevation", "clutter_density_per_m_deg2", 900.0 * 360.0 * 180.0),
        ("position", "clutter_density_per_m2", 1000.0 * 700.0),
    ],
)
def test_a_density_times_the_region_in_units_of_the_study_is_the_number_a_scan(kind, key, volume):
    record = sensor(kind, clutter_per_scan=None, **{key: 1e-5})
    found = record.clutter_intensity() * record.region_volume()
    np.testing.assert_allclose(found, 1e-5 * volume)


FACTORS = ((100.0, 1.0), (300.0, 2.0), (500.0, 6.0))


@pytest.mark.parametrize("kind", KEYS)
def test_noise_grows_with_range_by_its_table(kind):
    """The factor is numpy.interp's at the distance from the site, on every standard deviation."""
    model = sensor(kind, noise_factor_over_range=FACTORS).sensor_model(TIMES)
    plain = sensor(kind).sensor_model(TIMES)
    assert not model.same_noise
    axes = model.sites.shape[1] // 2
    rng = np.random.default_rng(2)
    for distance in (0.0, 50.0, 100.0, 234.0, 300.0, 421.0, 500.0, 5000.0):
        site = rng.uniform(-10, 10, 2 * axes)
        direction = rng.normal(size=axes)
        state = np.zeros(2 * axes)
        state[:axes] = site[:axes] + distance * direction / np.linalg.norm(direction)
        found, at_any_range = (np.empty((len(plain.periods),) * 2) for _ in range(2))
        noise_over_range(model.parameters, site, state, found)
        plain.noise(plain.parameters, site, state, at_any_range)
        factor = np.interp(distance, *np.transpose(FACTORS))
        np.testing.assert_allclose(found, factor**2 * at_any_range, rtol=1e-12)


# Places


def test_a_sensor_stands_at_the_origin_unless_it_is_placed():
    np.testing.assert_array_equal(sensor("bearing").sites(2, TIMES), np.zeros((1, 4)))
    np.testing.assert_array_equal(
        sensor("bearing", position_m=(5.0, 6.0)).sites(2, TIMES), [[5.0, 6.0, 0.0, 0.0]]
    )


def test_a_moving_sensor_is_at_its_position_at_the_first_scan():
    record = sensor("bearing", position_m=(5.0, 6.0), velocity_m_per_s=(1.0, -2.0))
    times = np.array([10.0, 10.5, 14.0])
    expected = [[5.0, 6.0, 1.0, -2.0], [5.5, 5.0, 1.0, -2.0], [9.0, -2.0, 1.0, -2.0]]
    np.testing.assert_allclose(record.sites(2, times), expected)


def waypoints(*rows):
    return tuple({"time_s": time, "position_m": tuple(place)} for time, *place in rows)


def test_a_path_is_straight_between_its_waypoints():
    """Positions by numpy.interp; the velocity is that of the leg that begins at a waypoint."""
    rows = [(-1.0, 0.0, 0.0), (4.0, 50.0, 0.0), (6.0, 50.0, 30.0), (11.0, 0.0, 30.0)]
    record = sensor("bearing", path=waypoints(*rows))
    times = np.array([0.0, 1.7, 4.0, 5.0, 6.0, 9.3, 11.0])
    sites = record.sites(2, times)
    when, east, north = np.transpose(rows)
    np.testing.assert_allclose(sites[:, 0], np.interp(times, when, east), atol=1e-12)
    np.testing.assert_allclose(sites[:, 1], np.interp(times, when, north), atol=1e-12)
    legs = [[10.0, 0.0], [10.0, 0.0], [0.0, 15.0], [0.0, 15.0], *[[-10.0, 0.0]] * 3]
    np.testing.assert_allclose(sites[:, 2:], legs)


def test_sites_take_turns_scan_by_scan():
    record = sensor("range", sites_m=((0.0, 1.0), (2.0, 3.0), (4.0, 5.0)))
    sites = record.sites(2, np.arange(5.0))
    np.testing.assert_array_equal(sites[:, 0], [0.0, 2.0, 4.0, 0.0, 2.0])
    np.testing.assert_array_equal(sites[:, 2:], 0.0)
    assert sensor("range", sites_m=((7.0, 8.0),)).sites(2, np.arange(5.0)).shape == (1, 4)


def test_a_path_must_cover_all_scans():
    record = sensor("bearing", path=waypoints((0.0, 0.0, 0.0), (10.0, 1.0, 1.0)))
    record.check_times(np.array([0.0, 10.0]))
    for times in ([-0.1, 5.0], [0.0, 10.1]):
        with pytest.raises(BadValue, match="must reach from the first scan"):
            record.check_times(np.array(times))
