"""What motions share whose state holds the acceleration: where it starts."""

from __future__ import annotations

from typing import ClassVar

import numpy as np
from pydantic import Field

from filters.models.motion.target import SpreadPerAxis, Target
from filters.models.record import PerAxis


class TargetWithAcceleration(Target):
    """A target whose state is position, velocity and acceleration."""

    start_acceleration_m_per_s2: PerAxis = Field(min_length=1, max_length=3)
    """Mean of the acceleration at scan 1 along each axis, m/s2."""
    start_acceleration_sd_m_per_s2: SpreadPerAxis | None = None
    """Standard deviation of the acceleration at scan 1 along each axis, m/s2."""

    further_spreads: ClassVar[tuple[str, ...]] = ("start_acceleration_sd_m_per_s2",)

    @classmethod
    def state_size_along(cls, axes: int) -> int | None:
        """Length of a state along so many axes."""
        return 3 * axes

    def start_further(self) -> tuple[float, ...]:
        """Acceleration along each axis, m/s2."""
        return self.start_acceleration_m_per_s2

    def state_of(
        self, position: np.ndarray, velocity: np.ndarray, acceleration: np.ndarray
    ) -> np.ndarray:
        """State of a target that moves like this, (n,) SI."""
        return np.concatenate([position, velocity, acceleration])
