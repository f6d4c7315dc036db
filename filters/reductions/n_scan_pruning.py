"""N-scan pruning: what was associated N scans ago is settled by the heaviest hypothesis of today.

Hypotheses that disagree with it there are dropped; then light ones, and all but the heaviest.
Nothing is merged. As all that are left agreed on every earlier scan already, they agree on all
scans up to N ago.

Source: Blackman (2004), IEEE Aerospace and Electronic Systems Magazine 19(1), Multiple hypothesis
tracking for multiple target tracking, for a single target.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from filters.compiled import helper
from filters.hypotheses import Hypotheses
from filters.mixture import Mixture
from filters.reductions.reduction import Reduction
from filters.reductions.selection import drop_light, list_heaviest, write_listed


@helper
def _keep_agreeing(table: Any, rows: int, histories: Any) -> None:
    """Drop rows whose oldest association is not the heaviest row's; rescale the others.

    histories (components, N) of the parents, newest first.
    """
    oldest = histories.shape[1] - 1
    heaviest = 0
    for h in range(1, rows):
        if table[h].weight > table[heaviest].weight:
            heaviest = h
    settled = histories[table[heaviest].parent, oldest]
    total = 0.0
    for h in range(rows):
        if histories[table[h].parent, oldest] != settled:
            table[h].weight = 0.0
        total += table[h].weight
    for h in range(rows):
        table[h].weight /= total


@helper
def _remember(hypotheses: Hypotheses, count: int, mixture: Mixture) -> None:
    """Write the histories of the listed rows: own association, then all but the parent's oldest."""
    table, histories = hypotheses.table, hypotheses.histories
    depth = histories.shape[1]
    for place in range(count):
        row = table[table[place].listed]
        histories[place, 0] = row.detection
        for scan in range(1, depth):
            histories[place, scan] = mixture.histories[row.parent, scan - 1]
    for place in range(count):
        for scan in range(depth):
            mixture.histories[place, scan] = histories[place, scan]


def _n_scan_pruning(n: int) -> Callable[..., int]:
    """Keep what agrees N scans ago, prune, keep the heaviest."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        table = hypotheses.table
        _keep_agreeing(table, rows, mixture.histories)
        drop_light(table, rows, settings[0])
        count = list_heaviest(table, rows, int(settings[1]))
        _remember(hypotheses, count, mixture)
        write_listed(n, hypotheses, count, mixture)
        return count

    return reduce


def n_scan_pruning(scans_back: int, prune_below: float, max_components: int) -> Reduction:
    """Keep what agrees with the heaviest on the association `scans_back` scans ago; prune; cap.

    scans_back      N, at least 1; with 1, every association but today's is settled
    prune_below     share of the total weight of what agrees, [0, 1)
    max_components  at least 1
    """
    settings = np.array([prune_below, max_components], float)
    return Reduction(_n_scan_pruning, max_components, settings, depth=scans_back)
