"""What motions share whose state holds the acceleration: where it starts."""

from __future__ import annotations

from typing import ClassVar

from pydantic import Field

from filters.models.motion.target import PerAxis, SpreadPerAxis, Target


class TargetWithAcceleration(Target):
    """A target whose state is position, velocity and acceleration."""

    start_acceleration_m_per_s2: PerAxis = Field(min_length=1, max_length=3)
    """Mean of the acceleration at scan 1 along each axis, m/s2."""
    start_acceleration_sd_m_per_s2: SpreadPerAxis | None = None
    """Standard deviation of the acceleration at scan 1 along each axis, m/s2."""

    further_spreads: ClassVar[tuple[str, ...]] = ("start_acceleration_sd_m_per_s2",)

    def start_further(self) -> tuple[float, ...]:
        """Acceleration along each axis, m/s2."""
        return self.start_acceleration_m_per_s2
