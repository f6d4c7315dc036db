"""Generalised optimal sub-pattern assignment (GOSPA) with alpha = 2.

Source: Rahmathullah, García-Fernández & Svensson, "Generalized optimal sub-pattern assignment
metric", FUSION 2017, arXiv 1601.05585. With alpha = 2 the p-th power splits into localisation,
missed and false; a target and an estimate at the cut-off or beyond are one missed and one false.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.optimize import linear_sum_assignment

from metrics.present import FloatArray, values_and_presence


@dataclass(frozen=True, kw_only=True)
class Gospa:
    """A distance and the three parts of its p-th power, which add up to distance^p."""

    distance: float  # m
    localisation: float  # m^p
    missed: float  # m^p
    false: float  # m^p


def gospa(truths: ArrayLike, estimates: ArrayLike, cutoff: float, order: float) -> Gospa:
    """GOSPA of two sets of points under the optimal assignment.

    truths     (targets, axes) m, targets may be 0
    estimates  (tracks, axes) m, tracks may be 0; two empty sets are at distance 0
    cutoff     m
    order      p, at least 1
    raises     ValueError: a set is not two-dimensional or the axes differ, a point is not
               finite, cutoff not positive, order below 1
    """
    _check_settings(cutoff, order)
    truths, estimates = _points(truths, "truths"), _points(estimates, "estimates")
    localised = np.empty(0)
    if truths.size and estimates.size:
        if truths.shape[1] != estimates.shape[1]:
            raise ValueError(
                "truths and estimates must have the same axes, "
                f"got shapes {truths.shape} and {estimates.shape}"
            )
        distance = np.linalg.norm(truths[:, None] - estimates, axis=-1)
        # Cutting the cost at c^p leaves the optimum unchanged: breaking such a pair up costs c^p.
        pairs = linear_sum_assignment(np.minimum(distance, cutoff) ** order)
        localised = distance[pairs][distance[pairs] < cutoff]
    return _rooted(
        localisation=float(np.sum(localised**order)),
        missed=(len(truths) - len(localised)) * cutoff**order / 2,
        false=(len(estimates) - len(localised)) * cutoff**order / 2,
        order=order,
    )


def single_target_gospa(
    position_error: ArrayLike, present: ArrayLike, cutoff: float, order: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """p-th powers for one target and at most one estimate: localisation, missed, false.

    position_error  (trials, scans) m
    present         (trials, scans) bool; without an estimate the target is missed
    returns         three arrays (trials, scans), m^p
    raises          ValueError: as `values_and_presence`; cutoff not positive, order below 1
    """
    _check_settings(cutoff, order)
    position_error, present = values_and_presence(position_error, present)
    localised = present & (position_error < cutoff)
    half = cutoff**order / 2
    return (
        np.where(localised, position_error, 0.0) ** order,
        np.where(localised, 0.0, half),
        np.where(present & ~localised, half, 0.0),
    )


def mean_gospa(
    localisation: FloatArray, missed: FloatArray, false: FloatArray, order: float
) -> Gospa:
    """Average of p-th powers over everything passed, split there, with one root at the end.

    localisation, missed, false  arrays of one shape, m^p: per trial and scan, or per trial
    returns                      NaN throughout where the arrays are empty
    """
    if np.size(localisation) == 0:
        return Gospa(distance=np.nan, localisation=np.nan, missed=np.nan, false=np.nan)
    return _rooted(
        localisation=float(np.mean(localisation)),
        missed=float(np.mean(missed)),
        false=float(np.mean(false)),
        order=order,
    )


def _rooted(localisation: float, missed: float, false: float, order: float) -> Gospa:
    distance = (localisation + missed + false) ** (1 / order)
    return Gospa(distance=distance, localisation=localisation, missed=missed, false=false)


def _points(points: ArrayLike, name: str) -> FloatArray:
    points = np.asarray(points, float)
    if points.size == 0:
        return np.empty((0, 0))
    if points.ndim != 2 or not np.isfinite(points).all():
        raise ValueError(
            f"{name} must have the shape (points, axes) and be finite, got {points.tolist()}"
        )
    return points


def _check_settings(cutoff: float, order: float) -> None:
    if not 0 < cutoff < np.inf:
        raise ValueError(f"cutoff must be positive and finite, got {cutoff}")
    if not 1 <= order < np.inf:
        raise ValueError(f"order must be at least 1 and finite, got {order}")
