"""Do posteriors mean what they say? Transforms, region levels and log scores, valid for mixtures.

NEES compares an error with chi-square, which holds for one Gaussian alone. What is here is uniform
(or comparable) for a posterior of any shape, as long as it is the right one:

    transform       the posterior's probability below the truth, for each coordinate
    region level    the probability inside the contour of the density that the truth lies on

A posterior too narrow gives transforms near 0 and 1 and levels near 1. Values are (trials, scans),
NaN at a scan without a posterior. Scans of a trial depend on each other: every interval below is by
trial. Use trials that held track; lost ones swamp all else.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import gammainc

from metrics.consistency import nees
from metrics.gaussian_mixtures import GaussianMixtures, distribution, draw, log_density
from metrics.intervals import Interval, mean_interval
from metrics.paired import PairedComparison, mean_difference
from metrics.present import FloatArray, mean_where_present
from metrics.scan_rates import scan_rate


def coordinate_transform(posterior: GaussianMixtures, truth: ArrayLike) -> FloatArray:
    """Probability integral transform u = sum w_i Phi((x - mu_i) / sd_i) of each coordinate.

    truth       (..., n)
    returns     (..., n), each uniform on (0, 1) if the posterior is right
    source      Rosenblatt (1952); Diebold, Gunther & Tay, International Economic Review 39 (1998)
    """
    return distribution(posterior, truth)


def central_level(transform: ArrayLike) -> FloatArray:
    """|2 u - 1|: the level of the central interval that the truth lies on, uniform as u is.

    Its coverage finds posteriors too narrow or too wide, which the mean of u does not see.
    """
    return np.abs(2 * np.asarray(transform, float) - 1)


def gaussian_region_level(error: ArrayLike, covariance: ArrayLike) -> FloatArray:
    """Level h of the ellipse that the truth lies on: chi-square's distribution at the NEES.

    Shapes and errors as `nees`. returns (...), uniform on (0, 1) if the Gaussian is right.
    """
    return gammainc(np.shape(error)[-1] / 2, nees(error, covariance) / 2)


def region_level(
    posterior: GaussianMixtures, truth: ArrayLike, draws: int, rng: np.random.Generator
) -> FloatArray:
    """Level h = P(p(X) > p(x)), X drawn from the posterior p, of the region the truth x lies on.

    In closed form where one component is in use. Else (#{p(X_m) > p(x)} + U) / (M + 1) from M
    draws and a uniform U: exactly uniform on (0, 1) if the posterior is right, whatever M is, and
    within about 1 / (2 sqrt M) of h. Mixtures draw one after the other, so that a longer batch
    begins with the values of a shorter one.

    truth       (..., n)
    draws       M
    returns     (...)
    raises      ValueError: shapes disagree, or draws is below 1
    source      highest-density regions: Hyndman, The American Statistician 50 (1996) 120
    """
    if draws < 1:
        raise ValueError(f"draws must be at least 1, got {draws}")
    truth = np.asarray(truth, float)
    at_truth = log_density(posterior, truth[..., None, :])[..., 0]
    components = np.count_nonzero(posterior.weights, axis=-1)
    level = np.full(at_truth.shape, np.nan)
    for place in np.ndindex(at_truth.shape):
        if components[place] == 0:
            continue
        one = posterior.at(place)
        if components[place] == 1:
            used = int(np.argmax(one.weights))
            level[place] = gaussian_region_level(
                one.means[used] - truth[place], one.covariances[used]
            )
            continue
        higher = log_density(one, draw(one, draws, rng)) > at_truth[place]
        level[place] = (np.count_nonzero(higher) + rng.random()) / (draws + 1)
    return level[()]


def log_score(posterior: GaussianMixtures, truth: ArrayLike) -> FloatArray:
    """-ln p(x) of the truth, in nats: small is good.

    Its size hangs on the units of the state; differences between strategies do not.

    truth       (..., n)
    returns     (...)
    source      Good (1952); Gneiting & Raftery, J. American Statistical Association 102 (2007) 359
    """
    return -log_density(posterior, np.asarray(truth, float)[..., None, :])[..., 0]


@dataclass(frozen=True, kw_only=True)
class CalibrationCheck:
    """A statistic of transforms or levels, its interval, and what it is if they are uniform."""

    estimate: float
    expected: float
    interval: Interval

    @property
    def rejected(self) -> bool:
        """Whether the interval says that the posterior is not right; False without an interval."""
        return bool(self.interval.low > self.expected or self.interval.high < self.expected)


def mean_level(levels: ArrayLike, level: float = 0.95) -> CalibrationCheck:
    """Mean of region levels or transforms against 1/2, by Student's t on the trials' means.

    Above 1/2 for region levels: the posterior is too narrow. False alarms at 95 %: 4.7 to 6 % for
    10 to 200 trials of 1 to 50 scans, with correlations up to 0.99 from scan to scan (simulated).
    It misses shapes that balance, so look at `coverage` too.

    levels      (trials, scans) in [0, 1], NaN where there is none
    raises      ValueError: level outside (0, 1), or levels of another shape or outside [0, 1]
    """
    levels, present = _levels_and_presence(levels)
    per_trial = mean_where_present(levels, present, axis=1)
    return CalibrationCheck(
        estimate=float(mean_where_present(levels, present)),
        expected=0.5,
        interval=mean_interval(per_trial, level, weights=present.sum(axis=1)),
    )


def coverage(levels: ArrayLike, of: float, level: float = 0.95) -> CalibrationCheck:
    """Share of scans whose level is at most `of`, against `of`, with `scan_rate`'s interval.

    Below `of`: the posterior is too narrow. Give one scan a trial for the exact binomial interval.
    False alarms at 95 % for `of` = 0.9: 4 to 5 % from 50 trials on, up to 8 % with 20, and up to
    11 % with 10 trials that hardly change from scan to scan (simulated as for `mean_level`). For
    0.99 up to 15 % then; one scan a trial never exceeds 5 %.

    levels      (trials, scans) region or central levels, NaN where there is none
    of          the level in (0, 1) to cover
    raises      ValueError as `mean_level`, or `of` outside (0, 1)
    """
    if not 0 < of < 1:
        raise ValueError(f"the level to cover must lie between 0 and 1, got {of}")
    levels, present = _levels_and_presence(levels)
    share, interval = scan_rate(levels <= of, present, level)
    return CalibrationCheck(estimate=share, expected=of, interval=interval)


def shares_in_bins(
    values: ArrayLike, bins: int = 10, level: float = 0.95
) -> list[CalibrationCheck]:
    """Histogram of transforms or levels: the share of scans in each of so many equal bins.

    Each is to be 1 / bins. Intervals are for one bin at a time: a few of many may miss it.

    values      (trials, scans) in [0, 1], NaN where there is none
    raises      ValueError as `mean_level`, or bins below 2
    """
    if bins < 2:
        raise ValueError(f"bins must be at least 2, got {bins}")
    values, present = _levels_and_presence(values)
    bin_of = np.minimum(np.floor(np.where(present, values, 0.0) * bins), bins - 1)
    checks = []
    for number in range(bins):
        share, interval = scan_rate(bin_of == number, present, level)
        checks.append(CalibrationCheck(estimate=share, expected=1 / bins, interval=interval))
    return checks


def log_score_difference(
    first: ArrayLike, second: ArrayLike, level: float = 0.95
) -> PairedComparison:
    """Mean log score of the first strategy minus that of the second, in nats a scan.

    Over scans where both have a posterior; above 0 the second strategy's is the better one.

    first, second  (trials, scans) from `log_score`, of the same trials; otherwise as
                   `mean_difference`
    """
    return mean_difference(first, second, level)


def _levels_and_presence(levels: ArrayLike) -> tuple[FloatArray, np.ndarray]:
    levels = np.asarray(levels, float)
    present = ~np.isnan(levels)
    if levels.ndim != 2:
        raise ValueError(f"levels must have the shape (trials, scans), got {levels.shape}")
    if np.any((levels[present] < 0) | (levels[present] > 1)):
        raise ValueError("levels must lie between 0 and 1; give NaN where there is none")
    return levels, present
