"""Nearly constant velocity: white-noise acceleration along each axis.

Source: Bar-Shalom, Li and Kirubarajan (2001), Estimation with Applications to Tracking and
Navigation, section 6.2.2 (continuous white-noise acceleration).
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
def white_acceleration_noise(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Q of an axis: psd * [[T^3/3, T^2/2], [T^2/2, T]]."""
    axes, psd = int(parameters[0]), parameters[1]
    cross = psd * interval**2 / 2
    out[:] = 0.0
    spread_block(axes, 0, 0, psd * interval**3 / 3, out)
    spread_block(axes, 0, 1, cross, out)
    spread_block(axes, 1, 0, cross, out)
    spread_block(axes, 1, 1, psd * interval, out)


class NearlyConstantVelocity(Target):
    """Velocity disturbed by white-noise acceleration of a power spectral density."""

    motion: Literal["nearly-constant-velocity"]
    """Which motion model: velocity disturbed by white-noise acceleration."""
    acceleration_psd_m2_per_s3: NonNegative
    """Power spectral density of the white-noise acceleration along each axis, m2/s3."""

    def motion_model(self) -> MotionModel:
        """Functions and parameters for the kernels."""
        return MotionModel(
            constant_velocity_state.compiled,
            constant_velocity_matrix.compiled,
            white_acceleration_noise.compiled,
            np.array([self.axes, self.acceleration_psd_m2_per_s3], float),
            linear=True,
        )
