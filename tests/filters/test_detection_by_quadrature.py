"""A detection probability inside the integral, against integration of the test's own.

With f = 1 - PG PD for a miss and f = PD for a detection a Gaussian p becomes p f / E[f], whose
moments are matched; E[f] is the weight.
"""

import math

import numpy as np
import pytest
from one_scan import (
    constant_probability,
    detection_by,
    falling_probability,
    rows_of,
    seen_within,
    world_of,
)
from plain_linearisation import grid
from scipy.stats import multivariate_normal
from small_worlds import as_scans, pda, position_sensor, run_on

from filters.linearisation.rules import gauss_hermite_rule, unscented_rule
from filters.models.detection import DETECTION_LAWS

CLUTTER, NOISE_SD = 1e-3, 15.0
MEAN = np.array([100.0, -40.0, 3.0, -1.0])
ROOT = np.array([[30.0, 0, 0, 0], [9.0, 25.0, 0, 0], [1.0, 0.5, 2.0, 0], [0.2, 1.5, 0.3, 1.0]])
P = ROOT @ ROOT.T
DETECTIONS = np.array([[120.0, -20.0], [70.0, -60.0]])
RULE = gauss_hermite_rule(4, 11)


def world_with(detection):
    return world_of(position_sensor(2, NOISE_SD, 0.9, CLUTTER), MEAN, P, detection)


def kalman(z):
    """Mean and covariance given a detection of the position, and its log density."""
    H = np.eye(2, 4)
    S = H @ P @ H.T + NOISE_SD**2 * np.eye(2)
    K = P @ H.T @ np.linalg.inv(S)
    mean = MEAN + K @ (z - MEAN[:2])
    return mean, P - K @ S @ K.T, multivariate_normal.logpdf(z, MEAN[:2], S)


def weighed(mean, covariance, f, rule):
    """E[f] and the moments of p f / E[f], by a rule over the leading entries; f of their places."""
    places, weights = rule
    used = places.shape[1]
    own = covariance[:used, :used]
    states = mean[:used] + places @ np.linalg.cholesky(own).T
    values = weights * f(states)
    total = values.sum()
    middle = values @ states / total
    offsets = states - middle
    spread = np.einsum("i,ij,ik->jk", values / total, offsets, offsets)
    onto = covariance[:, :used] @ np.linalg.inv(own)  # the others follow from theirs
    moved = mean + onto @ (middle - mean[:used])
    return total, moved, covariance + onto @ (spread - own) @ onto.T


def assert_rows_are(rows, PD, rule, gate=1.0, rtol=1e-4):
    """Every row against integration; distances are those of all detections in the gate."""
    gaussians = [(MEAN, P, math.log(CLUTTER)), *(kalman(z) for z in DETECTIONS)]
    for row, (mean, covariance, log_density) in enumerate(gaussians):
        miss = row == 0
        total, moved, spread = weighed(
            mean, covariance, lambda x, miss=miss: 1.0 - gate * PD(x) if miss else PD(x), rule
        )
        log_weight = math.log(total) + log_density - math.log(CLUTTER)
        np.testing.assert_allclose(rows.log_weights[row], log_weight, rtol=0, atol=rtol)
        scale = np.sqrt(np.diag(covariance))
        np.testing.assert_allclose(rows.means[row] / scale, moved / scale, rtol=0, atol=rtol)
        near = (rows.covariances[row] - spread) / np.outer(scale, scale)
        np.testing.assert_allclose(near, 0.0, rtol=0, atol=10 * rtol)


# Height, place and width of a fall of PD along the first axis.
FALL = (0.95, 110.0, 30.0)


def falling(states):
    return FALL[0] / (1.0 + np.exp((states[:, 0] - FALL[1]) / FALL[2]))


@pytest.mark.parametrize("gate", [1.0, 0.99])
def test_pd_falling_along_one_axis_equals_integration_in_one_dimension(gate):
    """Weights, means and covariances of the miss and of both detections; a fall of one deviation.

    At the mean the weights alone are off by a tenth.
    """
    world = world_with(detection_by(falling_probability, *FALL))
    rows = rows_of(world, DETECTIONS, detecting=RULE, gate=gate)
    assert_rows_are(rows, falling, grid(1), gate)
    at_mean = rows_of(world, DETECTIONS, gate=gate)
    assert np.abs(at_mean.log_weights - rows.log_weights).max() > 0.1


def within(distance):
    def PD(states):
        return 1.0 * (np.hypot(*states.T) < distance)

    return PD


def law(kind, **keys):
    names = {
        record.model_fields["kind"].annotation.__args__[0]: record for record in DETECTION_LAWS
    }
    return names[kind](kind=kind, **keys).model()


SNR = {"false_alarm_probability": 1e-4, "resolution_cell": (10.0, 10.0)}


def test_pd_falling_with_range_equals_integration_in_two_dimensions():
    """A table from 0.9 at the site to 0 at 240 m: PD is linear but for the range's own curve."""
    detection = law("range-table", probability_over_range=((0.0, 0.9), (240.0, 0.0)))

    def PD(states):
        return 0.9 * np.maximum(1.0 - np.hypot(*states.T) / 240.0, 0.0)

    rows = rows_of(world_with(detection), DETECTIONS, detecting=RULE)
    assert_rows_are(rows, PD, grid(2), rtol=2e-3)


def test_a_miss_moves_the_estimate_to_where_it_would_be_missed_and_a_detection_back():
    world = world_with(detection_by(falling_probability, *FALL))
    rows, at_mean = (rows_of(world, DETECTIONS, **how) for how in ({"detecting": RULE}, {}))
    assert rows.means[0, 0] > MEAN[0] + 5.0
    assert np.all(rows.means[1:, 0] < at_mean.means[1:, 0] - 1.0)


def test_a_blind_zone_is_seen_as_well_as_the_points_lie():
    """PD is 1 within 110 m and 0 beyond; eleven points an axis meet the edge to a tenth.

    The share within, by a grid of 2001 along each axis.
    """
    world = world_with(detection_by(seen_within, 110.0))
    rows = rows_of(world, DETECTIONS, detecting=RULE)
    missed, moved, _ = weighed(MEAN, P, lambda x: 1.0 - within(110.0)(x), grid(2, points=2001))
    assert abs(math.exp(rows.log_weights[0]) - missed) < 0.1
    assert np.abs(rows.means[0] - moved)[:2].max() < 3.0
    assert np.hypot(*rows.means[0, :2]) > np.hypot(*MEAN[:2]) + 10.0


@pytest.mark.parametrize("PD", [0.0, 0.7, 1.0])
@pytest.mark.parametrize("rule", [gauss_hermite_rule(4, 3), RULE], ids=["3 points", "11 points"])
def test_constant_pd_leaves_everything_as_at_the_mean(PD, rule):
    world = world_with(detection_by(constant_probability, PD))
    rows, at_mean = (
        rows_of(world, DETECTIONS, gate=0.99, **how) for how in ({"detecting": rule}, {})
    )
    np.testing.assert_allclose(rows.log_weights, at_mean.log_weights, rtol=1e-11, atol=1e-11)
    np.testing.assert_allclose(rows.means, at_mean.means, rtol=1e-11)
    np.testing.assert_allclose(rows.covariances, at_mean.covariances, rtol=1e-10, atol=1e-9)
    np.testing.assert_array_equal(rows.distances, at_mean.distances)


def test_a_miss_and_a_sure_detection_together_are_the_prediction():
    """E[f] of both sum to one, and their moments to those of the prediction, whatever PD is.

    The detection says nothing of the place: its noise is 1e6 deviations wide.
    """
    sensor = position_sensor(2, 1e8, 0.9, CLUTTER)
    world = world_of(sensor, MEAN, P, detection_by(seen_within, 110.0))
    rows = rows_of(world, [MEAN[:2]], detecting=gauss_hermite_rule(4, 4))
    density = CLUTTER * 2 * math.pi * 1e16
    shares = np.exp(rows.log_weights) * [1.0, density]
    np.testing.assert_allclose(shares.sum(), 1.0, rtol=1e-9)
    np.testing.assert_allclose(shares @ rows.means, MEAN, rtol=1e-9)
    offsets = rows.means - MEAN
    spread = np.einsum("i,ijk->jk", shares, rows.covariances)
    spread += np.einsum("i,ij,ik->jk", shares, offsets, offsets)
    np.testing.assert_allclose(spread, P, rtol=1e-8, atol=1e-7)


def test_where_no_point_can_be_seen_a_detection_weighs_nothing_and_stays_as_it_was():
    world = world_with(detection_by(seen_within, 1e-3))
    rows, at_mean = (rows_of(world, DETECTIONS, **how) for how in ({"detecting": RULE}, {}))
    np.testing.assert_array_equal(rows.log_weights[1:], -np.inf)
    np.testing.assert_allclose(rows.means, at_mean.means, rtol=1e-12)
    np.testing.assert_allclose(rows.covariances, at_mean.covariances, rtol=1e-12, atol=1e-10)
    np.testing.assert_array_equal(rows.weights, [1.0, 0.0, 0.0])


def test_a_single_point_with_weight_counts_but_moves_nothing():
    """Three points an axis, of which the middle one alone lies within two metres of the site."""
    sensor = position_sensor(2, NOISE_SD, 0.9, CLUTTER)
    mean = np.array([0.5, 0.5, 3.0, -1.0])
    spread = np.diag([400.0, 400.0, 4.0, 4.0])
    world = world_of(sensor, mean, spread, detection_by(seen_within, 2.0))
    rows = rows_of(world, [[0.5, 0.5]], detecting=gauss_hermite_rule(4, 3))
    middle = (2.0 / 3.0) ** 2  # both axes at their middle point; velocities matter nothing
    np.testing.assert_allclose(rows.log_weights[0], math.log(1.0 - middle), rtol=1e-12)
    np.testing.assert_array_equal(rows.means[1], [0.5, 0.5, 3.0, -1.0])
    assert rows.covariances[1, 0, 0] > 100.0
    # The miss leaves eight of nine points around it: as far on as before and wider.
    np.testing.assert_allclose(rows.means[0], mean, rtol=1e-12)
    np.testing.assert_allclose(rows.covariances[0, 0, 0], 400.0 / (1.0 - middle), rtol=1e-12)


def test_an_empty_scan_is_impossible_only_if_all_points_must_be_seen():
    """The mean lies where PD is 1 and stays there; most points of a wide prediction do not."""
    sensor = position_sensor(2, NOISE_SD, 0.9, CLUTTER)
    world = world_of(sensor, np.zeros(4), P, detection_by(seen_within, 30.0))
    sure = world_of(sensor, np.zeros(4), P, detection_by(constant_probability, 1.0))
    scans = as_scans([[[]]], 2)
    for gate in (1.0, 0.9):
        by_quadrature = pda(detection_points_per_axis=5, gate_probability=gate)
        assert run_on(world, by_quadrature, scans).impossible == [0]
        assert run_on(sure, by_quadrature, scans).impossible == [1]
        assert run_on(world, pda(gate_probability=gate), scans).impossible == [1]


def test_nothing_seen_for_long_drifts_into_the_blind_zone():
    """Twenty empty scans near an edge beyond which PD is 0; at the mean the estimate stays."""
    world = world_with(detection_by(falling_probability, 0.95, 110.0, 5.0))
    scans = as_scans([[[]] * 20], 2)
    by_quadrature = run_on(world, pda(detection_points_per_axis=5), scans)
    at_mean = run_on(world, pda(), scans)
    assert by_quadrature.means[0, 5, 0] > at_mean.means[0, 5, 0] + 15.0
    eigenvalues = np.linalg.eigvalsh(by_quadrature.covariances[0])
    assert (eigenvalues > 0.0).all()


def test_quadrature_goes_with_sigma_points_of_another_number():
    """Nine points for the measurement, 14,641 for PD: on a linear sensor as with the Jacobian."""
    world = world_with(detection_by(falling_probability, *FALL))
    rows = rows_of(
        world,
        DETECTIONS,
        linearisation=unscented_rule(4, 1.0, 2.0, -1.0),
        detecting=RULE,
    )
    assert_rows_are(rows, falling, grid(1))
