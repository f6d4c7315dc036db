"""Nearly constant acceleration: white-noise jerk along each axis.

Source: Bar-Shalom, Li and Kirubarajan (2001), section 6.2.3 (continuous Wiener process
acceleration).
"""

from __future__ import annotations

from typing import Any, Literal

import numpy as np

from filters.compiled import model_function
from filters.models.contract import STATE_MATRIX, MotionModel
from filters.models.motion.chain_of_integrators import (
    constant_acceleration_matrix,
    constant_acceleration_state,
    spread_block,
)
from filters.models.motion.target_with_acceleration import TargetWithAcceleration
from filters.models.record import NonNegative


@model_function(STATE_MATRIX)
def white_jerk_noise(parameters: Any, interval: float, state: Any, out: Any) -> None:
    """Q of an axis: integral of psd * g g' with g(t) = (t^2/2, t, 1)."""
    axes, psd = int(parameters[0]), parameters[1]
    out[:] = 0.0
    spread_block(axes, 0, 0, psd * interval**5 / 20, out)
    spread_block(axes, 0, 1, psd * interval**4 / 8, out)
    spread_block(axes, 1, 0, psd * interval**4 / 8, out)
    spread_block(axes, 0, 2, psd * interval**3 / 6, out)
    spread_block(axes, 2, 0, psd * interval**3 / 6, out)
    spread_block(axes, 1, 1, psd * interval**3 / 3, out)
    spread_block(axes, 1, 2, psd * interval**2 / 2, out)
    spread_block(axes, 2, 1, psd * interval**2 / 2, out)
    spread_block(axes, 2, 2, psd * interval, out)


class NearlyConstantAcceleration(TargetWithAcceleration):
    """Acceleration disturbed by white-noise jerk of a power spectral density."""

    motion: Literal["nearly-constant-acceleration"]
    """Which motion model: acceleration disturbed by white-noise jerk."""
    jerk_psd_m2_per_s5: NonNegative
    """Power spectral density of the white-noise jerk along each axis, m2/s5."""

    def motion_model(self) -> MotionModel:
        """Functions and parameters for the kernels."""
        return MotionModel(
            constant_acceleration_state.compiled,
            constant_acceleration_matrix.compiled,
            white_jerk_noise.compiled,
            np.array([self.axes, self.jerk_psd_m2_per_s5], float),
            linear=True,
        )
