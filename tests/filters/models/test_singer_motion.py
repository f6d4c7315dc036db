"""Singer's motion: exact F and Q against integrals, and its limits in the manoeuvre time."""

import math

import numpy as np
import pytest
from plain_filters import van_loan
from scipy.integrate import quad_vec
from scipy.linalg import expm

from filters.models.motion import Singer
from filters.models.motion.chain_of_integrators import (
    constant_acceleration_matrix,
    constant_velocity_matrix,
)
from filters.models.motion.nearly_constant_acceleration import white_jerk_noise
from filters.models.motion.nearly_constant_velocity import white_acceleration_noise
from filters.models.motion.singer import singer_matrix, singer_noise, singer_state

SD = 3.0
INTERVAL = 2.0
# Manoeuvre times on both sides of the interval, where the formulas change, and far from it.
TIMES = [1e-3, 0.1, 1.0, 1.999999, 2.0, 2.000001, 5.0, 60.0, 1e4]


def matrix(function, parameters, interval):
    n = 3 * int(parameters[0])
    out = np.full((n, n), np.nan)
    function(np.asarray(parameters, float), interval, np.zeros(n), out)
    return out


def drift(time, axes=1):
    """Matrix A of dx/dt = A x + noise, state grouped by order."""
    chain = np.array([[0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [0.0, 0.0, -1.0 / time]])
    return np.kron(chain, np.eye(axes))


def process(time, interval, axes=1):
    return matrix(singer_noise, [axes, SD, time], interval)


@pytest.mark.parametrize("axes", [1, 2, 3])
@pytest.mark.parametrize("time", TIMES)
def test_the_transition_is_the_exponential_of_its_drift(time, axes):
    """Source: scipy.linalg.expm."""
    parameters = np.array([axes, SD, time])
    F = expm(INTERVAL * drift(time, axes))
    np.testing.assert_allclose(matrix(singer_matrix, parameters, INTERVAL), F, rtol=1e-12)
    state = np.random.default_rng(3).normal(size=3 * axes)
    out = np.empty(3 * axes)
    singer_state(parameters, INTERVAL, state, out)
    np.testing.assert_allclose(out, F @ state, rtol=1e-12, atol=1e-14)


@pytest.mark.parametrize("time", TIMES)
def test_process_noise_is_the_integral_of_white_noise_through_the_drift(time):
    """The white noise that drives the acceleration has the density 2 sd^2 / time."""
    into_acceleration = np.array([0.0, 0.0, 1.0])

    def spread(t):
        gained = expm(t * drift(time)) @ into_acceleration
        return 2.0 * SD**2 / time * np.outer(gained, gained)

    # The corner at t = 0 is as narrow as the manoeuvre time.
    expected, _ = quad_vec(spread, 0.0, INTERVAL, epsabs=0, epsrel=1e-11, points=[time, 10 * time])
    np.testing.assert_allclose(process(time, INTERVAL), expected, rtol=1e-9)


@pytest.mark.parametrize("ratio", [0.02, 0.5, 1.0, 3.0])
def test_process_noise_agrees_with_van_loans_exponential(ratio):
    time = INTERVAL / ratio
    diffusion = np.diag([0.0, 0.0, 2.0 * SD**2 / time])
    _, Q = van_loan(drift(time), diffusion, INTERVAL)
    np.testing.assert_allclose(process(time, INTERVAL), Q, rtol=1e-7)


@pytest.mark.parametrize("time", TIMES)
def test_two_steps_are_one_of_their_sum(time):
    """Q(a + b) = F(b) Q(a) F(b)' + Q(b), also where a and b fall on different formulas."""
    for a, b in ((1.0, 1.0), (0.01, 3.0), (2.5, 0.4)):
        F = matrix(singer_matrix, [1, SD, time], b)
        composed = F @ process(time, a) @ F.T + process(time, b)
        np.testing.assert_allclose(process(time, a + b), composed, rtol=1e-11)


def test_with_a_long_manoeuvre_time_it_is_white_noise_jerk():
    """2 sd^2 / time kept at 0.3; what is left is of the order of interval / time."""
    psd, time = 0.3, 1e7
    sd = math.sqrt(psd * time / 2)
    Q = matrix(singer_noise, [2, sd, time], INTERVAL)
    np.testing.assert_allclose(Q, matrix(white_jerk_noise, [2, psd], INTERVAL), rtol=1e-6)
    F = matrix(singer_matrix, [2, sd, time], INTERVAL)
    np.testing.assert_allclose(F, matrix(constant_acceleration_matrix, [2], INTERVAL), rtol=1e-6)


def test_with_a_short_manoeuvre_time_it_is_white_noise_acceleration():
    """2 sd^2 time kept at 0.3: position and velocity; what is left is of time / interval."""
    psd, time = 0.3, 1e-7
    sd = math.sqrt(psd / (2 * time))
    Q = matrix(singer_noise, [2, sd, time], INTERVAL)
    white = np.empty((4, 4))
    white_acceleration_noise(np.array([2.0, psd]), INTERVAL, np.zeros(4), white)
    np.testing.assert_allclose(Q[:4, :4], white, rtol=1e-6)
    straight = np.empty((4, 4))
    constant_velocity_matrix(np.array([2.0]), INTERVAL, np.zeros(4), straight)
    np.testing.assert_allclose(matrix(singer_matrix, [2, sd, time], INTERVAL)[:4, :4], straight)


@pytest.mark.parametrize("time", TIMES)
def test_the_acceleration_keeps_its_variance(time):
    """Variance sd^2 before stays sd^2 after: exp(-2 T / time) sd^2 + Q33."""
    kept = math.exp(-2 * INTERVAL / time) * SD**2 + process(time, INTERVAL)[2, 2]
    assert math.isclose(kept, SD**2, rel_tol=1e-14)


@pytest.mark.parametrize("interval", [1e-9, 1e-3, 1.0, 1e3])
@pytest.mark.parametrize("time", TIMES)
def test_noise_is_symmetric_and_positive(interval, time):
    """As a correlation matrix, whose eigenvalues fall to about 1e-3 where the motion is smooth."""
    Q = process(time, interval)
    np.testing.assert_array_equal(Q, Q.T)
    spread = np.sqrt(np.diag(Q))
    assert np.linalg.eigvalsh(Q / np.outer(spread, spread))[0] > 1e-6 * min(1.0, time / interval)


def test_the_record_hands_its_numbers_to_the_model():
    target = Singer(
        motion="singer",
        acceleration_sd_m_per_s2=2.0,
        manoeuvre_time_s=20.0,
        start_position_m=(0.0, 1.0),
        start_velocity_m_per_s=(2.0, 3.0),
        start_acceleration_m_per_s2=(4.0, 5.0),
        start_position_sd_m=(1.0, 1.0),
        start_velocity_sd_m_per_s=(2.0, 2.0),
        start_acceleration_sd_m_per_s2=(3.0, 3.0),
    )
    model = target.motion_model()
    np.testing.assert_array_equal(model.parameters, [2, 2.0, 20.0])
    assert model.linear
    np.testing.assert_array_equal(target.start_mean(), np.arange(6.0))
    np.testing.assert_array_equal(np.diag(target.start_spread()), [1, 1, 4, 4, 9, 9])
