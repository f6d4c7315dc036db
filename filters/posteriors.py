"""Whole posteriors, scan by scan: kept only where somebody asks for more than an estimate."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from filters.compiled import helper
from filters.mixture import Mixture

_MOST_BYTES = 4e9


class Posteriors(NamedTuple):
    """Room for the posteriors of a batch of trials, filled in order, trial by trial.

    Gaussian components, or samples: those have no covariances.
    """

    weights: Any  # (total,), summing to one within a scan
    means: Any  # (total, n)
    covariances: Any  # (total, n, n), or (0, n, n) for samples
    counts: Any  # (trials, scans) int64; 0 where there is no posterior
    used: Any  # (1,) int64: how many of the total are filled


NOT_ASKED = Posteriors(
    np.empty(0), np.empty((0, 0)), np.empty((0, 0, 0)), np.empty((0, 0), np.int64), np.zeros(1, int)
)


def room_for_posteriors(
    trials: int, scans: int, n: int, most: int, *, samples: bool = False
) -> Posteriors:
    """Room for posteriors of so many components or samples in all; what stays unused costs nothing.

    most        of all trials and scans together
    raises      ValueError: they could take more than 4 GB
    """
    each = 8 * (1 + n + (0 if samples else n * n))
    if most * each > _MOST_BYTES:
        raise ValueError(
            f"the posteriors of {trials} trials of {scans} scans could take "
            f"{most * each / 1e9:.3g} GB, above {_MOST_BYTES / 1e9:g} GB; "
            "take fewer components or particles, or fewer scans"
        )
    return Posteriors(
        np.empty(most),
        np.empty((most, n)),
        np.empty((0 if samples else most, n, n)),
        np.zeros((trials, scans), np.int64),
        np.zeros(1, np.int64),
    )


@helper
def keep_mixture(
    n: int, mixture: Mixture, count: int, trial: int, k: int, posteriors: Posteriors
) -> None:
    """Append a mixture of `count` components as the posterior of a scan, if that is asked for."""
    if posteriors.counts.shape[0] == 0:
        return
    first = posteriors.used[0]
    for i in range(count):
        posteriors.weights[first + i] = mixture.weights[i]
        for row in range(n):
            posteriors.means[first + i, row] = mixture.means[i, row]
            for column in range(n):
                posteriors.covariances[first + i, row, column] = mixture.covariances[i, row, column]
    posteriors.counts[trial, k] = count
    posteriors.used[0] += count


@helper
def keep_samples(
    n: int, weights: Any, states: Any, trial: int, k: int, posteriors: Posteriors
) -> None:
    """Append weighted samples (count,) and (count, n) as the posterior of a scan, if asked for."""
    if posteriors.counts.shape[0] == 0:
        return
    first, count = posteriors.used[0], weights.shape[0]
    for i in range(count):
        posteriors.weights[first + i] = weights[i]
        for row in range(n):
            posteriors.means[first + i, row] = states[i, row]
    posteriors.counts[trial, k] = count
    posteriors.used[0] += count
