"""Prune, cap, then merge the pair that costs least, again and again, until few are left.

Merging components i and j of weights w, covariances P, into one of their moments, P_ij, moves the
mixture by at most

    B(i, j) = 1/2 [(w_i + w_j) log|P_ij| - w_i log|P_i| - w_j log|P_j|]

in Kullback-Leibler divergence. It is the least bound that merges, however large it is; components
that moved by different motions never do. Every candidate remembers its best partner among those
before it. K candidates have K (K - 1) / 2 pairs, and each of the merges that follow costs some K
more: of the order of K^2 bounds in all.

Source: Runnalls (2007), IEEE Transactions on Aerospace and Electronic Systems 43(3),
Kullback-Leibler approach to Gaussian mixture reduction, equation 21.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np

from filters.cholesky import factorise, inverse_root_determinant
from filters.compiled import helper
from filters.hypotheses import Hypotheses
from filters.mixture import Mixture, copy_gaussian, mirror
from filters.reductions.reduction import Reduction
from filters.reductions.selection import drop_light, list_heaviest, rescale

# Candidate c is the row listed in row c. Its weight, log determinant, best partner and the cost of
# that stand in row c itself (weight 0: gone into another), its mean in row 0 of slot c and its
# covariance from row 2 of it on. One slot more is for a pair.
_NOBODY = -1


@helper
def _log_determinant(n: int, matrix: Any, factor: Any) -> float:
    """Log determinant, nan of a matrix that is not positive definite; factor may be the matrix."""
    if not factorise(n, matrix, factor):
        return math.nan
    return -2.0 * math.log(inverse_root_determinant(n, factor))


@helper
def _load(n: int, hypotheses: Hypotheses, count: int) -> None:
    """Make candidates of the rows listed."""
    table, slots = hypotheses.table, hypotheses.work
    factor = slots[count, 2:]
    for c in range(count):
        h = table[c].listed
        mean, spread = slots[c, 0], slots[c, 2:]
        original = hypotheses.covariances[table[h].covariance]
        copy_gaussian(n, hypotheses.means[h], original, mean, spread)
        table[c].group_weight = table[h].weight
        table[c].log_determinant = _log_determinant(n, spread, factor)


@helper
def _merge_covariances(n: int, hypotheses: Hypotheses, i: int, j: int, merged: Any) -> None:
    """Write the lower triangle of the covariance of two candidates together, or in i's place."""
    table, slots = hypotheses.table, hypotheses.work
    total = table[i].group_weight + table[j].group_weight
    of_i, of_j = table[i].group_weight / total, table[j].group_weight / total
    mean_i, mean_j = slots[i, 0], slots[j, 0]
    spread_i, spread_j = slots[i, 2:], slots[j, 2:]
    for row in range(n):
        offset = of_i * of_j * (mean_i[row] - mean_j[row])
        for column in range(row + 1):
            merged[row, column] = (
                of_i * spread_i[row, column]
                + of_j * spread_j[row, column]
                + offset * (mean_i[column] - mean_j[column])
            )


@helper
def _bound(n: int, hypotheses: Hypotheses, i: int, j: int, pair: Any) -> float:
    """Bound of merging two candidates, infinite across modes; pair (n, n) is for working in."""
    table = hypotheses.table
    if table[table[i].listed].mode != table[table[j].listed].mode:
        return math.inf
    _merge_covariances(n, hypotheses, i, j, pair)
    merged = _log_determinant(n, pair, pair)
    return 0.5 * (
        table[i].group_weight * (merged - table[i].log_determinant)
        + table[j].group_weight * (merged - table[j].log_determinant)
    )


@helper
def _offer(n: int, hypotheses: Hypotheses, candidate: int, other: int, pair: Any) -> None:
    """Take another as partner if it costs less than the present one."""
    row = hypotheses.table[candidate]
    cost = _bound(n, hypotheses, candidate, other, pair)
    if cost < row.cost:
        row.cost = cost
        row.partner = other


@helper
def _find_partner(n: int, hypotheses: Hypotheses, candidate: int, pair: Any) -> None:
    """Look for the best partner among the candidates before this one."""
    table = hypotheses.table
    table[candidate].partner = _NOBODY
    table[candidate].cost = math.inf
    for other in range(candidate):
        if table[other].group_weight > 0.0:
            _offer(n, hypotheses, candidate, other, pair)


@helper
def _cheapest(table: Any, count: int) -> int:
    """Return the candidate whose merging with its partner costs least, _NOBODY if none can."""
    best = _NOBODY
    for c in range(count):
        can_merge = table[c].group_weight > 0.0 and table[c].partner != _NOBODY
        if can_merge and (best == _NOBODY or table[c].cost < table[best].cost):
            best = c
    return best


@helper
def _merge(n: int, hypotheses: Hypotheses, kept: int, gone: int, factor: Any) -> None:
    """Merge one candidate into another, whose moments become those of both."""
    table, slots = hypotheses.table, hypotheses.work
    mean, other = slots[kept, 0], slots[gone, 0]
    spread = slots[kept, 2:]
    _merge_covariances(n, hypotheses, kept, gone, spread)
    mirror(n, spread)
    total = table[kept].group_weight + table[gone].group_weight
    of_gone = table[gone].group_weight / total
    for i in range(n):
        mean[i] += of_gone * (other[i] - mean[i])
    table[kept].group_weight = total
    table[kept].log_determinant = _log_determinant(n, spread, factor)
    table[gone].group_weight = 0.0


@helper
def _look_again(
    n: int, hypotheses: Hypotheses, count: int, kept: int, gone: int, pair: Any
) -> None:
    """Renew what is stale after a merge: candidates before `kept` never had either as partner."""
    table = hypotheses.table
    for c in range(kept, count):
        if not table[c].group_weight > 0.0:
            continue
        if c == kept or table[c].partner == kept or table[c].partner == gone:
            _find_partner(n, hypotheses, c, pair)
        else:
            _offer(n, hypotheses, c, kept, pair)


@helper
def _lightest(table: Any, count: int) -> int:
    best = _NOBODY
    for c in range(count):
        is_left = table[c].group_weight > 0.0
        if is_left and (best == _NOBODY or table[c].group_weight < table[best].group_weight):
            best = c
    return best


@helper
def _reduce_to(n: int, hypotheses: Hypotheses, count: int, most: int) -> None:
    """Merge the cheapest pairs until `most` candidates are left; drop the lightest if none can."""
    table, slots = hypotheses.table, hypotheses.work
    pair = slots[count, 2:]
    if count > most:
        for c in range(count):
            _find_partner(n, hypotheses, c, pair)
    for _ in range(count - most):
        gone = _cheapest(table, count)
        if gone == _NOBODY:
            table[_lightest(table, count)].group_weight = 0.0
        else:
            kept = table[gone].partner
            _merge(n, hypotheses, kept, gone, pair)
            _look_again(n, hypotheses, count, kept, gone, pair)


@helper
def _write(n: int, hypotheses: Hypotheses, count: int, mixture: Mixture) -> int:
    """Write the candidates that are left, rescaled to a total of one."""
    table, slots = hypotheses.table, hypotheses.work
    place = 0
    for c in range(count):
        if table[c].group_weight > 0.0:
            to_mean, to_spread = mixture.means[place], mixture.covariances[place]
            copy_gaussian(n, slots[c, 0], slots[c, 2:], to_mean, to_spread)
            mixture.weights[place] = table[c].group_weight
            mixture.modes[place] = table[table[c].listed].mode
            place += 1
    rescale(mixture.weights, place)
    return place


def _merge_by_bound(n: int) -> Callable[..., int]:
    """Prune, keep the heaviest, merge by the least bound."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        drop_light(hypotheses.table, rows, settings[0])
        count = list_heaviest(hypotheses.table, rows, int(settings[1]))
        _load(n, hypotheses, count)
        _reduce_to(n, hypotheses, count, int(settings[2]))
        return _write(n, hypotheses, count, mixture)

    return reduce


def merge_by_bound(prune_below: float, merge_among: int, max_components: int) -> Reduction:
    """Prune, keep the heaviest, merge the pairs of least bound until few are left.

    prune_below     share of the total weight, [0, 1)
    merge_among     most hypotheses that are compared pair by pair, at least max_components
    max_components  at least 1
    """
    settings = np.array([prune_below, merge_among, max_components], float)
    return Reduction(_merge_by_bound, max_components, settings, slots=merge_among + 1)
