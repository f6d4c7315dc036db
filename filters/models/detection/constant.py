"""The same detection probability everywhere, but where the sensor is blind."""

from __future__ import annotations

from typing import Any, Literal

import numpy as np

from filters.compiled import model_function
from filters.models.contract import SCALAR_OF, DetectionModel
from filters.models.detection.law import DetectionLaw, behind_blind, is_blind
from filters.models.record import Probability


@model_function(SCALAR_OF)
def constant_probability(parameters: Any, site: Any, state: Any) -> float:
    """Return the stated probability."""
    return parameters[0]


@model_function(SCALAR_OF)
def constant_unless_blind(parameters: Any, site: Any, state: Any) -> float:
    """Return the stated probability, or 0 where the sensor is blind."""
    if is_blind(parameters, site, state):
        return 0.0
    return parameters[behind_blind(parameters)]


def constant_detection(probability: float) -> DetectionModel:
    """Detection with one probability in [0, 1] wherever the target is."""
    return DetectionModel(constant_probability.compiled, np.array([probability]))


class ConstantDetection(DetectionLaw):
    """One probability wherever the target is and the sensor is not blind."""

    kind: Literal["constant"]
    """Which detection law: the same probability everywhere."""
    probability: Probability
    """Probability that the target is detected at a scan, in [0, 1]."""

    def model(self) -> DetectionModel:
        """Function and parameters for the kernels."""
        if not self.is_blind_somewhere:
            return constant_detection(self.probability)
        numbers = np.append(self.blind_numbers(), self.probability)
        return DetectionModel(constant_unless_blind.compiled, numbers)
