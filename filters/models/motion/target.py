"""The contract of a motion model: where the target starts, and how it moves from there."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
from pydantic import Field, model_validator

from filters.models.contract import MotionModel
from filters.models.record import BadValue, PerAxis, Positive, Record, Ways

SpreadPerAxis = tuple[Positive, ...]


class Target(Record):
    """Start of a target and the parameters of its motion; a motion adds fields and functions.

    The prior holds at the time of scan 1. Its spread is given as standard deviations or as a full
    covariance in the order of the state: positions, velocities, then what the motion adds.
    """

    start_position_m: PerAxis = Field(min_length=1, max_length=3)
    """Mean of the position at scan 1 along each axis, m."""
    start_velocity_m_per_s: PerAxis = Field(min_length=1, max_length=3)
    """Mean of the velocity at scan 1 along each axis, m/s."""
    start_position_sd_m: SpreadPerAxis | None = None
    """Standard deviation of the position at scan 1 along each axis, m."""
    start_velocity_sd_m_per_s: SpreadPerAxis | None = None
    """Standard deviation of the velocity at scan 1 along each axis, m/s."""
    start_covariance: tuple[PerAxis, ...] | None = None
    """Covariance of the state at scan 1, in place of all standard deviations: rows in the order
    positions, velocities, then what the motion adds; in the units of the keys above."""

    # Keys of further standard deviations, in the order of the state behind the velocity.
    further_spreads: ClassVar[tuple[str, ...]] = ()

    @classmethod
    def alternatives(cls) -> tuple[Ways, ...]:
        """The spread of the start is stated in one of two ways."""
        return (*super().alternatives(), (cls._spread_keys(), ("start_covariance",)))

    @property
    def axes(self) -> int:
        """Number of spatial axes."""
        return len(self.start_position_m)

    @property
    def state_size(self) -> int:
        """Length of the state."""
        return len(self.start_mean())

    @classmethod
    def state_size_along(cls, axes: int) -> int | None:
        """Length of a state along so many axes; None where the motion has none."""
        return 2 * axes

    def start_further(self) -> tuple[float, ...]:
        """Start of what the state holds behind position and velocity, SI."""
        return ()

    def state_units(self) -> np.ndarray:
        """SI units in one unit of the study file, per entry of the state (n,)."""
        return np.ones(self.state_size)

    def state_of(
        self, position: np.ndarray, velocity: np.ndarray, acceleration: np.ndarray
    ) -> np.ndarray:
        """State of a target that moves like this, (n,) SI; what that leaves open, as at scan 1."""
        return np.array([*position, *velocity, *self.start_further()], float)

    def start_mean(self) -> np.ndarray:
        """Mean of the prior at scan 1, (n,) SI."""
        return np.array(
            [*self.start_position_m, *self.start_velocity_m_per_s, *self.start_further()], float
        )

    def start_spread(self) -> np.ndarray:
        """Covariance of the prior at scan 1, (n, n) SI."""
        units = self.state_units()
        if self.start_covariance is not None:
            return np.array(self.start_covariance, float) * np.outer(units, units)
        deviations: list[float] = []
        for key in self._spread_keys():
            value = getattr(self, key)
            deviations.extend(value if isinstance(value, tuple) else (value,))
        return np.diag((np.array(deviations, float) * units) ** 2)

    def motion_model(self) -> MotionModel:
        """Functions and parameters for the kernels."""
        raise NotImplementedError

    @classmethod
    def _spread_keys(cls) -> tuple[str, ...]:
        return ("start_position_sd_m", "start_velocity_sd_m_per_s", *cls.further_spreads)

    @model_validator(mode="after")
    def _sizes_agree(self) -> Self:
        axes = self.axes
        for key, value in self:
            is_per_axis = isinstance(value, tuple) and key != "start_covariance"
            if is_per_axis and len(value) != axes:
                raise BadValue(
                    key,
                    f"must have as many entries as start_position_m, which has {axes}",
                    "give one for each axis",
                )
        return self

    @model_validator(mode="after")
    def _spread_is_a_covariance(self) -> Self:
        if self.start_covariance is not None:
            _check_covariance(self.start_covariance, self.state_size)
            return self
        missing = [key for key in self._spread_keys() if getattr(self, key) is None]
        if missing:
            raise BadValue(
                missing[0],
                "is missing",
                f"give {' and '.join(missing)}, or start_covariance in place of all spreads",
            )
        return self


def _check_covariance(rows: tuple[PerAxis, ...], size: int) -> None:
    if len(rows) != size or any(len(row) != size for row in rows):
        raise BadValue(
            "start_covariance",
            f"must have {size} rows of {size} numbers",
            "order them as the state: positions, velocities, then what the motion adds",
        )
    if any(rows[i][i] <= 0.0 for i in range(size)):
        raise BadValue(
            "start_covariance",
            "must be positive definite, but a number on its diagonal is not above 0",
            "give variances above 0 there",
        )
    # As correlations, so that the tolerances mean the same for metres and for degrees per second.
    spread = np.sqrt(np.diag(rows))
    with np.errstate(over="ignore"):
        correlation = np.array(rows, float) / spread / spread[:, np.newaxis]
    if not np.allclose(correlation, correlation.T, rtol=0.0, atol=1e-9):
        raise BadValue(
            "start_covariance", "must be symmetric", "give the same number on both sides"
        )
    if np.abs(correlation).max() > 1.0 + 1e-9 or np.linalg.eigvalsh(correlation)[0] < 1e-12:
        raise BadValue(
            "start_covariance",
            "must be positive definite",
            "lessen the numbers beside the diagonal: a correlation reaches 1",
        )
