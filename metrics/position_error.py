"""Euclidean errors, of position and of velocity alike.

Shapes: truth and estimate (trials, scans, axes), present (trials, scans). Units are those of the
input: m gives m² and m, m/s gives m²/s² and m/s.
"""

import numpy as np
from numpy.typing import ArrayLike

from metrics.present import FloatArray, mean_where_present, presence


def squared_error(truth: ArrayLike, estimate: ArrayLike, present: ArrayLike) -> FloatArray:
    """Squared Euclidean error (trials, scans); NaN where there is no estimate.

    raises  ValueError: shapes disagree, or `present` is not boolean
    """
    truth, estimate = np.asarray(truth, float), np.asarray(estimate, float)
    present = presence(present)
    if truth.shape != estimate.shape or truth.shape[:-1] != present.shape:
        raise ValueError(
            "truth and estimate must have one shape, and present the same without the axes; "
            f"got {truth.shape}, {estimate.shape} and {present.shape}"
        )
    return np.where(present, np.sum((estimate - truth) ** 2, axis=-1), np.nan)


def mean_squared_error(squared: ArrayLike, present: ArrayLike) -> FloatArray:
    """Mean over the scans with an estimate (trials,); NaN for a trial without any."""
    return np.asarray(mean_where_present(squared, present, axis=1))


def rmse(squared: ArrayLike, present: ArrayLike) -> float:
    """Root of the mean over all trials and scans with an estimate; NaN where there is none.

    Scans count alike, so a trial with fewer estimates weighs less.
    """
    return float(np.sqrt(mean_where_present(squared, present)))


def rmse_per_scan(squared: ArrayLike, present: ArrayLike) -> FloatArray:
    """Root of the mean over the trials with an estimate (scans,); NaN where there is none."""
    return np.sqrt(mean_where_present(squared, present, axis=0))
