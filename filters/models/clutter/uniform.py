"""The same clutter intensity all over the region."""

from __future__ import annotations

from typing import Any

import numpy as np

from filters.compiled import model_function
from filters.models.contract import SCALAR_OF, ClutterModel


@model_function(SCALAR_OF)
def uniform_intensity(parameters: Any, site: Any, measurement: Any) -> float:
    """Return the stated intensity."""
    return parameters[0]


def uniform_clutter(intensity: float) -> ClutterModel:
    """Clutter of one intensity per scan and unit of the measurement (SI, rad)."""
    return ClutterModel(uniform_intensity.compiled, np.array([intensity]), intensity)
