"""How far a measurement is from the expected one."""

from __future__ import annotations

from typing import Any

from filters.compiled import helper


@helper
def difference(m: int, periods: Any, detection: Any, expected: Any, out: Any) -> None:
    """Write detection - expected, angles the short way round."""
    for i in range(m):
        value = detection[i] - expected[i]
        if periods[i] > 0.0:
            value -= periods[i] * round(value / periods[i])
        out[i] = value
