"""The same detection probability everywhere."""

from __future__ import annotations

from typing import Any

import numpy as np

from filters.compiled import model_function
from filters.models.contract import SCALAR_OF, DetectionModel


@model_function(SCALAR_OF)
def constant_probability(parameters: Any, site: Any, state: Any) -> float:
    """Return the stated probability."""
    return parameters[0]


def constant_detection(probability: float) -> DetectionModel:
    """Detection with one probability in [0, 1] wherever the target is."""
    return DetectionModel(constant_probability.compiled, np.array([probability]))
