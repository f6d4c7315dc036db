"""Independent noise of the components of a measurement, the same everywhere or growing with range.

The parameters of a sensor begin with the standard deviations, then a table of factors against
range: as `table_numbers` lays it out, or a single 0 without one.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from filters.compiled import helper, model_function
from filters.models.contract import MEASUREMENT_MATRIX
from filters.models.geometry import range_between
from filters.models.over_range import table_numbers, table_value


def noise_parameters(
    deviations: np.ndarray, factors: Sequence[tuple[float, float]] | None
) -> np.ndarray:
    """Numbers with which a sensor's parameters begin.

    deviations  (m,) SI
    factors     (range, factor) rows, or None
    """
    table = np.zeros(1) if factors is None else table_numbers(factors)
    return np.concatenate([deviations, table])


@helper
def behind_noise(m: int, parameters: Any) -> int:
    """Where the parameters of the noise end."""
    return m + 1 + 2 * int(parameters[m])


@model_function(MEASUREMENT_MATRIX)
def independent_noise(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """R = diag(sd^2)."""
    out[:] = 0.0
    for i in range(out.shape[0]):
        out[i, i] = parameters[i] ** 2


@model_function(MEASUREMENT_MATRIX)
def noise_over_range(parameters: Any, site: Any, state: Any, out: Any) -> None:
    """R = diag((factor sd)^2), the factor that of the state's range from the site."""
    m = out.shape[0]
    factor = table_value(parameters, m, range_between(site.shape[0] // 2, state, site))
    out[:] = 0.0
    for i in range(m):
        out[i, i] = (factor * parameters[i]) ** 2
