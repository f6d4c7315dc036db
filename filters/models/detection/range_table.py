"""A detection probability that changes with range by a table."""

from __future__ import annotations

from typing import Any, Literal, Self

import numpy as np
from pydantic import model_validator

from filters.compiled import model_function
from filters.models.contract import SCALAR_OF, DetectionModel
from filters.models.detection.law import DetectionLaw, behind_blind, is_blind
from filters.models.geometry import range_between
from filters.models.over_range import (
    ProbabilityOverRange,
    check_over_range,
    table_numbers,
    table_value,
)


@model_function(SCALAR_OF)
def probability_over_range(parameters: Any, site: Any, state: Any) -> float:
    """Probability at the state's range, linear between the table's points."""
    if is_blind(parameters, site, state):
        return 0.0
    distance = range_between(site.shape[0] // 2, state, site)
    return table_value(parameters, behind_blind(parameters), distance)


class RangeTableDetection(DetectionLaw):
    """A probability stated at some ranges."""

    kind: Literal["range-table"]
    """Which detection law: a table against range."""
    probability_over_range: ProbabilityOverRange
    """Rows of range in m and detection probability; linear between, held beyond the ends."""

    def model(self) -> DetectionModel:
        """Function and parameters for the kernels."""
        table = table_numbers(self.probability_over_range)
        return DetectionModel(
            probability_over_range.compiled, np.concatenate([self.blind_numbers(), table])
        )

    @model_validator(mode="after")
    def _ranges_grow(self) -> Self:
        check_over_range("probability_over_range", self.probability_over_range)
        return self
