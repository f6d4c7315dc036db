"""Expected values and covariances that sigma points form, against integration of the tests' own."""

import math

import numpy as np
import pytest
from one_scan import rows_of, world_of
from plain_linearisation import (
    grid,
    hermite,
    regression,
    regression_over_leading,
    updated,
)

from filters.linearisation.rules import cubature_rule, gauss_hermite_rule, unscented_rule
from filters.models.sensor import (
    BearingSensor,
    RangeAzimuthElevationSensor,
    RangeBearingRangeRateSensor,
    RangeBearingSensor,
)

TURN = 2 * math.pi
PERIODS = (0.0, TURN)
PD, CLUTTER, SITE = 0.8, 0.3, (20.0, -30.0)
ALL_ROUND = {"detection_probability": PD, "position_m": SITE}
DENSITY = CLUTTER * math.radians(1.0)


def range_bearing(**keys):
    return RangeBearingSensor(
        kind="range-bearing",
        noise_sd_range_m=4.0,
        noise_sd_bearing_deg=2.0,
        region_range_m=(0.0, 2000.0),
        clutter_density_per_m_deg=DENSITY,
        **ALL_ROUND | keys,
    )


R = np.diag([16.0, math.radians(2.0) ** 2])


def look(state, site=SITE):
    offset = complex(*state[:2]) - complex(*site)
    return np.array([abs(offset), np.angle(offset)])


ROOT = np.array([[14.0, 0, 0, 0], [6.0, 10.0, 0, 0], [1.0, 0.5, 2.0, 0], [0.2, 1.5, 0.3, 1.0]])
P = ROOT @ ROOT.T
MEANS = {
    "ahead": np.array([150.0, 40.0, 3.0, -1.0]),
    "just above the cut": np.array([-120.0, -29.0, 3.0, -1.0]),
    "just below the cut": np.array([-120.0, -33.0, 3.0, -1.0]),
}


def assert_row_is(rows, row, expected, rtol):
    mean, covariance, log_density = expected
    scale = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose(rows.means[row] / scale, mean / scale, rtol=0, atol=rtol)
    near = rows.covariances[row] / np.outer(scale, scale)
    np.testing.assert_allclose(near, covariance / np.outer(scale, scale), rtol=0, atol=rtol)
    log_weight = math.log(PD / CLUTTER) + log_density
    np.testing.assert_allclose(rows.log_weights[row], log_weight, rtol=0, atol=rtol)


def seen_from(mean):
    """Two detections about a mean, on either side of the cut where that is near."""
    return look(mean) + np.array([[6.0, 0.05], [-9.0, -0.08]])


def onto_the_circle(detections):
    return np.column_stack([detections[:, 0], np.remainder(detections[:, 1] + np.pi, TURN) - np.pi])


@pytest.mark.parametrize("place", MEANS)
def test_range_and_bearing_by_gauss_hermite_equal_brute_force_integration(place):
    """Ten points an axis against a grid of 241 by 241; first order is off by 5e-3 and more."""
    mean = MEANS[place]
    detections = onto_the_circle(seen_from(mean))
    world = world_of(range_bearing(), mean, P)
    rows = rows_of(world, detections, linearisation=gauss_hermite_rule(4, 10))
    found = regression_over_leading(look, mean, P, grid(2), PERIODS)
    first_order = rows_of(world, detections)
    for row, z in enumerate(detections, start=1):
        expected = updated(mean, P, found, R, z, PERIODS)
        assert_row_is(rows, row, expected, 2e-5)
        assert abs(first_order.log_weights[row] - rows.log_weights[row]) > 5e-3


RULES = {
    "unscented": (unscented_rule(4, 1.0, 2.0, -1.0), 1.0, 2.0, -1.0),
    "unscented, scaled": (unscented_rule(4, 0.6, 1.5, 1.0), 0.6, 1.5, 1.0),
    "cubature": (cubature_rule(4), 1.0, 0.0, 0.0),  # the unscented rule without its centre
}


def plain_points(alpha, beta, kappa):
    """Offsets and weights of the scaled unscented transform, as usually written.

    Source: Julier (2002), American Control Conference, The scaled unscented transformation.
    """
    n = 4
    scale = alpha**2 * (n + kappa) - n
    columns = np.linalg.cholesky((n + scale) * P).T
    offsets = np.concatenate([np.zeros((1, n)), columns, -columns])
    weights = np.array([scale / (n + scale)] + 2 * n * [0.5 / (n + scale)])
    of_covariances = weights.copy()
    of_covariances[0] += 1 - alpha**2 + beta
    return offsets, weights, of_covariances


@pytest.mark.parametrize("place", MEANS)
@pytest.mark.parametrize("rule", RULES)
def test_range_and_bearing_by_sigma_points_equal_a_plain_twin(rule, place):
    mean, (points, *settings) = MEANS[place], RULES[rule]
    detections = onto_the_circle(seen_from(mean))
    rows = rows_of(world_of(range_bearing(), mean, P), detections, linearisation=points)
    offsets, weights, of_covariances = plain_points(*settings)
    found = regression(look, mean, offsets, weights, of_covariances, PERIODS)
    for row, z in enumerate(detections, start=1):
        assert_row_is(rows, row, updated(mean, P, found, R, z, PERIODS), 1e-9)


@pytest.mark.parametrize("rule", RULES)
def test_sigma_points_see_the_bias_of_the_range_that_first_order_overlooks(rule):
    """The expected range is longer than that of the mean, by half the spread across over it.

    A detection at the expected measurement, integrated, has next to no distance by points.
    """
    mean = MEANS["ahead"]
    exact = regression_over_leading(look, mean, P, grid(2), PERIODS)
    world = world_of(range_bearing(), mean, P)
    by_points = rows_of(world, [exact.expected], linearisation=RULES[rule][0]).distances[1]
    assert by_points < 0.05 * rows_of(world, [exact.expected]).distances[1]


def test_turning_the_world_by_180_degrees_turns_what_sigma_points_say():
    """The cut then lies behind the target; detections on both sides of it before."""
    mean = np.array([-90.0, 1.0, 2.0, -3.0])
    sensor = range_bearing(position_m=(0.0, 0.0))
    detections = np.array([[95.0, math.pi - 0.03], [93.0, -math.pi + 0.06], [90.0, 3.1]])
    opposite = np.column_stack([detections[:, 0], np.remainder(detections[:, 1], TURN) - math.pi])
    for rule, *_ in RULES.values():
        rows = rows_of(world_of(sensor, mean, P), detections, linearisation=rule)
        turned = rows_of(world_of(sensor, -mean, P), opposite, linearisation=rule)
        np.testing.assert_allclose(turned.means, -rows.means, rtol=1e-10, atol=1e-9)
        np.testing.assert_allclose(turned.covariances, rows.covariances, rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(turned.log_weights, rows.log_weights, rtol=0, atol=1e-10)


def test_noise_that_grows_with_range_is_averaged_over_the_prediction():
    """The factor is 1 at the site and 3 at 400 m; R is its expected square times the variance."""
    mean = MEANS["ahead"]
    sensor = range_bearing(noise_factor_over_range=((0.0, 1.0), (400.0, 3.0)))
    detections = seen_from(mean)
    places, weights = grid(2)
    states = mean[:2] + places @ np.linalg.cholesky(P[:2, :2]).T
    factors = 1.0 + 2.0 * np.hypot(*(states - SITE).T) / 400.0
    averaged = (weights @ factors**2) * R
    rows = rows_of(world_of(sensor, mean, P), detections, linearisation=gauss_hermite_rule(4, 10))
    found = regression_over_leading(look, mean, P, (places, weights), PERIODS)
    for row, z in enumerate(detections, start=1):
        assert_row_is(rows, row, updated(mean, P, found, averaged, z, PERIODS), 2e-5)


def test_a_prediction_right_on_the_site_is_corrected_by_sigma_points():
    """First order has no Jacobian there and keeps the prediction; points lie all around."""
    world = world_of(range_bearing(position_m=(0.0, 0.0)), np.zeros(4), P)
    rows = rows_of(world, [[12.0, 0.4]], linearisation=unscented_rule(4, 1.0, 2.0, -1.0))
    assert len(rows.means) == 2
    assert np.isfinite(rows.means).all()
    assert (np.linalg.eigvalsh(rows.covariances) > 0.0).all()


def test_a_bearing_alone_equals_brute_force_integration():
    sensor = BearingSensor(
        kind="bearing", noise_sd_bearing_deg=3.0, clutter_density_per_deg=DENSITY, **ALL_ROUND
    )
    mean, periods = MEANS["just below the cut"], (TURN,)
    noise = np.array([[math.radians(3.0) ** 2]])
    detections = np.array([[math.pi - 0.02], [-math.pi + 0.1]])
    world = world_of(sensor, mean, P)
    rows = rows_of(world, detections, linearisation=gauss_hermite_rule(4, 10))
    found = regression_over_leading(lambda state: look(state)[1:], mean, P, grid(2), periods)
    for row, z in enumerate(detections, start=1):
        assert_row_is(rows, row, updated(mean, P, found, noise, z, periods), 2e-5)


def test_range_bearing_and_range_rate_equal_gauss_hermite_of_higher_order():
    """Eleven points an axis, against fourteen of a rule of the test's own, over all four entries.

    The sensor moves, so that the range rate is the relative one.
    """
    sensor = RangeBearingRangeRateSensor(
        kind="range-bearing-range-rate",
        noise_sd_range_m=4.0,
        noise_sd_bearing_deg=2.0,
        noise_sd_range_rate_m_per_s=0.5,
        region_range_m=(0.0, 2000.0),
        region_range_rate_m_per_s=(-50.0, 50.0),
        clutter_per_scan=CLUTTER * 2000.0 * TURN * 100.0,
        velocity_m_per_s=(1.0, -2.0),
        **ALL_ROUND,
    )
    noise, periods = np.diag([16.0, math.radians(2.0) ** 2, 0.25]), (0.0, TURN, 0.0)
    mean = MEANS["ahead"]

    def measure(state):
        offset, relative = complex(*state[:2]) - complex(*SITE), complex(*state[2:]) - (1.0 - 2.0j)
        rate = (offset.conjugate() * relative).real / abs(offset)
        return np.array([abs(offset), np.angle(offset), rate])

    detections = measure(mean) + np.array([[5.0, 0.04, 0.8], [-5.0, -0.06, -1.0]])
    rows = rows_of(world_of(sensor, mean, P), detections, linearisation=gauss_hermite_rule(4, 11))
    found = regression_over_leading(measure, mean, P, hermite(4, 14), periods)
    for row, z in enumerate(detections, start=1):
        assert_row_is(rows, row, updated(mean, P, found, noise, z, periods), 2e-5)


def test_range_azimuth_and_elevation_equal_gauss_hermite_of_higher_order():
    """Five points along each of six axes, against 20 of the test's own along the position's."""
    site = (20.0, -30.0, 5.0)
    sensor = RangeAzimuthElevationSensor(
        kind="range-azimuth-elevation",
        noise_sd_range_m=4.0,
        noise_sd_azimuth_deg=2.0,
        noise_sd_elevation_deg=1.5,
        region_range_m=(0.0, 2000.0),
        clutter_per_scan=CLUTTER * 2000.0 * TURN * math.pi,
        detection_probability=PD,
        position_m=site,
    )
    noise = np.diag([16.0, math.radians(2.0) ** 2, math.radians(1.5) ** 2])
    periods = (0.0, TURN, 0.0)
    mean = np.array([-200.0, -35.0, 90.0, 3.0, -1.0, 0.5])
    root = np.tril(np.random.default_rng(3).normal(size=(6, 6))) + np.diag([12.0] * 3 + [2.0] * 3)
    spread = root @ root.T

    def measure(state):
        east, north, up = state[:3] - site
        return np.array(
            [
                np.linalg.norm(state[:3] - site),
                np.angle(complex(east, north)),
                np.angle(complex(np.hypot(east, north), up)),
            ]
        )

    detections = measure(mean) + np.array([[5.0, 0.03, 0.02], [-4.0, -0.05, 0.01]])
    detections[:, 1] = np.remainder(detections[:, 1] + np.pi, TURN) - np.pi
    world = world_of(sensor, mean, spread)
    rows = rows_of(world, detections, linearisation=gauss_hermite_rule(6, 5))
    found = regression_over_leading(measure, mean, spread, hermite(3, 20), periods)
    for row, z in enumerate(detections, start=1):
        assert_row_is(rows, row, updated(mean, spread, found, noise, z, periods), 1e-4)
