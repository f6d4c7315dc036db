"""The contract of a motion model: where the target starts, and how it moves from there."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
from pydantic import Field, model_validator

from filters.models.contract import MotionModel
from filters.models.record import Positive, Real, Record

PerAxis = tuple[Real, ...]
SpreadPerAxis = tuple[Positive, ...]


class Target(Record):
    """Start of a target and the parameters of its motion; a motion adds fields and functions.

    The prior holds at the time of scan 1. Its spread is given as standard deviations or as a full
    covariance in the order of the state: positions, velocities, then what the motion adds.
    """

    start_position_m: PerAxis = Field(min_length=1, max_length=3)
    start_velocity_m_per_s: PerAxis = Field(min_length=1, max_length=3)
    start_position_sd_m: SpreadPerAxis | None = None
    start_velocity_sd_m_per_s: SpreadPerAxis | None = None
    start_covariance: tuple[PerAxis, ...] | None = None

    # Keys of further standard deviations, in the order of the state behind the velocity.
    further_spreads: ClassVar[tuple[str, ...]] = ()

    @property
    def axes(self) -> int:
        """Number of spatial axes."""
        return len(self.start_position_m)

    @property
    def state_size(self) -> int:
        """Length of the state."""
        return len(self.start_mean())

    def start_further(self) -> tuple[float, ...]:
        """Start of what the state holds behind position and velocity, SI."""
        return ()

    def state_units(self) -> np.ndarray:
        """SI units in one unit of the study file, per entry of the state (n,)."""
        return np.ones(self.state_size)

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

    def _spread_keys(self) -> tuple[str, ...]:
        return ("start_position_sd_m", "start_velocity_sd_m_per_s", *self.further_spreads)

    @model_validator(mode="after")
    def _sizes_agree(self) -> Self:
        axes = self.axes
        for key, value in self:
            is_per_axis = isinstance(value, tuple) and key != "start_covariance"
            if is_per_axis and len(value) != axes:
                raise ValueError(
                    f"{key} has {len(value)} entries but start_position_m has {axes}; "
                    "give one for each axis"
                )
        return self

    @model_validator(mode="after")
    def _one_spread_that_is_a_covariance(self) -> Self:
        keys = self._spread_keys()
        given = [key for key in keys if getattr(self, key) is not None]
        if self.start_covariance is None:
            missing = [key for key in keys if key not in given]
            if missing:
                raise ValueError(
                    f"{', '.join(missing)} missing; give it, or start_covariance in its place"
                )
            return self
        if given:
            raise ValueError(f"start_covariance and {given[0]} are both given; keep one of the two")
        _check_covariance(self.start_covariance, self.state_size)
        return self


def _check_covariance(rows: tuple[PerAxis, ...], size: int) -> None:
    if len(rows) != size or any(len(row) != size for row in rows):
        raise ValueError(
            f"start_covariance must have {size} rows of {size} numbers, in the order of the state"
        )
    matrix = np.array(rows, float)
    if not np.allclose(matrix, matrix.T, rtol=1e-9, atol=0.0):
        raise ValueError("start_covariance must be symmetric")
    if np.linalg.eigvalsh(matrix)[0] <= 0.0:
        raise ValueError("start_covariance must be positive definite: an eigenvalue is not above 0")
