"""Gaussian mixtures as kernels hold them; moments accumulated one component at a time."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from filters.compiled import helper

NO_SCAN = -2  # in a history: before the first scan


class Mixture(NamedTuple):
    """Room for a mixture of up to `capacity` components; how many are in use is told beside it."""

    weights: Any  # (capacity,), summing to one
    means: Any  # (capacity, n)
    covariances: Any  # (capacity, n, n)
    modes: Any  # (capacity,) int64, which of the motions each moves by
    histories: Any  # (capacity, depth) int64, associations of the last scans, newest first


def room_for_mixture(n: int, capacity: int, depth: int) -> Mixture:
    """Room for components of n states, with the associations of the last `depth` scans."""
    return Mixture(
        np.empty(capacity),
        np.empty((capacity, n)),
        np.empty((capacity, n, n)),
        np.zeros(capacity, np.int64),
        np.full((capacity, depth), NO_SCAN, np.int64),
    )


@helper
def forget_history(history: Any) -> None:
    """Start from no scan at all; history (depth,)."""
    for scan in range(history.shape[0]):
        history[scan] = NO_SCAN


@helper
def clear_moments(n: int, mean: Any, covariance: Any) -> None:
    """Start from nothing."""
    for row in range(n):
        mean[row] = 0.0
        for column in range(n):
            covariance[row, column] = 0.0


@helper
def add_to_mean(n: int, weight: float, component: Any, mean: Any) -> None:
    """Add weight * component, (n,)."""
    for row in range(n):
        mean[row] += weight * component[row]


@helper
def add_to_covariance(
    n: int, weight: float, component: Any, spread: Any, mean: Any, covariance: Any
) -> None:
    """Add weight * (P_i + (mu_i - mu)(mu_i - mu)') to the lower triangle.

    component mu_i, mean mu (n,); spread P_i, covariance (n, n). The mean must be complete.
    """
    for row in range(n):
        offset = weight * (component[row] - mean[row])
        for column in range(row + 1):
            covariance[row, column] += weight * spread[row, column] + offset * (
                component[column] - mean[column]
            )


@helper
def mirror(n: int, covariance: Any) -> None:
    """Copy the lower triangle to the upper."""
    for row in range(n):
        for column in range(row):
            covariance[column, row] = covariance[row, column]


@helper
def copy_gaussian(n: int, mean: Any, covariance: Any, to_mean: Any, to_covariance: Any) -> None:
    """Copy one component."""
    for row in range(n):
        to_mean[row] = mean[row]
        for column in range(n):
            to_covariance[row, column] = covariance[row, column]


@helper
def copy_component(n: int, source: Mixture, i: int, target: Mixture, j: int) -> None:
    """Copy all of component i of one mixture to component j of another."""
    target.weights[j] = source.weights[i]
    target.modes[j] = source.modes[i]
    copy_gaussian(n, source.means[i], source.covariances[i], target.means[j], target.covariances[j])


@helper
def mixture_moments(n: int, mixture: Mixture, count: int, mean: Any, covariance: Any) -> None:
    """Write mean (n,) and covariance (n, n) of the first `count` components together."""
    weights, means, covariances = mixture.weights, mixture.means, mixture.covariances
    clear_moments(n, mean, covariance)
    for i in range(count):
        add_to_mean(n, weights[i], means[i], mean)
    for i in range(count):
        add_to_covariance(n, weights[i], means[i], covariances[i], mean, covariance)
    mirror(n, covariance)
