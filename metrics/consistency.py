"""Does the error fit the covariance that the filter claims? NEES and NIS against chi-square."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import gammaincinv

from metrics.intervals import Interval, check_level
from metrics.present import FloatArray


def nees(error: ArrayLike, covariance: ArrayLike) -> FloatArray:
    """Normalised estimation error squared e' P⁻¹ e, not divided by n: n on average if honest.

    error       (..., n), estimate minus truth, SI units
    covariance  (..., n, n), symmetric (only the lower triangle is read)
    returns     (...), unitless; NaN where the inputs are NaN (no estimate)
    raises      ValueError: shapes disagree, or a covariance is not positive definite
    source      Bar-Shalom, Li & Kirubarajan (2001), ch. 5
    """
    return squared_mahalanobis(error, covariance)


def nis(innovation: ArrayLike, covariance: ArrayLike) -> FloatArray:
    """Normalised innovation squared nu' S⁻¹ nu; otherwise as `nees`."""
    return squared_mahalanobis(innovation, covariance)


def squared_mahalanobis(difference: ArrayLike, covariance: ArrayLike) -> FloatArray:
    """d' C⁻¹ d for every leading index at once; shapes and errors as `nees`."""
    total = np.zeros(np.shape(difference)[:-1])
    for pivot, rest in eliminate(difference, covariance):
        total += rest**2 / pivot
    return total[()]


def eliminate(
    difference: ArrayLike, covariance: ArrayLike
) -> Iterator[tuple[FloatArray, FloatArray]]:
    """Yield D_j and y_j, (...) each, of Cholesky's root-free form C = L D L' with L y = d.

    d' C⁻¹ d is the sum of y_j² / D_j, and the determinant of C the product of the D_j. One column
    after the other is removed from what remains of C and d. Shapes and errors as `nees`.
    """
    difference, covariance = np.asarray(difference, float), np.asarray(covariance, float)
    n = difference.shape[-1] if difference.ndim else 0
    if n == 0 or covariance.shape != (*difference.shape, n):
        raise ValueError(
            "shapes must be (..., n) and (..., n, n) with n ≥ 1, "
            f"got {difference.shape} and {covariance.shape}"
        )
    # Trials and scans move last, so that every operation runs along contiguous memory. One copy
    # changed in place: with fresh arrays throughout, page faults took longer than the arithmetic.
    rest = np.moveaxis(difference, -1, 0).copy()
    remaining = np.moveaxis(covariance, (-2, -1), (0, 1)).copy()
    for j in range(n):
        pivot = remaining[j, j]
        _check_positive(pivot, j)
        yield pivot, rest[j]
        for i in range(j + 1, n):
            factor = remaining[i, j] / pivot
            rest[i] -= factor * rest[j]
            for k in range(j + 1, i + 1):
                remaining[i, k] -= factor * remaining[k, j]


def _check_positive(pivot: FloatArray, column: int) -> None:
    bad = pivot <= 0  # False for NaN: absent estimates pass
    if np.any(bad):
        place = tuple(int(i) for i in np.argwhere(bad)[0])
        raise ValueError(
            f"the covariance at {place} is not positive definite: pivot {column} is "
            f"{pivot[place]:.3g}; leave failed trials out, and give NaN where there is no estimate"
        )


def chi_square_mean_bounds(dimension: int, count: ArrayLike, level: float = 0.95) -> Interval:
    """Two-sided bounds of an average of independent chi-square(dimension) values.

    count    how many values are averaged, any shape; bounds have its shape, NaN for a count of 0
    raises   ValueError: level outside (0, 1), dimension below 1 or a negative count
    source   Bar-Shalom, Li & Kirubarajan (2001), ch. 5
    """
    check_level(level)
    count = np.asarray(count, float)
    if dimension < 1 or np.any(count < 0):
        raise ValueError(
            f"dimension must be at least 1 and counts not negative, got {dimension} and {count}"
        )
    count = np.where(count > 0, count, np.nan)
    half_freedom, tail = dimension * count / 2, (1 - level) / 2
    low, high = (2 * gammaincinv(half_freedom, p) / count for p in (tail, 1 - tail))
    return Interval(low, high)


def nees_inside(
    mean_nees: ArrayLike, count: ArrayLike, dimension: int, level: float = 0.95
) -> float:
    """Share of scans whose mean NEES over the trials lies within its chi-square bounds.

    mean_nees  (scans,) mean over the trials with an estimate, not divided by the dimension
    count      (scans,) how many trials that were; scans without any are left out
    returns    NaN where no scan has an estimate
    """
    mean_nees, count = np.asarray(mean_nees, float), np.asarray(count)
    if mean_nees.shape != count.shape:
        raise ValueError(
            f"mean_nees and count must have one shape, got {mean_nees.shape} and {count.shape}"
        )
    low, high = chi_square_mean_bounds(dimension, count, level)
    inside = (low <= mean_nees) & (mean_nees <= high)
    return float(np.mean(inside[count > 0])) if np.any(count > 0) else np.nan
