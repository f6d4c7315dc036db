"""Nearly constant velocity with an acceleration held between scans and drawn anew at each.

Source: Bar-Shalom, Li and Kirubarajan (2001), section 6.3.2 (discrete white-noise acceleration).
"""

from __future__ import annotations

from typing import Any, Literal

import numpy as np

from filters.compiled import model_function
from filters.models.contract import STATE_MATRIX, MotionModel
from filters.models.motion.chain_of_integrators import (
    constant_velocity_matrix,
    constant_velocity_state,
    spread_block,
)
from filters.models.motion.target import Target
from filters.models.record import NonNegative


@model_function(STATE_MATRIX)
def held_acceleration_noise(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Q of an axis: variance * g g' with g = (T^2/2, T); of rank one."""
    axes, variance = int(parameters[0]), parameters[1] ** 2
    cross = variance * interval**3 / 2
    out[:] = 0.0
    spread_block(axes, 0, 0, variance * interval**4 / 4, out)
    spread_block(axes, 0, 1, cross, out)
    spread_block(axes, 1, 0, cross, out)
    spread_block(axes, 1, 1, variance * interval**2, out)


class PiecewiseConstantAcceleration(Target):
    """Velocity disturbed by an independent acceleration held over each interval."""

    motion: Literal["piecewise-constant-acceleration"]
    """Which motion model: an acceleration drawn anew at each scan and held until the next."""
    acceleration_sd_m_per_s2: NonNegative
    """Standard deviation of the acceleration held over each interval, along each axis, m/s2."""

    def motion_model(self) -> MotionModel:
        """Functions and parameters for the kernels."""
        return MotionModel(
            constant_velocity_state.compiled,
            constant_velocity_matrix.compiled,
            held_acceleration_noise.compiled,
            np.array([self.axes, self.acceleration_sd_m_per_s2], float),
            linear=True,
        )
