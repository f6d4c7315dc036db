"""Checked parameters: the base of every record that a study file fills, and its kinds of number.

Numbers are strict: a study file that says `true` or `"3"` where a number belongs is mistaken.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Annotated, Self

from pydantic import BaseModel, ConfigDict, Field, model_validator

Real = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Positive = Annotated[float, Field(strict=True, allow_inf_nan=False, gt=0.0)]
NonNegative = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0.0)]
Probability = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0.0, le=1.0)]
Count = Annotated[int, Field(strict=True, ge=1, le=1_000_000_000)]
Interval = tuple[Real, Real]
PerAxis = tuple[Real, ...]

_MOST = 1e30  # larger numbers overflow when they are squared and multiplied

Ways = tuple[tuple[str, ...], ...]  # ways to state one thing, each by some keys


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


@contextmanager
def within(key: str) -> Iterator[None]:
    """Name what is found wrong inside a record that stands under a key."""
    try:
        yield
    except BadValue as wrong:
        raise BadValue(f"{key}.{wrong.key}", wrong.rule, wrong.remedy) from None


def _largest(value: object) -> float:
    """Size of a number, or of the largest in a list of lists; 0 for anything else."""
    if isinstance(value, tuple):
        return max(map(_largest, value), default=0.0)
    return abs(value) if isinstance(value, int | float) else 0.0


class Record(BaseModel):
    """Frozen parameters, checked once; unknown keys are mistakes.

    The text under a field says what it means and its unit; editors show it.
    """

    model_config = ConfigDict(frozen=True, extra="forbid", use_attribute_docstrings=True)

    @classmethod
    def alternatives(cls) -> tuple[Ways, ...]:
        """Things that can be stated in one of several ways; the ways of each."""
        return ()

    @classmethod
    def other_ways(cls, key: str) -> list[str]:
        """Return the keys that state in another way what this key states."""
        return [
            other
            for ways in cls.alternatives()
            if any(key in way for way in ways)
            for way in ways
            if key not in way
            for other in way
        ]

    @model_validator(mode="after")
    def _numbers_can_be_reckoned_with(self) -> Self:
        for name, value in self:
            if _largest(value) > _MOST:
                key = type(self).model_fields[name].alias or name
                raise BadValue(
                    key, f"is beyond {_MOST:g} in size", "give a number that can be reckoned with"
                )
        return self

    @model_validator(mode="after")
    def _states_each_thing_in_one_way(self) -> Self:
        for ways in self.alternatives():
            stated = [key for way in ways for key in way if getattr(self, key) is not None]
            rivals = [key for key in stated if key in self.other_ways(stated[0])]
            if rivals:
                raise BadValue(
                    stated[0], f"says the same as {' and '.join(rivals)}", "keep one of them"
                )
        return self
