"""Whether there is a target at all: its probability as a Markov chain, updated by each scan.

With probability r before a scan, and L how much likelier the scan is with the target than as
clutter alone, it is r L / (1 - r + r L) after it.

Source: Musicki, Evans and Stankovic (1994), IEEE Transactions on Automatic Control 39(6),
Integrated probabilistic data association, Markov chain one.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from filters.compiled import helper
from filters.hypotheses import TotalWeight, log_total


class Existence(NamedTuple):
    """Settings of the chain, each scan; certain existence leaves everything as it is."""

    start: float  # probability at the first scan
    survival: float  # that a target exists at the next scan
    birth: float  # that one that did not exist does at the next scan
    end_below: float  # the track ends below this probability


CERTAIN = Existence(1.0, 1.0, 0.0, 0.0)


@helper
def predict_existence(chain: Existence, probability: float) -> float:
    """Probability that the target exists at the next scan."""
    return chain.survival * probability + chain.birth * (1.0 - probability)


@helper
def update_existence(probability: float, likelier: TotalWeight) -> float:
    """Probability after a scan; likelier L, which may be 0 or infinite."""
    if probability == 0.0 or probability == 1.0:
        return probability
    return 1.0 / (1.0 + (1.0 - probability) / probability * math.exp(-log_total(likelier)))
