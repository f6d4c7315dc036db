"""Rates over the scans of many trials, whose scans depend on each other."""

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import stdtrit

from metrics.intervals import (
    Interval,
    check_level,
    clopper_pearson_interval,
    mean_influence,
    standard_error,
)
from metrics.present import presence


def scan_rate(hits: ArrayLike, counted: ArrayLike, level: float = 0.95) -> tuple[float, Interval]:
    """Share of the counted scans that are hits, with a binomial interval by trial.

    The scans of all trials together are worth as many independent ones as the spread of the
    per-trial shares says; that number goes into Clopper and Pearson's interval. With one scan a
    trial it is their exact interval. Where every scan is a hit, or none, a trial counts as one.

    hits, counted  (trials, scans) bool; what hits holds where counted is False is not read
    returns        NaN where no scan counts; an interval of NaN where that is one trial's
    raises         ValueError: shapes disagree, or an array is not boolean
    source         Korn & Graubard, Survey Methodology 24 (1998) 193 (from memory)
    """
    hits, counted = presence(hits), presence(counted)
    if hits.ndim != 2 or hits.shape != counted.shape:
        raise ValueError(
            "hits and counted must have one shape (trials, scans), "
            f"got {hits.shape} and {counted.shape}"
        )
    return rate_of_counts((hits & counted).sum(axis=1), counted.sum(axis=1), level)


def rate_of_counts(
    hits: ArrayLike, scans: ArrayLike, level: float = 0.95
) -> tuple[float, Interval]:
    """`scan_rate` from each trial's number of hits and of counted scans, both (trials,).

    raises         ValueError: shapes disagree, or there are more hits than scans
    """
    check_level(level)
    hits, scans = np.asarray(hits), np.asarray(scans)
    if hits.ndim != 1 or hits.shape != scans.shape or np.any((hits < 0) | (hits > scans)):
        raise ValueError(
            "hits and scans must have one shape (trials,), hits from 0 to scans, "
            f"got {hits.shape} and {scans.shape}"
        )
    trials, total = int(np.count_nonzero(scans)), int(scans.sum())
    shares = hits / np.maximum(scans, 1)
    rate, influence = mean_influence(shares, scans)
    if trials < 2:
        return rate, Interval(np.float64(np.nan), np.float64(np.nan))
    error = standard_error(influence)
    if rate in (0.0, 1.0):
        worth = float(trials)
    elif error == 0.0:  # the very same share in every trial
        worth = float(total)
    else:
        quantile = (1 + level) / 2
        shorter_tail = stdtrit(total - 1, quantile) / stdtrit(trials - 1, quantile)
        worth = min(
            float(total), rate * (1 - rate) / error**2 * total / (total - 1) * shorter_tail**2
        )
    return rate, clopper_pearson_interval(rate * worth, worth, level)
