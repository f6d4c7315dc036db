"""Legs of a stated path: their motion against numerical integration, and where they meet."""

import math

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from filters.models.record import BadValue
from harness.study.legs import SpeedChange, Straight, Turn, check_legs, states_along

STRAIGHT = Straight(kind="straight", duration_s=10.0)
LEFT = Turn(kind="turn", duration_s=20.0, turn_rate_deg_per_s=4.5)
HARD_RIGHT = Turn(kind="turn", duration_s=15.0, lateral_acceleration_g=-2.0)
FASTER = SpeedChange(kind="speed-change", duration_s=8.0, to_speed_m_per_s=90.0)
STOP = SpeedChange(kind="speed-change", duration_s=30.0, to_speed_m_per_s=0.0)
PATH = (STRAIGHT, LEFT, FASTER, HARD_RIGHT, STRAIGHT)
POSITION, VELOCITY = np.array([100.0, -50.0]), np.array([30.0, 40.0])


def accelerations(time, velocity):
    """Along PATH by its words: what each leg does to a velocity at a time of the whole path."""
    speed = np.linalg.norm(velocity)
    across = np.array([-velocity[1], velocity[0], *velocity[2:] * 0]) / np.hypot(*velocity[:2])
    if 10.0 <= time < 30.0:
        return math.radians(4.5) * np.hypot(*velocity[:2]) * across
    if 30.0 <= time < 38.0:
        return 5.0 * velocity / speed  # from 50 to 90 m/s in 8 s
    if 38.0 <= time < 53.0:
        return -2.0 * 9.80665 * across
    return np.zeros(2)


def integrated(times):
    """Position and velocity by numerical integration, leg by leg."""
    state, now, found = np.concatenate([POSITION, VELOCITY]), 0.0, []
    for time in times:
        for stop in sorted({time, *(end for end in (10.0, 30.0, 38.0, 53.0) if now < end < time)}):
            middle = (now + stop) / 2  # the same leg throughout

            def drift(_, x, middle=middle):
                return np.concatenate([x[2:], accelerations(middle, x[2:])])

            if stop > now:
                state = solve_ivp(drift, (now, stop), state, rtol=1e-11, atol=1e-9).y[:, -1]
            now = stop
        found.append(state)
    return np.array(found)


def test_legs_are_the_motion_that_their_words_say():
    times = np.array([0.0, 3.0, 10.0, 17.3, 29.9, 30.0, 34.0, 45.5, 53.0, 60.0, 90.0])
    states = states_along(PATH, POSITION, VELOCITY, times)
    np.testing.assert_allclose(states[:, :4], integrated(times), rtol=1e-8, atol=1e-6)


def test_position_and_velocity_do_not_jump_where_legs_meet():
    for end in np.cumsum([leg.duration_s for leg in PATH]):
        before, after = states_along(PATH, POSITION, VELOCITY, [end - 1e-7, end])
        np.testing.assert_allclose(before[:4], after[:4], atol=1e-4)


def test_the_acceleration_is_the_slope_of_the_velocity():
    times = np.array([5.0, 20.0, 33.0, 44.0, 70.0])
    step = 1e-4
    low, here, high = (
        states_along(PATH, POSITION, VELOCITY, times + shift) for shift in (-step, 0.0, step)
    )
    np.testing.assert_allclose(here[:, 4:], (high - low)[:, 2:4] / (2 * step), atol=1e-5)


def test_a_full_circle_comes_back_to_where_it_began():
    circle = Turn(kind="turn", duration_s=80.0, turn_rate_deg_per_s=4.5)
    (end,) = states_along((circle,), POSITION, VELOCITY, [80.0])
    np.testing.assert_allclose(end[:4], [*POSITION, *VELOCITY], atol=1e-9)


def test_a_turn_at_an_acceleration_has_its_radius():
    """r = v^2 / a: 50 m/s at 2 g is 127.46 m, and half a turn ends two radii to the right."""
    half = math.pi * 50.0 / (2 * 9.80665)
    (end,) = states_along((HARD_RIGHT,), np.zeros(2), np.array([50.0, 0.0]), [half])
    np.testing.assert_allclose(end[:2], [0.0, -2 * 50.0**2 / (2 * 9.80665)], atol=1e-9)
    assert math.isclose(np.linalg.norm(end[4:]), 2 * 9.80665)


def test_a_slow_turn_is_straight_to_the_last_digit():
    slow = Turn(kind="turn", duration_s=10.0, turn_rate_deg_per_s=1e-12)
    found, straight = (
        states_along((leg,), POSITION, VELOCITY, [7.0])[0] for leg in (slow, STRAIGHT)
    )
    np.testing.assert_allclose(found[:2], straight[:2], rtol=1e-12)


def test_in_space_a_turn_is_in_the_horizontal_plane_and_the_climb_goes_on():
    (end,) = states_along((LEFT,), np.zeros(3), np.array([30.0, 40.0, -7.0]), [10.0])
    (plane,) = states_along((LEFT,), np.zeros(2), VELOCITY, [10.0])
    np.testing.assert_array_equal(end[[0, 1, 3, 4]], plane[:4])
    np.testing.assert_array_equal(end[[2, 5, 8]], [-70.0, -7.0, 0.0])


def test_behind_the_last_leg_it_goes_straight_on():
    end, later = states_along((LEFT,), POSITION, VELOCITY, [20.0, 35.0])
    np.testing.assert_allclose(later[:2], end[:2] + 15.0 * end[2:4])
    np.testing.assert_array_equal(later[2:], [*end[2:4], 0.0, 0.0])


def test_a_target_can_come_to_a_stop_and_stays_there():
    (end, later) = states_along((STOP,), np.zeros(2), VELOCITY, [30.0, 50.0])
    np.testing.assert_allclose(end[:2], VELOCITY * 15.0)
    np.testing.assert_allclose(later, [*end[:2], 0, 0, 0, 0], atol=1e-12)


def test_one_axis_has_no_turn_but_the_other_legs():
    (end,) = states_along((STRAIGHT, STOP), np.zeros(1), np.array([-6.0]), [40.0])
    np.testing.assert_allclose(end, [-60.0 - 90.0, 0.0, 0.0], atol=1e-12)


@pytest.mark.parametrize(
    ("legs", "velocity", "key", "rule"),
    [
        ((STRAIGHT, LEFT), [6.0], "legs[1].kind", "needs two axes"),
        ((HARD_RIGHT,), [0.0, 0.0, 5.0], "legs[0].lateral_acceleration_g", "stands still"),
        ((STOP, STRAIGHT, FASTER), [3.0, 4.0], "legs[2].kind", "has no direction"),
    ],
)
def test_legs_that_cannot_be_flown_are_named(legs, velocity, key, rule):
    with pytest.raises(BadValue, match=rule) as raised:
        check_legs(legs, np.array(velocity))
    assert raised.value.key == key
