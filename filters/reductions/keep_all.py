"""No reduction: every hypothesis becomes a component. Exact, and for short scenes only."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from filters.mixture import copy_gaussian
from filters.reductions.reduction import Reduction


def _keep_all(n: int) -> Callable[..., int]:
    """Keep every hypothesis that has weight."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        count = 0
        for h in range(rows):
            row = hypotheses.table[h]
            if row.weight > 0.0:
                copy_gaussian(
                    n,
                    hypotheses.means[h],
                    hypotheses.covariances[row.covariance],
                    mixture.means[count],
                    mixture.covariances[count],
                )
                mixture.weights[count] = row.weight
                mixture.modes[count] = row.mode
                count += 1
        return count

    return reduce


def keep_all(capacity: int) -> Reduction:
    """Keep every hypothesis; capacity is the most that any scan forms."""
    return Reduction(_keep_all, capacity)
