"""Motion models: Jacobians, process noise and exact properties, along one to three axes."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plain_filters import chain, van_loan
from scipy.integrate import quad_vec, solve_ivp

from filters.models.motion import (
    CoordinatedTurn,
    NearlyConstantAcceleration,
    NearlyConstantVelocity,
    PiecewiseConstantAcceleration,
)
from filters.models.motion.chain_of_integrators import (
    constant_acceleration_matrix,
    constant_acceleration_state,
    constant_velocity_matrix,
    constant_velocity_state,
)
from filters.models.motion.constant_turn import noise_on_arc, state_on_arc, turn_matrix
from filters.models.motion.coordinated_turn import (
    arc_factors,
    turn_noise,
    turned_jacobian,
    turned_state,
)
from filters.models.motion.nearly_constant_acceleration import white_jerk_noise
from filters.models.motion.nearly_constant_velocity import white_acceleration_noise
from filters.models.motion.piecewise_constant_acceleration import held_acceleration_noise


def start(axes, *further):
    return {
        "start_position_m": (0.0,) * axes,
        "start_velocity_m_per_s": (0.0,) * axes,
        "start_position_sd_m": (1.0,) * axes,
        "start_velocity_sd_m_per_s": (1.0,) * axes,
    } | dict(further)


# orders of the chain, transition, its matrix, noise
CHAINS = {
    "white acceleration": (
        2,
        constant_velocity_state,
        constant_velocity_matrix,
        white_acceleration_noise,
    ),
    "held acceleration": (
        2,
        constant_velocity_state,
        constant_velocity_matrix,
        held_acceleration_noise,
    ),
    "white jerk": (
        3,
        constant_acceleration_state,
        constant_acceleration_matrix,
        white_jerk_noise,
    ),
}
CONTINUOUS = ["white acceleration", "white jerk"]


def matrix(function, parameters, interval, state):
    out = np.full((len(state), len(state)), np.nan)
    function(np.asarray(parameters, float), interval, np.asarray(state, float), out)
    return out


def moved(function, parameters, interval, state):
    out = np.full(len(state), np.nan)
    function(np.asarray(parameters, float), interval, np.asarray(state, float), out)
    return out


def numerical_jacobian(function, parameters, interval, state, scales):
    """Central differences, two step sizes combined so that the error is of fourth order."""
    columns = []
    for entry, scale in enumerate(scales):
        unit = np.eye(len(state))[entry] * scale * 1e-3

        def slope(factor, unit=unit):
            high = moved(function, parameters, interval, state + factor * unit)
            low = moved(function, parameters, interval, state - factor * unit)
            return (high - low) / (2 * factor)

        columns.append((4 * slope(1.0) - slope(2.0)) / 3 / (scale * 1e-3))
    return np.array(columns).T


@pytest.mark.parametrize("axes", [1, 2, 3])
@pytest.mark.parametrize("name", CHAINS)
def test_a_chain_moves_by_its_matrix_which_is_the_exponential_of_its_drift(name, axes):
    """Source: scipy.linalg.expm, in Van Loan's method."""
    orders, transition, jacobian, _ = CHAINS[name]
    state = np.random.default_rng(1).normal(size=orders * axes)
    for interval in (0.0, 0.3, 7.0):
        F, _ = van_loan(chain(axes, orders), np.eye(orders * axes), interval)
        np.testing.assert_allclose(matrix(jacobian, [axes, 1.0], interval, state), F, atol=1e-12)
        expected = F @ state
        found = moved(transition, [axes, 1.0], interval, state)
        np.testing.assert_allclose(found, expected, rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("axes", [1, 2, 3])
@pytest.mark.parametrize("name", CONTINUOUS)
def test_process_noise_is_the_integral_of_the_continuous_model(name, axes):
    """Q is the integral of F(t) G psd G' F(t)': by quadrature and by Van Loan's exponential."""
    orders, _, jacobian, noise = CHAINS[name]
    psd, interval, n = 0.37, 1.9, orders * axes
    diffusion = np.diag([0.0] * (n - axes) + [psd] * axes)

    def spread(t):
        F = matrix(jacobian, [axes, psd], t, np.zeros(n))
        return F @ diffusion @ F.T

    by_quadrature, _ = quad_vec(spread, 0.0, interval, epsabs=1e-12)
    found = matrix(noise, [axes, psd], interval, np.zeros(n))
    np.testing.assert_allclose(found, by_quadrature, rtol=1e-10, atol=1e-13)
    _, by_exponential = van_loan(chain(axes, orders), diffusion, interval)
    np.testing.assert_allclose(found, by_exponential, rtol=1e-10, atol=1e-13)


@pytest.mark.parametrize("axes", [1, 2, 3])
@pytest.mark.parametrize("name", CONTINUOUS)
def test_two_steps_of_a_continuous_model_are_one_of_their_sum(name, axes):
    """Q(a + b) = F(b) Q(a) F(b)' + Q(b), whatever a and b."""
    orders, _, jacobian, noise = CHAINS[name]
    state, parameters = np.zeros(orders * axes), [axes, 0.6]
    for a, b in ((1.0, 1.0), (0.2, 3.0)):
        F = matrix(jacobian, parameters, b, state)
        composed = F @ matrix(noise, parameters, a, state) @ F.T
        composed += matrix(noise, parameters, b, state)
        np.testing.assert_allclose(
            matrix(noise, parameters, a + b, state), composed, rtol=1e-12, atol=1e-15
        )


@pytest.mark.parametrize("axes", [1, 2, 3])
def test_a_held_acceleration_disturbs_by_its_own_motion(axes):
    """Q = sd^2 g g' with g the motion from rest under a unit acceleration; of rank one an axis."""
    interval, sd = 1.3, 0.4
    from_rest = np.kron(np.eye(3), np.eye(axes))[:, 2 * axes :]
    F = matrix(constant_acceleration_matrix, [axes], interval, np.zeros(3 * axes))
    g = (F @ from_rest)[: 2 * axes]
    found = matrix(held_acceleration_noise, [axes, sd], interval, np.zeros(2 * axes))
    np.testing.assert_allclose(found, sd**2 * g @ g.T, rtol=1e-12, atol=1e-15)
    assert np.linalg.matrix_rank(found) == axes


def turn_flow(state, interval):
    """The turn by numerical integration of its differential equation."""

    def drift(_, x):
        return [x[2], x[3], -x[4] * x[3], x[4] * x[2], 0.0]

    return solve_ivp(drift, (0.0, interval), state, rtol=1e-11, atol=1e-11).y[:, -1]


RATES = [0.0, 1e-9, -1e-5, 0.004999, 0.005001, -0.005001, 0.05, -0.6, 3.0]


@pytest.mark.parametrize("rate", RATES)
def test_a_turn_follows_its_differential_equation(rate):
    """Rates around zero and on both sides of 0.005 rad/s, where 2 s change the formula."""
    state = np.array([10.0, -20.0, 8.0, 3.0, rate])
    found = moved(turned_state, [0.0, 0.0], 2.0, state)
    np.testing.assert_allclose(found, turn_flow(state, 2.0), rtol=1e-9, atol=1e-8)


@pytest.mark.parametrize("rate", RATES)
def test_the_jacobian_of_a_turn_is_its_derivative(rate):
    state = np.array([10.0, -20.0, 8.0, 3.0, rate])
    expected = numerical_jacobian(turned_state, [0.0, 0.0], 2.0, state, [1, 1, 1, 1, 1])
    found = matrix(turned_jacobian, [0.0, 0.0], 2.0, state)
    np.testing.assert_allclose(found, expected, rtol=1e-8, atol=1e-8)


@pytest.mark.parametrize("rate", RATES)
def test_a_turn_at_a_stated_rate_is_that_turn_and_its_noise_the_integral(rate):
    """The matrix is that of a turn whose state holds the rate; Q by quadrature, as above."""
    interval, psd = 2.0, 0.37
    parameters = [2.0, psd, rate]
    state = np.array([10.0, -20.0, 8.0, 3.0])
    expected = moved(turned_state, [0.0, 0.0], interval, [*state, rate])[:4]
    np.testing.assert_allclose(moved(state_on_arc, parameters, interval, state), expected)
    F = matrix(turn_matrix, parameters, interval, state)
    np.testing.assert_allclose(F @ state, expected, rtol=1e-13)

    def spread(t):
        F = matrix(turn_matrix, parameters, t, state)
        return psd * F[:, 2:] @ F[:, 2:].T

    by_quadrature, _ = quad_vec(spread, 0.0, interval, epsabs=1e-12)
    found = matrix(noise_on_arc, parameters, interval, state)
    np.testing.assert_allclose(found, by_quadrature, rtol=1e-9, atol=1e-12)


@settings(derandomize=True, deadline=None)
@given(
    st.floats(-50, 50),
    st.floats(-50, 50),
    st.floats(-4, 4),
    st.floats(0.01, 20),
    st.floats(0.01, 20),
)
def test_a_turn_keeps_its_speed_and_two_steps_are_one(east, north, rate, first, second):
    state = np.array([1.0, 2.0, east, north, rate])
    after = moved(turned_state, [0.0, 0.0], first, state)
    speed = math.hypot(east, north)
    assert math.isclose(math.hypot(after[2], after[3]), speed, rel_tol=1e-12, abs_tol=1e-300)
    twice = moved(turned_state, [0.0, 0.0], second, after)
    once = moved(turned_state, [0.0, 0.0], first + second, state)
    # The position error grows with the path, and the factors lose 1e-12 next to the series.
    np.testing.assert_allclose(twice, once, rtol=1e-9, atol=1e-10 * (1 + 40 * speed))
    # It keeps at the same distance from the centre of its circle.
    if abs(rate) > 0.1:
        centre = state[:2] + np.array([-north, east]) / rate
        radius = speed / abs(rate)
        assert abs(math.dist(after[:2], centre) - radius) < 1e-9 * (1 + radius)


def test_at_zero_rate_a_turn_is_constant_velocity():
    state = np.array([5.0, 6.0, -7.0, 8.0, 0.0])
    for interval in (0.5, 3.0):
        straight = moved(constant_velocity_state, [2], interval, state[:4])
        np.testing.assert_array_equal(moved(turned_state, [0, 0], interval, state)[:4], straight)
        F = matrix(constant_velocity_matrix, [2], interval, state[:4])
        np.testing.assert_allclose(matrix(turned_jacobian, [0, 0], interval, state)[:4, :4], F)


def test_the_factors_of_the_arc_meet_where_the_series_takes_over():
    """Neither value nor slope jumps at 0.01 rad by more than the closed forms lose to rounding."""
    below, above = (np.array(arc_factors(0.01 * (1 + s))) for s in (-1e-12, 1e-12))
    np.testing.assert_allclose(below, above, rtol=0, atol=1e-11)
    wide = 0.5  # the closed forms themselves, against long series
    series = [
        sum((-1) ** k * wide ** (2 * k) / math.factorial(2 * k + 1) for k in range(12)),
        sum((-1) ** k * wide ** (2 * k + 1) / math.factorial(2 * k + 2) for k in range(12)),
        sum(
            (-1) ** k * 2 * k * wide ** (2 * k - 1) / math.factorial(2 * k + 1)
            for k in range(1, 12)
        ),
        sum(
            (-1) ** k * (2 * k + 1) * wide ** (2 * k) / math.factorial(2 * k + 2) for k in range(12)
        ),
    ]
    np.testing.assert_allclose(arc_factors(wide), series, rtol=1e-13)


def test_the_noise_of_a_turn_is_that_of_white_acceleration_and_a_walk_of_the_rate():
    """Common practice: the noise of straight motion, though the arc would bend it a little."""
    found = matrix(turn_noise, [0.3, 1e-4], 1.7, np.zeros(5))
    plane = matrix(white_acceleration_noise, [2, 0.3], 1.7, np.zeros(4))
    np.testing.assert_allclose(found[:4, :4], plane, rtol=1e-14)
    np.testing.assert_allclose(found[4], [0, 0, 0, 0, 1.7e-4], rtol=1e-14)


@pytest.mark.parametrize("name", CHAINS)
def test_noise_is_symmetric_and_not_negative(name):
    orders, _, _, noise = CHAINS[name]
    for axes in (1, 2, 3):
        Q = matrix(noise, [axes, 0.7], 2.3, np.zeros(orders * axes))
        np.testing.assert_array_equal(Q, Q.T)
        assert np.linalg.eigvalsh(Q)[0] > -1e-12 * np.trace(Q)


def test_records_hand_their_numbers_to_the_models():
    """Axes, densities and units: degrees in a study, radians in the model."""
    white = NearlyConstantVelocity(
        motion="nearly-constant-velocity", acceleration_psd_m2_per_s3=0.2, **start(2)
    )
    np.testing.assert_array_equal(white.motion_model().parameters, [2, 0.2])
    held = PiecewiseConstantAcceleration(
        motion="piecewise-constant-acceleration", acceleration_sd_m_per_s2=0.3, **start(3)
    )
    np.testing.assert_array_equal(held.motion_model().parameters, [3, 0.3])
    jerk = NearlyConstantAcceleration(
        motion="nearly-constant-acceleration",
        jerk_psd_m2_per_s5=0.1,
        start_acceleration_m_per_s2=(0.5,),
        start_acceleration_sd_m_per_s2=(2.0,),
        **start(1),
    )
    np.testing.assert_array_equal(jerk.motion_model().parameters, [1, 0.1])
    np.testing.assert_array_equal(jerk.start_mean(), [0, 0, 0.5])
    np.testing.assert_array_equal(jerk.start_spread(), np.diag([1.0, 1.0, 4.0]))
    turn = CoordinatedTurn(
        motion="coordinated-turn",
        acceleration_psd_m2_per_s3=0.1,
        turn_rate_psd_deg2_per_s3=4.0,
        start_turn_rate_deg_per_s=90.0,
        start_turn_rate_sd_deg_per_s=180.0,
        **start(2),
    )
    np.testing.assert_allclose(turn.motion_model().parameters, [0.1, 4.0 * (math.pi / 180) ** 2])
    assert turn.start_mean()[4] == math.pi / 2
    np.testing.assert_allclose(turn.start_spread()[4, 4], math.pi**2)
