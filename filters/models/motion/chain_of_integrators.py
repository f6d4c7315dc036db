"""Motion along independent axes: position, velocity and perhaps acceleration, a chain of integrals.

The state is grouped by order (all positions, all velocities, ...), so one axis's block of a matrix
is spread over the whole with a stride of `axes`. parameters[0] is the number of axes.
"""

from __future__ import annotations

from typing import Any

from filters.compiled import helper, model_function
from filters.models.contract import STATE_AFTER, STATE_MATRIX


@helper
def spread_block(axes: int, row: int, column: int, value: float, out: Any) -> None:
    """Write one entry of an axis's block, the same for every axis."""
    for axis in range(axes):
        out[row * axes + axis, column * axes + axis] = value


@helper
def taylor_matrix(axes: int, orders: int, interval: float, out: Any) -> None:
    """Write F: entry (i, j) of an axis's block is interval^(j-i) / (j-i)! for j >= i."""
    out[:] = 0.0
    for row in range(orders):
        value = 1.0
        for column in range(row, orders):
            spread_block(axes, row, column, value, out)
            value *= interval / (column - row + 1)


@model_function(STATE_AFTER)
def constant_velocity_state(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Position moves on by velocity times interval."""
    axes = int(parameters[0])
    for axis in range(axes):
        velocity = state[axes + axis]
        out[axis] = state[axis] + interval * velocity
        out[axes + axis] = velocity


@model_function(STATE_MATRIX)
def constant_velocity_matrix(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Transition matrix of position and velocity."""
    taylor_matrix(int(parameters[0]), 2, interval, out)


@model_function(STATE_AFTER)
def constant_acceleration_state(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Position and velocity move on under the state's own acceleration."""
    axes = int(parameters[0])
    for axis in range(axes):
        velocity = state[axes + axis]
        acceleration = state[2 * axes + axis]
        out[axis] = state[axis] + interval * (velocity + 0.5 * interval * acceleration)
        out[axes + axis] = velocity + interval * acceleration
        out[2 * axes + axis] = acceleration


@model_function(STATE_MATRIX)
def constant_acceleration_matrix(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Transition matrix of position, velocity and acceleration."""
    taylor_matrix(int(parameters[0]), 3, interval, out)
