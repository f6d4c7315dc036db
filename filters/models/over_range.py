"""Tables against range: linear between their points, held beyond the ends."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Annotated, Any

import numpy as np
from pydantic import Field

from filters.compiled import helper
from filters.models.record import BadValue, NonNegative, Positive, Probability

OverRange = Annotated[tuple[tuple[NonNegative, NonNegative], ...], Field(min_length=1)]
FactorOverRange = Annotated[tuple[tuple[NonNegative, Positive], ...], Field(min_length=1)]
ProbabilityOverRange = Annotated[tuple[tuple[NonNegative, Probability], ...], Field(min_length=1)]

# Ends the key of every table, so that a factor knows that it multiplies the values alone.
OVER_RANGE = "_over_range"


def check_over_range(key: str, rows: Sequence[tuple[float, float]]) -> None:
    """Check that the ranges of a table grow.

    raises      BadValue naming the row
    """
    for place in range(1, len(rows)):
        if not rows[place - 1][0] < rows[place][0]:
            raise BadValue(
                f"{key}[{place}]", "must have a longer range than the row before", "order its rows"
            )


def table_numbers(rows: Sequence[tuple[float, float]], scale: float = 1.0) -> np.ndarray:
    """Numbers of a table for `table_value`: their count, the places, then the values times scale.

    rows    (place, value) in growing order of the place
    """
    places, values = np.array(rows, float).T
    return np.concatenate([[len(rows)], places, scale * values])


@helper
def table_value(numbers: Any, start: int, place: float) -> float:
    """Value at a place; the table's numbers begin at numbers[start]."""
    count = int(numbers[start])
    places, values = start + 1, start + 1 + count
    if place <= numbers[places]:
        return numbers[values]
    if place >= numbers[places + count - 1]:
        return numbers[values + count - 1]
    low, high = 0, count - 1
    while high - low > 1:
        middle = (low + high) // 2
        if numbers[places + middle] <= place:
            low = middle
        else:
            high = middle
    share = (place - numbers[places + low]) / (numbers[places + high] - numbers[places + low])
    return numbers[values + low] + share * (numbers[values + high] - numbers[values + low])
