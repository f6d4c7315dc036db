"""Checked parameters: the base of every record that a study file fills, and its kinds of number.

Numbers are strict: a study file that says `true` or `"3"` where a number belongs is mistaken.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field

Real = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Positive = Annotated[float, Field(strict=True, allow_inf_nan=False, gt=0.0)]
NonNegative = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0.0)]
Probability = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0.0, le=1.0)]
Count = Annotated[int, Field(strict=True, ge=1)]
Interval = tuple[Real, Real]


class Record(BaseModel):
    """Frozen parameters, checked once; unknown keys are mistakes."""

    model_config = ConfigDict(frozen=True, extra="forbid")
