"""A turn at a stated rate in a plane; white-noise acceleration disturbs it.

Unlike the coordinated turn the rate is no part of the state, so the motion is linear: one of the
modes of a target that turns now and then.

Source: Bar-Shalom, Li and Kirubarajan (2001), section 11.7.1 (known turn rate).
"""

from __future__ import annotations

import math
from typing import Any, Literal, Self

import numpy as np
from pydantic import model_validator

from filters.compiled import model_function
from filters.models.contract import STATE_AFTER, STATE_MATRIX, MotionModel
from filters.models.motion.chain_of_integrators import spread_block
from filters.models.motion.coordinated_turn import arc_factors
from filters.models.motion.target import Target
from filters.models.record import BadValue, NonNegative, Real

# Below this angle the closed forms of the noise lose digits to cancellation; their series do not.
_SMALL_ANGLE = 1e-2


@model_function(STATE_MATRIX)
def turn_matrix(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Transition matrix of position and velocity; parameters: axes, psd, rate."""
    angle = parameters[2] * interval
    along, across, _, _ = arc_factors(angle)
    sine, cosine = math.sin(angle), math.cos(angle)
    out[:] = 0.0
    out[0, 0] = 1.0
    out[1, 1] = 1.0
    out[0, 2] = interval * along
    out[0, 3] = -interval * across
    out[1, 2] = interval * across
    out[1, 3] = interval * along
    out[2, 2] = cosine
    out[2, 3] = -sine
    out[3, 2] = sine
    out[3, 3] = cosine


@model_function(STATE_AFTER)
def state_on_arc(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Position and velocity move on along the arc."""
    angle = parameters[2] * interval
    along, across, _, _ = arc_factors(angle)
    sine, cosine = math.sin(angle), math.cos(angle)
    east, north = state[2], state[3]
    out[0] = state[0] + interval * (along * east - across * north)
    out[1] = state[1] + interval * (across * east + along * north)
    out[2] = cosine * east - sine * north
    out[3] = sine * east + cosine * north


@model_function(STATE_MATRIX)
def noise_on_arc(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Q, the integral of F(t) G psd G' F(t)' over the interval: exact for white acceleration."""
    psd, angle = parameters[1], parameters[2] * interval
    square = angle * angle
    if abs(angle) < _SMALL_ANGLE:
        along = 0.5 * (1 - square / 12 * (1 - square / 30))
        across = (1 - square / 20 * (1 - square / 42)) / 6
    else:
        along = (1 - math.cos(angle)) / square
        across = (angle - math.sin(angle)) / (square * angle)
    cross = psd * interval**2
    out[:] = 0.0
    spread_block(2, 0, 0, 2 * psd * interval**3 * across, out)
    spread_block(2, 0, 1, cross * along, out)
    spread_block(2, 1, 0, cross * along, out)
    spread_block(2, 1, 1, psd * interval, out)
    out[0, 3] = cross * angle * across
    out[1, 2] = -out[0, 3]
    out[3, 0] = out[0, 3]
    out[2, 1] = out[1, 2]


class ConstantTurn(Target):
    """A plane target that turns at a stated rate."""

    motion: Literal["constant-turn"]
    """Which motion model: a turn at a stated rate."""
    turn_rate_deg_per_s: Real
    """Turn rate, counter-clockwise, deg/s."""
    acceleration_psd_m2_per_s3: NonNegative
    """Power spectral density of the white-noise acceleration along each axis, m2/s3."""

    @classmethod
    def state_size_along(cls, axes: int) -> int | None:
        """Length of a state; in a plane only."""
        return 4 if axes == 2 else None

    def motion_model(self) -> MotionModel:
        """Functions and parameters for the kernels."""
        rate = math.radians(self.turn_rate_deg_per_s)
        return MotionModel(
            state_on_arc.compiled,
            turn_matrix.compiled,
            noise_on_arc.compiled,
            np.array([self.axes, self.acceleration_psd_m2_per_s3, rate]),
            linear=True,
        )

    @model_validator(mode="after")
    def _moves_in_a_plane(self) -> Self:
        if self.axes != 2:
            raise BadValue(
                "start_position_m",
                "must have two entries, as constant-turn moves in a plane",
                "give two, or choose another motion",
            )
        return self
