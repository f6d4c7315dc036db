"""Confidence intervals of rates, means and roots of means. The unit of analysis is the trial.

Scans inside a trial depend on each other, so every mean is one of per-trial values. Where trials
have different numbers of scans with an estimate, these numbers are the weights: the interval then
belongs to the mean over all scans (a ratio of two sums over trials).
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import betaincinv, ndtri, stdtrit

from metrics.present import FloatArray


class Interval(NamedTuple):
    """Two ends, numbers or arrays; NaN where the data give no interval."""

    low: np.float64 | FloatArray
    high: np.float64 | FloatArray


def check_level(level: float) -> None:
    """Raise ValueError unless the confidence level lies strictly between 0 and 1."""
    if not 0 < level < 1:
        raise ValueError(f"level must lie between 0 and 1, got {level}")


def wilson_interval(count: ArrayLike, trials: ArrayLike, level: float = 0.95) -> Interval:
    """Score interval of a rate: close to its level on average, short of it for some rates.

    count, trials  broadcast against each other; NaN where trials is 0
    raises         ValueError: level outside (0, 1), or not 0 ≤ count ≤ trials
    source         Wilson (1927); Newcombe, Statistics in Medicine 17 (1998) 857, method 3
    """
    check_level(level)
    count, trials = _counts(count, trials)
    z = ndtri((1 + level) / 2)
    centre = (count + z**2 / 2) / (trials + z**2)
    half = z / (trials + z**2) * np.sqrt(count * (trials - count) / trials + z**2 / 4)
    # Rounding would leave these two ends beside 0 and 1; 0 * trials is NaN without trials.
    low = np.where(count == 0, 0 * trials, centre - half)
    high = np.where(count == trials, 1.0, centre + half)
    return Interval(low[()], high[()])


def clopper_pearson_interval(count: ArrayLike, trials: ArrayLike, level: float = 0.95) -> Interval:
    """Exact interval of a rate: covers at least at its level, whatever the rate.

    Arguments and errors as `wilson_interval`.
    source  Clopper & Pearson, Biometrika 26 (1934) 404; Newcombe (1998), method 5
    """
    check_level(level)
    high = clopper_pearson_upper(count, trials, (1 + level) / 2)
    count, trials = _counts(count, trials)
    low = np.where(count == 0, 0 * trials, betaincinv(count, trials - count + 1, (1 - level) / 2))
    return Interval(low[()], high)


def clopper_pearson_upper(
    count: ArrayLike, trials: ArrayLike, level: float = 0.95
) -> np.float64 | FloatArray:
    """One-sided exact upper bound of a rate; arguments and errors as `wilson_interval`.

    Without a loss it is 1 - (1 - level)^(1/trials), close to 3/trials at 95 %.
    """
    check_level(level)
    count, trials = _counts(count, trials)
    return np.where(count == trials, 1.0, betaincinv(count + 1, trials - count, level))[()]


def _counts(count: ArrayLike, trials: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Checked and broadcast, with NaN in place of no trials, which every formula passes on."""
    count, trials = np.broadcast_arrays(np.asarray(count, float), np.asarray(trials, float))
    if not np.all((count >= 0) & (count <= trials)):
        raise ValueError(f"counts must lie between 0 and trials, got {count} of {trials}")
    return count, np.where(trials > 0, trials, np.nan)


def mean_influence(values: ArrayLike, weights: ArrayLike | None = None) -> tuple[float, FloatArray]:
    """Weighted mean of one value a trial, and the influence of each trial on it.

    The influences w_i (x_i - mean) / (mean of w) add up to zero; their standard deviation over
    the root of their number is the standard error of the mean (delta method for a ratio).

    values   (trials,); trials with NaN, or with weight 0, are left out
    weights  (trials,) number of scans behind each value; None: all alike
    returns  mean (NaN without a trial) and (trials left,) influences, in the unit of the values
    raises   ValueError: values are not one-dimensional, or the weights' shape is another
    """
    values, weights = _weighted(values, weights)
    if values.size == 0:
        return np.nan, values
    mean = float(np.sum(weights * values) / np.sum(weights))
    return mean, weights * (values - mean) / np.mean(weights)


def standard_error(influence: FloatArray) -> float:
    """Standard error of what the trials have these influences on; NaN below two trials."""
    trials = len(influence)
    return float(np.std(influence, ddof=1) / np.sqrt(trials)) if trials > 1 else np.nan


def half_width(influence: FloatArray, level: float) -> float:
    """Student's t quantile times the standard error; NaN below two trials."""
    check_level(level)
    return float(stdtrit(len(influence) - 1, (1 + level) / 2) * standard_error(influence))


def mean_interval(
    values: ArrayLike, level: float = 0.95, weights: ArrayLike | None = None
) -> Interval:
    """Student's t interval of a mean of per-trial values; NaN below two trials.

    Equal values give an interval without width. Arguments and errors as `mean_influence`.
    """
    mean, influence = mean_influence(values, weights)
    half = half_width(influence, level)
    return Interval(np.float64(mean - half), np.float64(mean + half))


def root_mean_interval(
    mean_powers: ArrayLike, order: float, level: float = 0.95, weights: ArrayLike | None = None
) -> Interval:
    """Interval of (mean of x)^(1/order), symmetric in its logarithm.

    RMSE: x is the mean squared error of a trial and order 2. GOSPA: x is the mean p-th power of a
    trial and order p. NaN below two trials and where the mean is 0, as there is no logarithm. Too
    short with a few large values among many: look at `effective_sample_size`.

    mean_powers  (trials,), not negative; otherwise as `mean_influence`
    source       delta method on the logarithm of the mean
    """
    mean, influence = mean_influence(mean_powers, weights)
    if not mean > 0:
        return Interval(np.float64(np.nan), np.float64(np.nan))
    return exponentiated(np.log(mean) / order, half_width(influence / mean, level) / order)


def exponentiated(log_value: float, half: float) -> Interval:
    """Interval of a value from that of its logarithm."""
    with np.errstate(over="ignore"):  # two trials at a high level: an upper end of infinity
        return Interval(np.exp(log_value - half), np.exp(log_value + half))


def effective_sample_size(values: ArrayLike, weights: ArrayLike | None = None) -> float:
    """(sum x)² / sum x²: how many equal trials would carry the mean as these do.

    From 1 (one trial carries it all) to the number of trials; NaN without a value above 0. With
    weights, x is weight times value. Arguments and errors as `mean_influence`.
    source  Kish (1965), there for weights
    """
    values, weights = _weighted(values, weights)
    shares = weights * values
    sum_of_squares = np.sum(shares**2)
    return float(np.sum(shares) ** 2 / sum_of_squares) if sum_of_squares > 0 else np.nan


def _weighted(values: ArrayLike, weights: ArrayLike | None) -> tuple[FloatArray, FloatArray]:
    values = np.asarray(values, float)
    weights = np.ones_like(values) if weights is None else np.asarray(weights, float)
    if values.ndim != 1 or weights.shape != values.shape:
        raise ValueError(
            "values and weights must both have the shape (trials,), "
            f"got {values.shape} and {weights.shape}"
        )
    counted = ~np.isnan(values) & (weights > 0)
    return values[counted], weights[counted]
