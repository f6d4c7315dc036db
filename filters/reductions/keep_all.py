"""No reduction: every hypothesis becomes a component. Exact, and for short scenes only."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from filters.reductions.reduction import Reduction
from filters.reductions.selection import write_row


def _keep_all(n: int) -> Callable[..., int]:
    """Keep every hypothesis that has weight."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        count = 0
        for h in range(rows):
            if hypotheses.table[h].weight > 0.0:
                write_row(n, hypotheses, h, mixture, count)
                count += 1
        return count

    return reduce


def keep_all(capacity: int) -> Reduction:
    """Keep every hypothesis; capacity is the most that any scan forms."""
    return Reduction(_keep_all, capacity)
