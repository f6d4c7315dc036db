"""Coordinated turn in a plane with an unknown turn rate, the state's last entry.

Over an interval the velocity turns by w = turn rate * interval; the position moves along the arc.
White-noise acceleration disturbs the velocity, a random walk the turn rate.

Source: Bar-Shalom, Li and Kirubarajan (2001), section 11.7 (nearly coordinated turn, Cartesian
velocity).
"""

from __future__ import annotations

import math
from typing import Any, ClassVar, Literal, Self

import numpy as np
from pydantic import model_validator

from filters.compiled import helper, model_function
from filters.models.contract import STATE_AFTER, STATE_MATRIX, MotionModel
from filters.models.motion.chain_of_integrators import spread_block
from filters.models.motion.target import Target
from filters.models.record import BadValue, NonNegative, Positive, Real

# Below this angle the closed forms lose digits to cancellation; their series do not.
_SMALL_ANGLE = 1e-2


@helper
def arc_factors(angle: float) -> tuple[float, float, float, float]:
    """Return sin(w)/w, (1 - cos w)/w and their derivatives with respect to w."""
    if abs(angle) < _SMALL_ANGLE:
        square = angle * angle
        along = 1 - square / 6 * (1 - square / 20 * (1 - square / 42))
        across = angle / 2 * (1 - square / 12 * (1 - square / 30))
        along_slope = -angle / 3 * (1 - square / 10 * (1 - square / 28))
        across_slope = 0.5 - square / 8 * (1 - square / 18 * (1 - square / 40))
        return along, across, along_slope, across_slope
    sine, cosine = math.sin(angle), math.cos(angle)
    along, across = sine / angle, (1 - cosine) / angle
    return along, across, (cosine - along) / angle, (sine - across) / angle


@model_function(STATE_AFTER)
def turned_state(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Move along an arc at the state's own turn rate."""
    east, north, rate = state[2], state[3], state[4]
    along, across, _, _ = arc_factors(rate * interval)
    sine, cosine = math.sin(rate * interval), math.cos(rate * interval)
    out[0] = state[0] + interval * (along * east - across * north)
    out[1] = state[1] + interval * (across * east + along * north)
    out[2] = cosine * east - sine * north
    out[3] = sine * east + cosine * north
    out[4] = rate


@model_function(STATE_MATRIX)
def turned_jacobian(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Derivative of turned_state."""
    east, north, rate = state[2], state[3], state[4]
    along, across, along_slope, across_slope = arc_factors(rate * interval)
    sine, cosine = math.sin(rate * interval), math.cos(rate * interval)
    out[:] = 0.0
    for entry in range(5):
        out[entry, entry] = 1.0
    out[0, 2] = interval * along
    out[0, 3] = -interval * across
    out[1, 2] = interval * across
    out[1, 3] = interval * along
    out[2, 2] = cosine
    out[2, 3] = -sine
    out[3, 2] = sine
    out[3, 3] = cosine
    # d/d rate = interval * d/d angle
    out[0, 4] = interval**2 * (along_slope * east - across_slope * north)
    out[1, 4] = interval**2 * (across_slope * east + along_slope * north)
    out[2, 4] = interval * (-sine * east - cosine * north)
    out[3, 4] = interval * (cosine * east - sine * north)


@model_function(STATE_MATRIX)
def turn_noise(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """White-noise acceleration in the plane; a random walk of the turn rate."""
    psd, rate_psd = parameters[0], parameters[1]
    cross = psd * interval**2 / 2
    out[:] = 0.0
    spread_block(2, 0, 0, psd * interval**3 / 3, out)
    spread_block(2, 0, 1, cross, out)
    spread_block(2, 1, 0, cross, out)
    spread_block(2, 1, 1, psd * interval, out)
    out[4, 4] = rate_psd * interval


class CoordinatedTurn(Target):
    """A plane target that turns at a rate which is part of its state."""

    motion: Literal["coordinated-turn"]
    """Which motion model: a turn rate that is part of the state."""
    acceleration_psd_m2_per_s3: NonNegative
    """Power spectral density of the white-noise acceleration along each axis, m2/s3."""
    turn_rate_psd_deg2_per_s3: NonNegative
    """Power spectral density of the white noise that drives the turn rate, deg2/s3."""
    start_turn_rate_deg_per_s: Real
    """Mean of the turn rate at scan 1, counter-clockwise, deg/s."""
    start_turn_rate_sd_deg_per_s: Positive | None = None
    """Standard deviation of the turn rate at scan 1, deg/s."""

    further_spreads: ClassVar[tuple[str, ...]] = ("start_turn_rate_sd_deg_per_s",)

    @classmethod
    def state_size_along(cls, axes: int) -> int | None:
        """Length of a state; in a plane only."""
        return 5 if axes == 2 else None

    def start_further(self) -> tuple[float, ...]:
        """Turn rate, rad/s."""
        return (math.radians(self.start_turn_rate_deg_per_s),)

    def state_of(
        self, position: np.ndarray, velocity: np.ndarray, acceleration: np.ndarray
    ) -> np.ndarray:
        """State of a target that moves like this, (n,) SI; one that stands still does not turn."""
        across = velocity[0] * acceleration[1] - velocity[1] * acceleration[0]
        square = velocity @ velocity
        rate = across / square if square > 0.0 else 0.0
        return np.array([*position, *velocity, rate])

    def state_units(self) -> np.ndarray:
        """Turn rates are degrees in the study file."""
        return np.array([1.0, 1.0, 1.0, 1.0, math.radians(1.0)])

    def motion_model(self) -> MotionModel:
        """Functions and parameters for the kernels."""
        rate_psd = self.turn_rate_psd_deg2_per_s3 * math.radians(1.0) ** 2
        return MotionModel(
            turned_state.compiled,
            turned_jacobian.compiled,
            turn_noise.compiled,
            np.array([self.acceleration_psd_m2_per_s3, rate_psd]),
            linear=False,
        )

    @model_validator(mode="after")
    def _moves_in_a_plane(self) -> Self:
        if self.axes != 2:
            raise BadValue(
                "start_position_m",
                "must have two entries, as coordinated-turn moves in a plane",
                "give two, or choose another motion",
            )
        return self
