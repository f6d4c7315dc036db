"""Two strategies compared on the very same trials.

Everything reads first against second: a difference above 0 or a ratio above 1 says that the first
strategy is the worse one.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import bdtr, ndtri, stdtr

from metrics.intervals import (
    Interval,
    check_level,
    exponentiated,
    half_width,
    mean_influence,
    standard_error,
)
from metrics.present import FloatArray, mean_where_present


@dataclass(frozen=True, kw_only=True)
class PairedComparison:
    """A difference or a ratio with its interval, and the p-value of 'no difference'."""

    estimate: float
    interval: Interval
    p_value: float  # two-sided
    pairs: int  # trials that count


def exact_mcnemar(only_first: ArrayLike, only_second: ArrayLike) -> np.float64 | FloatArray:
    """Two-sided exact p-value that the discordant trials split evenly.

    only_first, only_second  trials lost by one strategy alone, whole numbers of any shape
    returns                  1 where no trial is discordant
    source                   McNemar (1947); exact: binomial(only_first + only_second, 1/2)
    """
    only_first, only_second = np.asarray(only_first, int), np.asarray(only_second, int)
    if np.any((only_first < 0) | (only_second < 0)):
        raise ValueError(f"counts must not be negative, got {only_first} and {only_second}")
    tail = bdtr(np.minimum(only_first, only_second), only_first + only_second, 0.5)
    return np.minimum(1.0, 2 * tail)


def loss_rate_difference(
    only_first: int, only_second: int, trials: int, level: float = 0.95
) -> PairedComparison:
    """Loss rate of the first strategy minus that of the second.

    only_first, only_second  trials lost by one strategy alone
    trials                   trials of both, those that both held or both lost included
    returns                  estimate (only_first - only_second) / trials, the Bonett-Price
                             interval and the exact McNemar p-value; NaN without trials
    raises                   ValueError: a count is negative, or they exceed the trials
    source                   Bonett & Price, J. Educational and Behavioral Statistics 37 (2012) 479
    """
    check_level(level)
    if only_first < 0 or only_second < 0 or only_first + only_second > trials:
        raise ValueError(
            "counts must not be negative and not exceed the trials, "
            f"got {only_first} and {only_second} of {trials}"
        )
    if trials == 0:
        return _no_comparison(pairs=0)
    first, second = (only_first + 1) / (trials + 2), (only_second + 1) / (trials + 2)
    centre = first - second
    half = ndtri((1 + level) / 2) * np.sqrt((first + second - centre**2) / (trials + 2))
    return PairedComparison(
        estimate=(only_first - only_second) / trials,
        interval=Interval(np.maximum(centre - half, -1.0), np.minimum(centre + half, 1.0)),
        p_value=float(exact_mcnemar(only_first, only_second)),
        pairs=trials,
    )


def root_mean_ratio(
    first: ArrayLike,
    second: ArrayLike,
    order: float,
    level: float = 0.95,
    first_weights: ArrayLike | None = None,
    second_weights: ArrayLike | None = None,
) -> PairedComparison:
    """Ratio of two roots of means over the same trials: RMSE (order 2) or GOSPA (order p).

    The logarithm of the ratio is a difference of two means' logarithms; each trial's influence on
    it is the difference of its influences on the two, and Student's t serves their mean.

    first, second  (trials,) mean p-th power of a trial
    ..._weights    (trials,) number of scans behind each value; None: all alike
    returns        over trials where neither value is NaN and no weight 0; NaN below two of them
                   and where a mean is 0
    raises         ValueError: shapes disagree
    """
    check_level(level)
    alike = np.ones(np.shape(first))
    columns = (
        first,
        second,
        alike if first_weights is None else first_weights,
        alike if second_weights is None else second_weights,
    )
    if np.ndim(first) != 1 or len({np.shape(column) for column in columns}) > 1:
        raise ValueError(
            "values and weights must all have the shape (trials,), "
            f"got {[np.shape(column) for column in columns]}"
        )
    table = np.array(columns, float)
    paired = ~np.isnan(table[:2]).any(axis=0) & (table[2:] > 0).all(axis=0)
    first, second, first_weights, second_weights = table[:, paired]
    first_mean, on_first = mean_influence(first, first_weights)
    second_mean, on_second = mean_influence(second, second_weights)
    if np.sum(paired) < 2 or not (first_mean > 0 and second_mean > 0):
        return _no_comparison(pairs=int(np.sum(paired)))
    influence = (on_first / first_mean - on_second / second_mean) / order
    log_ratio = np.log(first_mean / second_mean) / order
    return PairedComparison(
        estimate=float(np.exp(log_ratio)),
        interval=exponentiated(log_ratio, half_width(influence, level)),
        p_value=_t_test(log_ratio, influence),
        pairs=len(influence),
    )


def mean_difference(first: ArrayLike, second: ArrayLike, level: float = 0.95) -> PairedComparison:
    """Mean of first minus second over the scans that have both, by Student's t on the trials.

    first, second  (trials, scans) in any unit, NaN where a scan has no value
    returns        pairs counts the trials with such a scan; NaN below two of them
    raises         ValueError: shapes disagree
    """
    check_level(level)
    first, second = np.asarray(first, float), np.asarray(second, float)
    if first.ndim != 2 or first.shape != second.shape:
        raise ValueError(
            f"values must both have the shape (trials, scans), got {first.shape} and {second.shape}"
        )
    difference = first - second
    both = ~np.isnan(difference)
    mean, influence = mean_influence(mean_where_present(difference, both, axis=1), both.sum(axis=1))
    if len(influence) < 2:
        return _no_comparison(pairs=len(influence))
    half = half_width(influence, level)
    return PairedComparison(
        estimate=mean,
        interval=Interval(np.float64(mean - half), np.float64(mean + half)),
        p_value=_t_test(mean, influence),
        pairs=len(influence),
    )


def _t_test(value: float, influence: FloatArray) -> float:
    """Two-sided p-value of a true value of 0."""
    error = standard_error(influence)
    if error == 0:  # the same errors in every trial, or a fixed multiple of them
        return 1.0 if value == 0 else 0.0
    return float(2 * stdtr(len(influence) - 1, -abs(value) / error))


def _no_comparison(pairs: int) -> PairedComparison:
    nothing = np.float64(np.nan)
    return PairedComparison(
        estimate=np.nan, interval=Interval(nothing, nothing), p_value=np.nan, pairs=pairs
    )


def holm_adjust(p_values: ArrayLike) -> FloatArray:
    """p-values that may each be held against the level of the whole family.

    p_values  (tests,); NaN stays NaN and counts as no test
    source    Holm, Scandinavian Journal of Statistics 6 (1979) 65
    """
    p_values = np.asarray(p_values, float)
    order = np.argsort(p_values)[: np.count_nonzero(~np.isnan(p_values))]  # NaN sorts last
    remaining = np.arange(len(order), 0, -1)
    adjusted = np.full_like(p_values, np.nan)
    adjusted[order] = np.minimum(1.0, np.maximum.accumulate(remaining * p_values[order]))
    return adjusted
