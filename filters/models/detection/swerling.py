"""Detection of a fluctuating or steady target in noise, by its signal-to-noise ratio.

One pulse, or what coherent integration made of several, is compared with a threshold that noise
alone exceeds with the false-alarm probability PFA: T = -ln PFA on power in units of the noise's.
The signal-to-noise ratio S falls with the fourth power of range.

    Swerling 0, steady          PD = Q1(sqrt(2 S), sqrt(2 T)), Marcum's Q function
    Swerling 1, Rayleigh        PD = PFA^(1 / (1 + S))

Source: Swerling (1960), Probability of detection for fluctuating targets, IRE Transactions on
Information Theory 6; Mahafza, Radar systems analysis and design, for the single-pulse forms.
"""

from __future__ import annotations

import functools
import math
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field
from scipy.special import ive
from scipy.stats import ncx2

from filters.compiled import model_function
from filters.models.contract import SCALAR_OF, DetectionModel
from filters.models.detection.law import (
    Cell,
    DetectionLaw,
    FalseAlarmProbability,
    behind_blind,
    is_blind,
)
from filters.models.geometry import range_between
from filters.models.record import Positive, Real

# Swerling 0 is a table of PD and its slope against sqrt(S), cubic between: 45 ns a value, no more
# than Swerling 1, where a series takes 300 ns and more as S grows. At this step it is exact to
# 3e-11.
_STEP = 1.0 / 128.0
# 1 - PD < exp(-(sqrt(S) - sqrt(T))^2), so beyond this many units above sqrt(T) it is 1.
_BEYOND_THRESHOLD = 5.5


@functools.cache
def steady_target_table(false_alarm_probability: float) -> np.ndarray:
    """PD of a steady target at sqrt(S) = 0, 1/128, 2/128, ...: all values, then all slopes."""
    threshold = -math.log(false_alarm_probability)
    root = np.arange(0.0, math.sqrt(threshold) + _BEYOND_THRESHOLD + _STEP, _STEP)
    values = np.full_like(root, false_alarm_probability)
    values[1:] = ncx2.sf(2.0 * threshold, 2, 2.0 * root[1:] ** 2)
    b = math.sqrt(2.0 * threshold)
    a = math.sqrt(2.0) * root
    slopes = math.sqrt(2.0) * b * ive(1, a * b) * np.exp(-((a - b) ** 2) / 2.0)
    return np.concatenate([values, slopes])


@model_function(SCALAR_OF)
def steady_target_probability(parameters: Any, site: Any, state: Any) -> float:
    """Swerling 0: cubic interpolation in the table of `steady_target_table`."""
    if is_blind(parameters, site, state):
        return 0.0
    start = behind_blind(parameters)
    distance = range_between(site.shape[0] // 2, state, site)
    last = int(parameters[start + 1]) - 1
    if distance * distance * last * _STEP <= parameters[start]:
        return 1.0
    place = parameters[start] / (distance * distance * _STEP)
    node = int(place)
    share = place - node
    values = start + 2 + node
    slopes = values + last + 1
    rise = parameters[values + 1] - parameters[values]
    here = _STEP * parameters[slopes] - rise
    there = rise - _STEP * parameters[slopes + 1]
    return (
        parameters[values]
        + share * rise
        + share * (1.0 - share) * ((1.0 - share) * here + share * there)
    )


@model_function(SCALAR_OF)
def fluctuating_target_probability(parameters: Any, site: Any, state: Any) -> float:
    """Swerling 1 at the state's range."""
    if is_blind(parameters, site, state):
        return 0.0
    start = behind_blind(parameters)
    distance = range_between(site.shape[0] // 2, state, site)
    if distance == 0.0:
        return 1.0
    root = parameters[start] / (distance * distance)
    return math.exp(-parameters[start + 1] / (1.0 + root * root))


class SwerlingDetection(DetectionLaw):
    """A target of known strength in noise; the false alarms are the clutter."""

    snr_db: Annotated[Real, Field(ge=-100.0, le=200.0)]
    """Signal-to-noise ratio at the reference range, dB."""
    reference_range_m: Positive
    """Range at which the signal-to-noise ratio is stated, m."""
    snr_is: Literal["single-pulse", "after-integration"] = "single-pulse"
    """What the ratio is of: one pulse, or the result of integrating several coherently."""
    false_alarm_probability: FalseAlarmProbability
    """Probability of a false detection in a resolution cell at a scan, in (0, 1): it sets the
    threshold, and with it misses and clutter."""
    resolution_cell: Cell
    """Extent of a resolution cell: one number for each component of the measurement, in the units
    of the sensor's region."""

    def root_at_one_metre(self) -> float:
        """Root of the signal-to-noise ratio times the square of the range, m2."""
        return float(10.0 ** (self.snr_db / 20.0) * self.reference_range_m**2)


class SteadyTargetDetection(SwerlingDetection):
    """Swerling 0: the echo is as strong at every scan."""

    kind: Literal["swerling-0"]
    """Which detection law: a steady target (Swerling 0)."""

    def model(self) -> DetectionModel:
        """Function and parameters for the kernels."""
        table = steady_target_table(self.false_alarm_probability)
        own = [self.root_at_one_metre(), len(table) // 2]
        return DetectionModel(
            steady_target_probability.compiled, np.concatenate([self.blind_numbers(), own, table])
        )


class FluctuatingTargetDetection(SwerlingDetection):
    """Swerling 1: the echo is drawn anew at every scan, exponential in power."""

    kind: Literal["swerling-1"]
    """Which detection law: a target that fluctuates from scan to scan (Swerling 1)."""

    def model(self) -> DetectionModel:
        """Function and parameters for the kernels."""
        own = [self.root_at_one_metre(), -math.log(self.false_alarm_probability)]
        return DetectionModel(
            fluctuating_target_probability.compiled, np.concatenate([self.blind_numbers(), own])
        )
