"""The iterated update finds the most probable state; its density is Laplace's approximation."""

import math

import numpy as np
import pytest
from one_scan import rows_of, world_of
from plain_linearisation import grid, wrapped
from scipy.optimize import minimize
from scipy.stats import multivariate_normal

from filters.linearisation.iterated import Iterated
from filters.models.sensor import RangeBearingSensor

PD, CLUTTER, SITE = 0.8, 0.3, (20.0, -30.0)
SD = np.array([6.0, math.radians(2.0)])
R = np.diag(SD**2)
PERIODS = (0.0, 2 * math.pi)
SENSOR = RangeBearingSensor(
    kind="range-bearing",
    position_m=SITE,
    noise_sd_range_m=SD[0],
    noise_sd_bearing_deg=2.0,
    region_range_m=(0.0, 2000.0),
    detection_probability=PD,
    clutter_density_per_m_deg=CLUTTER * math.radians(1.0),
)
ROOT = np.array([[30.0, 0, 0, 0], [9.0, 25.0, 0, 0], [1.0, 0.5, 2.0, 0], [0.2, 1.5, 0.3, 1.0]])
P = ROOT @ ROOT.T
CASES = {
    "ahead": (np.array([150.0, 40.0, 3.0, -1.0]), [[140.0, 0.75], [170.0, 0.3]]),
    "across the cut": (np.array([-90.0, -35.0, 3.0, -1.0]), [[105.0, 2.9], [130.0, -3.0]]),
}


def look(state):
    offset = complex(*state[:2]) - complex(*SITE)
    return np.array([abs(offset), np.angle(offset)])


def slope(state):
    east, north = state[:2] - SITE
    distance = math.hypot(east, north)
    H = np.zeros((2, 4))
    H[0, :2] = np.array([east, north]) / distance
    H[1, :2] = np.array([-north, east]) / distance**2
    return H


def misfit(state, mean, z):
    """Minus the log of prior times likelihood, but for a constant."""
    innovation = wrapped(z - look(state), PERIODS)
    offset = state - mean
    return 0.5 * (innovation @ np.linalg.solve(R, innovation) + offset @ np.linalg.solve(P, offset))


def most_probable(mean, z):
    """By SciPy from the prior's mean, in units of the prior's spread."""

    def cost(u):
        return misfit(mean + ROOT @ u, mean, z)

    options = {"xatol": 1e-10, "fatol": 1e-14, "maxiter": 20_000, "maxfev": 20_000}
    rough = minimize(cost, np.zeros(4), method="BFGS", options={"gtol": 1e-9})
    fine = minimize(cost, rough.x, method="Nelder-Mead", options=options)
    return mean + ROOT @ fine.x


@pytest.mark.parametrize("case", CASES)
def test_the_estimate_is_the_most_probable_state_and_the_density_is_laplaces(case):
    """Found anew by SciPy; first order lies a twentieth of a deviation off and more."""
    mean, detections = CASES[case]
    world = world_of(SENSOR, mean, P)
    rows = rows_of(world, detections, linearisation=Iterated(100))
    first_order = rows_of(world, detections)
    for row, z in enumerate(detections, start=1):
        best = most_probable(mean, z)
        H = slope(best)
        spread = np.linalg.inv(np.linalg.inv(P) + H.T @ np.linalg.solve(R, H))
        scale = np.sqrt(np.diag(spread))
        np.testing.assert_allclose(rows.means[row] / scale, best / scale, rtol=0, atol=1e-5)
        np.testing.assert_allclose(rows.covariances[row], spread, rtol=1e-5, atol=1e-8)
        innovation = wrapped(z - look(best), PERIODS)
        log_density = (
            multivariate_normal.logpdf(innovation, np.zeros(2), R)
            + multivariate_normal.logpdf(best, mean, P)
            + 0.5 * np.linalg.slogdet(2 * np.pi * spread)[1]
        )
        np.testing.assert_allclose(
            rows.log_weights[row], math.log(PD / CLUTTER) + log_density, rtol=0, atol=1e-5
        )
        assert np.abs((first_order.means[row] - best) / scale).max() > 0.05


def test_laplaces_density_lies_nearer_the_integral_than_first_order():
    """The density of a detection integrated over the position on a grid of 241 by 241."""
    mean, detections = CASES["ahead"]
    places, weights = grid(2)
    states = mean[:2] + places @ np.linalg.cholesky(P[:2, :2]).T
    world = world_of(SENSOR, mean, P)
    errors = {}
    for name, found in {
        "iterated": rows_of(world, detections, linearisation=Iterated(20)),
        "first order": rows_of(world, detections),
    }.items():
        errors[name] = []
        for row, z in enumerate(detections, start=1):
            innovations = wrapped(z - np.array([look(state) for state in states]), PERIODS)
            density = weights @ multivariate_normal.pdf(innovations, np.zeros(2), R)
            error = found.log_weights[row] - math.log(PD / CLUTTER * density)
            errors[name].append(abs(error))
    assert np.all(np.less(errors["iterated"], 0.5 * np.array(errors["first order"])))
    assert max(errors["iterated"]) < 0.02


def test_one_step_goes_part_of_the_way_and_the_last_steps_go_nowhere():
    mean, detections = CASES["ahead"]
    world = world_of(SENSOR, mean, P)
    first, one, many, more = (
        rows_of(world, detections, linearisation=how).means[1]
        for how in (Iterated(1), Iterated(2), Iterated(30), Iterated(100))
    )
    assert np.linalg.norm(one - many) < np.linalg.norm(first - many)
    np.testing.assert_array_equal(many, more)


def test_each_detection_has_a_covariance_of_its_own():
    """Which is that at its own estimate; first order has one for all."""
    mean, detections = CASES["ahead"]
    rows = rows_of(world_of(SENSOR, mean, P), detections, linearisation=Iterated(20))
    assert np.abs(rows.covariances[1] / rows.covariances[2] - 1.0).max() > 0.05
    np.testing.assert_array_equal(rows.covariances[0], P)


def test_a_detection_far_from_a_vague_prediction_leaves_no_estimate_that_is_worse():
    """Close to the site the steps may run astray; no NaN, and never less probable than at the mean.

    200 detections all around a prediction as wide as it is far from the site.
    """
    rng = np.random.default_rng(8)
    mean = np.array([50.0, -30.0, 0.0, 0.0])
    detections = np.column_stack([rng.uniform(5.0, 150.0, 200), rng.uniform(-np.pi, np.pi, 200)])
    world = world_of(SENSOR, mean, P)
    rows = rows_of(world, detections, linearisation=Iterated(20))
    assert np.isfinite(rows.means).all()
    assert np.isfinite(rows.log_weights).all()
    for row, z in enumerate(detections, start=1):
        assert misfit(rows.means[row], mean, z) <= misfit(mean, mean, z)
