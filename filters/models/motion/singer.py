"""Singer acceleration: exponentially correlated, along each axis.

The acceleration is a first-order Markov process of variance sd^2 whose correlation falls by e in a
manoeuvre time. F and Q are exact. As the manoeuvre time t goes to 0 with 2 sd^2 t kept, the motion
is that of white-noise acceleration of that density; as it grows with 2 sd^2 / t kept, that of
white-noise jerk.

Source: Singer (1970), Estimating optimal tracking filter performance for manned maneuvering
targets, IEEE Transactions on Aerospace and Electronic Systems 6(4), for the exponential
correlation; Q here is its integral, arranged so that nothing cancels.
"""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field

from filters.compiled import helper, model_function
from filters.models.contract import STATE_AFTER, STATE_MATRIX, MotionModel
from filters.models.motion.chain_of_integrators import spread_block
from filters.models.motion.target_with_acceleration import TargetWithAcceleration
from filters.models.record import NonNegative, Positive

# Below this many manoeuvre times the closed forms lose digits to cancellation; the series do not.
_SHORT = 1.0
_TERMS = 24  # the last of the series is below 1e-17 of the first


@helper
def velocity_gain(x: float) -> float:
    """Velocity gained from unit acceleration after x manoeuvre times: 1 - exp(-x)."""
    return -math.expm1(-x)


@helper
def position_gain(x: float) -> float:
    """Position gained from unit acceleration: x - 1 + exp(-x), the integral of velocity_gain."""
    if x > _SHORT:
        return x - 1.0 + math.exp(-x)
    term, total = 0.5 * x * x, 0.0
    for k in range(3, _TERMS):
        total += term
        term *= -x / k
    return total


@helper
def squared_velocity_gain(x: float) -> float:
    """Integral of velocity_gain^2 from 0 to x."""
    if x > _SHORT:
        return x - 2.0 * velocity_gain(x) - 0.5 * math.expm1(-2.0 * x)
    # (1 - e^-s)^2 is the sum over k >= 2 of (2^k - 2) (-s)^k / k!
    power, total = 0.5 * x * x, 0.0  # (-x)^k / k!
    for k in range(2, _TERMS):
        total += (2.0**k - 2.0) * power / (k + 1)
        power *= -x / (k + 1)
    return total * x


@helper
def squared_position_gain(x: float) -> float:
    """Integral of position_gain^2 from 0 to x."""
    decay = math.exp(-x)
    if x > _SHORT:
        return x * (x * (x / 3.0 - 1.0) + 1.0) - 2.0 * x * decay - 0.5 * math.expm1(-2.0 * x)
    # (s - 1 + e^-s)^2 is the sum over k >= 4 of (2^k - 2 k - 2) (-s)^k / k!
    power, total = x**4 / 24.0, 0.0
    for k in range(4, _TERMS):
        total += (2.0**k - 2.0 * k - 2.0) * power / (k + 1)
        power *= -x / (k + 1)
    return total * x


@model_function(STATE_AFTER)
def singer_state(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Position and velocity move on under an acceleration that dies away."""
    axes, time = int(parameters[0]), parameters[2]
    x = interval / time
    position, velocity = time * time * position_gain(x), time * velocity_gain(x)
    for axis in range(axes):
        acceleration = state[2 * axes + axis]
        out[axis] = state[axis] + interval * state[axes + axis] + position * acceleration
        out[axes + axis] = state[axes + axis] + velocity * acceleration
        out[2 * axes + axis] = math.exp(-x) * acceleration


@model_function(STATE_MATRIX)
def singer_matrix(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Transition matrix of position, velocity and acceleration."""
    axes, time = int(parameters[0]), parameters[2]
    x = interval / time
    out[:] = 0.0
    spread_block(axes, 0, 0, 1.0, out)
    spread_block(axes, 0, 1, interval, out)
    spread_block(axes, 0, 2, time * time * position_gain(x), out)
    spread_block(axes, 1, 1, 1.0, out)
    spread_block(axes, 1, 2, time * velocity_gain(x), out)
    spread_block(axes, 2, 2, math.exp(-x), out)


@model_function(STATE_MATRIX)
def singer_noise(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Q of an axis: 2 sd^2 / t times the integral of g g', g = (position, velocity, 1) gained."""
    axes, variance, time = int(parameters[0]), parameters[1] ** 2, parameters[2]
    x = interval / time
    position, velocity = position_gain(x), velocity_gain(x)
    velocity_square = squared_velocity_gain(x)
    scale = 2.0 * variance
    # By parts, as each gain is the integral of the one before it.
    position_and_velocity = scale * time**3 * 0.5 * position * position
    position_alone = scale * time**2 * (position * velocity - velocity_square)
    velocity_alone = scale * time * 0.5 * velocity * velocity
    out[:] = 0.0
    spread_block(axes, 0, 0, scale * time**4 * squared_position_gain(x), out)
    spread_block(axes, 0, 1, position_and_velocity, out)
    spread_block(axes, 1, 0, position_and_velocity, out)
    spread_block(axes, 0, 2, position_alone, out)
    spread_block(axes, 2, 0, position_alone, out)
    spread_block(axes, 1, 1, scale * time**2 * velocity_square, out)
    spread_block(axes, 1, 2, velocity_alone, out)
    spread_block(axes, 2, 1, velocity_alone, out)
    spread_block(axes, 2, 2, -variance * math.expm1(-2.0 * x), out)


class Singer(TargetWithAcceleration):
    """Acceleration that keeps for a while and is correlated exponentially."""

    motion: Literal["singer"]
    """Which motion model: an exponentially correlated acceleration."""
    acceleration_sd_m_per_s2: NonNegative
    """Standard deviation of the acceleration along each axis, m/s2."""
    manoeuvre_time_s: Annotated[Positive, Field(le=1e12)]
    """Time in which the acceleration's correlation falls by a factor e, s."""

    def motion_model(self) -> MotionModel:
        """Functions and parameters for the kernels."""
        return MotionModel(
            singer_state.compiled,
            singer_matrix.compiled,
            singer_noise.compiled,
            np.array([self.axes, self.acceleration_sd_m_per_s2, self.manoeuvre_time_s], float),
            linear=True,
        )
