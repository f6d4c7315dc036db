"""The gate of a strategy, stated by its probability."""

from __future__ import annotations

import math
from typing import Annotated

from pydantic import Field
from scipy.stats import chi2

from filters.update import Gate

GateProbability = Annotated[float, Field(strict=True, allow_inf_nan=False, gt=0.0, le=1.0)]


def gate_of(probability: float, measurement_size: int) -> Gate:
    """Gate of a probability PG, the chi-square quantile for that size; 1 is no gate."""
    if probability >= 1.0:
        return Gate(1.0, math.inf)
    return Gate(probability, float(chi2.ppf(probability, measurement_size)))
