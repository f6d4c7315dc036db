"""How well a probability that there is a target says whether it is really followed.

Where a strategy's error is within the limit it is on its target, and the probability should be
near one; where it is not, it follows clutter, and the probability should be near zero.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from metrics.present import mean_where_present, presence, values_and_presence

FloatArray = NDArray[np.float64]


class ExistenceScores(NamedTuple):
    """Of each trial; NaN where there is no such scan."""

    error: FloatArray  # (trials,) mean squared difference from 1 on target, from 0 off it
    on: FloatArray  # (trials,) mean probability on target
    off: FloatArray  # (trials,) mean probability off target


def existence_scores(
    probability: ArrayLike, on_target: ArrayLike, present: ArrayLike
) -> ExistenceScores:
    """Compare probabilities of existence with whether the target is really followed.

    probability, on_target, present     (trials, scans); on_target and present are bool
    raises      ValueError: shapes differ, or a probability is NaN where an estimate is present
    source      the quadratic score of Brier (1950), Monthly Weather Review 78
    """
    on_target = presence(on_target)
    probability, present = values_and_presence(probability, present)
    error = np.square(probability - on_target)
    return ExistenceScores(
        np.asarray(mean_where_present(error, present, axis=1)),
        np.asarray(mean_where_present(probability, present & on_target, axis=1)),
        np.asarray(mean_where_present(probability, present & ~on_target, axis=1)),
    )
