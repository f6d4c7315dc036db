"""Prune and cap: drop light hypotheses and keep the heaviest of the others, merging nothing.

Source: the elimination of unlikely hypotheses of Reid (1979), IEEE Transactions on Automatic
Control 24, An algorithm for tracking multiple targets, for a single target.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from filters.reductions.reduction import Reduction
from filters.reductions.selection import drop_light, list_heaviest, write_listed


def _prune_and_cap(n: int) -> Callable[..., int]:
    """Prune, keep the heaviest."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        drop_light(hypotheses.table, rows, settings[0])
        count = list_heaviest(hypotheses.table, rows, int(settings[1]))
        write_listed(n, hypotheses, count, mixture)
        return count

    return reduce


def prune_and_cap(prune_below: float, max_components: int) -> Reduction:
    """Prune, keep the heaviest, heaviest first.

    prune_below     share of the total weight, [0, 1)
    max_components  at least 1
    """
    return Reduction(_prune_and_cap, max_components, np.array([prune_below, max_components], float))
