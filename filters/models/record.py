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
Count = Annotated[int, Field(strict=True, ge=1, le=1_000_000_000)]
Interval = tuple[Real, Real]


class BadValue(ValueError):
    """A value that breaks a rule between the keys of a record.

    key         where to mend it: a field of the record, dotted where it lies deeper
    rule        what is wrong, to be read behind the key
    remedy      what to do instead
    """

    def __init__(self, key: str, rule: str, remedy: str) -> None:
        super().__init__(key, rule, remedy)
        self.key, self.rule, self.remedy = key, rule, remedy

    def __str__(self) -> str:
        return f"{self.key} {self.rule}; {self.remedy}"


class Record(BaseModel):
    """Frozen parameters, checked once; unknown keys are mistakes.

    The text under a field says what it means and its unit; editors show it.
    """

    model_config = ConfigDict(frozen=True, extra="forbid", use_attribute_docstrings=True)
