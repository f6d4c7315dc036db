"""Sigma points through a turning motion, against integration over the turn rate."""

import cmath
import math

import numpy as np
import pytest
from plain_linearisation import grid
from small_worlds import World, as_scans, models_of, pda, position_sensor, run_on

from filters.models.motion import CoordinatedTurn
from filters.strategies.strategy import Assumptions
from filters.track import Prior

INTERVAL = 3.0
MEAN = np.array([100.0, -50.0, 12.0, 5.0, math.radians(6.0)])
ROOT = np.diag([10.0, 8.0, 1.5, 1.0, math.radians(5.0)])
ROOT[2:, :2] = [[0.3, 0.1], [0.0, 0.4], [0.005, -0.01]]
ROOT[4, 2:4] = [0.02, 0.01]
P = ROOT @ ROOT.T
PSD, RATE_PSD_DEG = 0.4, 0.3


def turning_world():
    target = CoordinatedTurn(
        motion="coordinated-turn",
        acceleration_psd_m2_per_s3=PSD,
        turn_rate_psd_deg2_per_s3=RATE_PSD_DEG,
        start_position_m=(100.0, -50.0),
        start_velocity_m_per_s=(12.0, 5.0),
        start_turn_rate_deg_per_s=6.0,
        start_position_sd_m=(1.0, 1.0),
        start_velocity_sd_m_per_s=(1.0, 1.0),
        start_turn_rate_sd_deg_per_s=1.0,
    )
    models = models_of(target.motion_model(), position_sensor(2, 5.0, 0.9, 1e-3))
    return World(Assumptions(models, Prior(MEAN, P), 2), None)


def moved_by(linearisation):
    """Mean and covariance after one interval without a detection."""
    strategy = pda(gate_probability=1.0, linearisation=linearisation)
    tracks = run_on(turning_world(), strategy, as_scans([[[], []]], 2, interval=INTERVAL))
    return tracks.means[0, 1], tracks.covariances[0, 1]


def noise():
    """White acceleration and white change of the turn rate, as of nearly constant velocity.

    Source: Bar-Shalom, Li and Kirubarajan (2001), section 11.7.
    """
    T, Q = INTERVAL, np.zeros((5, 5))
    Q[:4, :4] = PSD * np.kron([[T**3 / 3, T**2 / 2], [T**2 / 2, T]], np.eye(2))
    Q[4, 4] = RATE_PSD_DEG * math.radians(1.0) ** 2 * T
    return Q


def transition(rate):
    """F(w) of position and velocity, in complex numbers: linear once the rate is known."""
    swing = cmath.exp(1j * rate * INTERVAL)
    along = (swing - 1.0) / (1j * rate) if rate else complex(INTERVAL)
    F = np.eye(4)
    F[:2, 2:] = [[along.real, -along.imag], [along.imag, along.real]]
    F[2:, 2:] = [[swing.real, -swing.imag], [swing.imag, swing.real]]
    return F


def turned():
    """Moments after an interval: for each rate the rest is a Gaussian and moves linearly."""
    places, weights = grid(1)
    rates = MEAN[4] + math.sqrt(P[4, 4]) * places[:, 0]
    onto = P[:4, 4] / P[4, 4]
    given = P[:4, :4] - np.outer(onto, P[:4, 4])
    mean, square = np.zeros(5), np.zeros((5, 5))
    for rate, weight in zip(rates, weights, strict=True):
        F = transition(rate)
        state = np.append(F @ (MEAN[:4] + onto * (rate - MEAN[4])), rate)
        mean += weight * state
        square += weight * np.outer(state, state)
        square[:4, :4] += weight * F @ given @ F.T
    return mean, square - np.outer(mean, mean)


SCALE = np.sqrt(np.diag(turned()[1]))


def error_of(found, expected):
    """Largest error of a mean and of a covariance, in deviations."""
    return max(
        np.abs((found[0] - expected[0]) / SCALE).max(),
        np.abs((found[1] - expected[1]) / np.outer(SCALE, SCALE)).max(),
    )


def expected_with_noise():
    mean, covariance = turned()
    return mean, covariance + noise()


def test_six_points_an_axis_move_as_integration_over_the_turn_rate():
    found = moved_by({"kind": "gauss-hermite", "points_per_axis": 6})
    assert error_of(found, expected_with_noise()) < 1e-5


@pytest.mark.parametrize("kind", ["unscented", "cubature"])
def test_rules_of_third_degree_move_closer_than_first_order(kind):
    expected = expected_with_noise()
    error = error_of(moved_by({"kind": kind}), expected)
    assert error < 0.5 * error_of(moved_by({"kind": "first-order"}), expected)
    assert error < 0.1


def test_unscented_moves_as_a_plain_twin():
    """Eleven points by NumPy's Cholesky factor, with the weights as usually written.

    Source: Julier (2002), American Control Conference, The scaled unscented transformation.
    """
    n, alpha, beta, kappa = 5, 0.7, 1.5, 1.0
    scale = alpha**2 * (n + kappa) - n
    columns = np.linalg.cholesky((n + scale) * P).T
    states = MEAN + np.concatenate([np.zeros((1, n)), columns, -columns])
    weights = np.array([scale / (n + scale)] + 2 * n * [0.5 / (n + scale)])
    moved = np.array([np.append(transition(x[4]) @ x[:4], x[4]) for x in states])
    mean = weights @ moved
    weights[0] += 1 - alpha**2 + beta
    offsets = moved - mean
    covariance = np.einsum("i,ij,ik->jk", weights, offsets, offsets) + noise()
    settings = {"kind": "unscented", "alpha": alpha, "beta": beta, "kappa": kappa}
    found = moved_by(settings)
    np.testing.assert_allclose(found[0], mean, rtol=1e-10)
    np.testing.assert_allclose(found[1], covariance, rtol=1e-9, atol=1e-10)
