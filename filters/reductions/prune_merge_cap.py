"""Prune, merge greedily, cap: the reduction of a Gaussian mixture.

Weights below a share of the total are dropped. Then, from the heaviest hypothesis i on, every j
with (mu_i - mu_j)' P_i^-1 (mu_i - mu_j) below a limit joins i's group, whose moments are matched;
components that moved by different motions never meet. Then the heaviest groups are kept. Weights
are rescaled after each step.

Source: the clustering algorithm of Salmond (1990), SPIE 1305, Mixture reduction algorithms for
target tracking in clutter, with the heaviest component's own covariance as measure of distance.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from filters.cholesky import factorise, squared_distance
from filters.compiled import helper
from filters.hypotheses import Hypotheses
from filters.mixture import Mixture, add_to_covariance, add_to_mean, clear_moments, mirror
from filters.reductions.reduction import Reduction
from filters.reductions.selection import drop_light, rescale

_DROPPED = -2
_FREE = -1


@helper
def _heaviest_free(table: Any, rows: int) -> int:
    best = -1
    for h in range(rows):
        if table[h].group == _FREE and (best < 0 or table[h].weight > table[best].weight):
            best = h
    return best


@helper
def _gather(
    n: int, head: int, table: Any, rows: int, means: Any, factor: Any, limit: float, work: Any
) -> None:
    """Put every free row near the head, of the same mode, into its group."""
    difference, solved = work[0], work[1]
    table[head].group = head
    table[head].group_weight = table[head].weight
    for h in range(rows):
        if table[h].group != _FREE or table[h].mode != table[head].mode:
            continue
        for i in range(n):
            difference[i] = means[head, i] - means[h, i]
        if squared_distance(n, factor, difference, solved) < limit:
            table[h].group = head
            table[head].group_weight += table[h].weight


@helper
def _heaviest_group(table: Any, rows: int) -> int:
    best = -1
    for h in range(rows):
        is_head = table[h].group == h and table[h].group_weight > 0.0
        if is_head and (best < 0 or table[h].group_weight > table[best].group_weight):
            best = h
    return best


@helper
def _write_group(
    n: int, head: int, hypotheses: Hypotheses, rows: int, mixture: Mixture, place: int
) -> None:
    """Write weight and matched moments of a group into one place of the mixture."""
    table, means, covariances = hypotheses.table, hypotheses.means, hypotheses.covariances
    mean, covariance = mixture.means[place], mixture.covariances[place]
    total = table[head].group_weight
    clear_moments(n, mean, covariance)
    for h in range(rows):
        if table[h].group == head:
            add_to_mean(n, table[h].weight / total, means[h], mean)
    for h in range(rows):
        if table[h].group == head:
            spread = covariances[table[h].covariance]
            add_to_covariance(n, table[h].weight / total, means[h], spread, mean, covariance)
    mirror(n, covariance)
    mixture.weights[place] = total
    mixture.modes[place] = table[head].mode


@helper
def _merge(n: int, hypotheses: Hypotheses, rows: int, merge_below: float) -> None:
    """Form groups greedily from the heaviest free row."""
    table, means, covariances = hypotheses.table, hypotheses.means, hypotheses.covariances
    work = hypotheses.work[0]
    factor = work[2:]
    for h in range(rows):
        table[h].group = _FREE if table[h].weight > 0.0 else _DROPPED
    head = _heaviest_free(table, rows)
    while head >= 0:
        factorised = factorise(n, covariances[table[head].covariance], factor)
        limit = merge_below if factorised else 0.0
        _gather(n, head, table, rows, means, factor, limit, work)
        head = _heaviest_free(table, rows)


@helper
def _keep_heaviest(n: int, hypotheses: Hypotheses, rows: int, most: int, mixture: Mixture) -> int:
    """Write the heaviest groups, rescaled to a total of one."""
    table = hypotheses.table
    count = 0
    head = _heaviest_group(table, rows)
    while head >= 0 and count < most:
        _write_group(n, head, hypotheses, rows, mixture, count)
        table[head].group_weight = 0.0  # written
        count += 1
        head = _heaviest_group(table, rows)
    rescale(mixture.weights, count)
    return count


def _prune_merge_cap(n: int) -> Callable[..., int]:
    """Prune, merge greedily from the heaviest, keep the heaviest."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        drop_light(hypotheses.table, rows, settings[0])
        _merge(n, hypotheses, rows, settings[1])
        return _keep_heaviest(n, hypotheses, rows, int(settings[2]), mixture)

    return reduce


def prune_merge_cap(prune_below: float, merge_below: float, max_components: int) -> Reduction:
    """Prune, merge greedily from the heaviest, keep the heaviest.

    prune_below     share of the total weight, [0, 1)
    merge_below     squared distance, unitless; 0 merges nothing
    max_components  at least 1
    """
    settings = np.array([prune_below, merge_below, max_components], float)
    return Reduction(_prune_merge_cap, max_components, settings)
