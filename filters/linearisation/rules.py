"""Rules that integrate over a Gaussian: points in units of its deviations, and their weights.

A rule for the standard normal of n numbers carries over to any Gaussian: points mean + L xi with
P = L L'.
"""

from __future__ import annotations

import itertools
from typing import NamedTuple

import numpy as np

MOST_POINTS = 20_000


class PointRule(NamedTuple):
    """A rule for the standard normal."""

    points: np.ndarray  # (count, n)
    mean_weights: np.ndarray  # (count,) for expected values; they sum to one
    weights: np.ndarray  # (count,) for covariances


def no_rule(n: int) -> PointRule:
    """A rule for those who need none."""
    return PointRule(np.zeros((1, n)), np.ones(1), np.ones(1))


def unscented_rule(n: int, alpha: float, beta: float, kappa: float) -> PointRule:
    """The scaled unscented transform: 2 n + 1 points.

    With c = alpha^2 (n + kappa), points 0 and +-sqrt(c) along each axis.
    alpha > 0, beta, kappa > -n
    source      Julier (2002), American Control Conference, The scaled unscented transformation
    """
    c = alpha**2 * (n + kappa)
    step = np.sqrt(c) * np.eye(n)
    points = np.concatenate([np.zeros((1, n)), step, -step])
    mean_weights = np.full(2 * n + 1, 0.5 / c)
    mean_weights[0] = 1.0 - n / c
    weights = mean_weights.copy()
    weights[0] += 1.0 - alpha**2 + beta
    return PointRule(points, mean_weights, weights)


def cubature_rule(n: int) -> PointRule:
    """The spherical-radial rule of third degree: 2 n points of equal weight.

    source      Arasaratnam and Haykin (2009), IEEE Transactions on Automatic Control 54(6)
    """
    step = np.sqrt(n) * np.eye(n)
    weights = np.full(2 * n, 0.5 / n)
    return PointRule(np.concatenate([step, -step]), weights, weights)


def gauss_hermite_rule(n: int, order: int) -> PointRule:
    """All combinations of `order` Gauss-Hermite points an axis: exact to degree 2 order - 1.

    raises      ValueError: more than MOST_POINTS
    source      Ito and Xiong (2000), IEEE Transactions on Automatic Control 45(5)
    """
    if order**n > MOST_POINTS:
        raise ValueError(f"{order} points along each of {n} axes are more than {MOST_POINTS}")
    places, shares = np.polynomial.hermite_e.hermegauss(order)
    shares = shares / shares.sum()
    points = np.array(list(itertools.product(places, repeat=n)))
    weights = np.prod(list(itertools.product(shares, repeat=n)), axis=1)
    return PointRule(points, weights, weights)
