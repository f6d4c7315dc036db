"""Reductions that take one hypothesis as certain.

NEAREST         the detection of least squared distance: the textbook nearest neighbour filter
HEAVIEST        the most probable hypothesis, 'not detected' among them
TRUE_ORIGIN     the one with the true origin: a reference, possible only in simulation
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from filters.compiled import helper
from filters.hypotheses import NOT_DETECTED, Hypotheses
from filters.mixture import Mixture
from filters.reductions.reduction import Reduction
from filters.reductions.selection import write_row

# One component goes in, so row 0 is its 'not detected' in every table below.


@helper
def _nearest(table: Any, rows: int) -> int:
    best = 0
    for h in range(1, rows):
        if table[best].detection == NOT_DETECTED or table[h].distance < table[best].distance:
            best = h
    return best


@helper
def _heaviest(table: Any, rows: int) -> int:
    best = 0
    for h in range(1, rows):
        if table[h].log_weight > table[best].log_weight:
            best = h
    return best


@helper
def _of_origin(table: Any, rows: int, origin: int) -> int:
    for h in range(rows):
        if table[h].detection == origin:
            return h
    return 0


@helper
def _keep(n: int, h: int, hypotheses: Hypotheses, mixture: Mixture) -> int:
    write_row(n, hypotheses, h, mixture, 0)
    mixture.weights[0] = 1.0
    return 1


def _keep_nearest(n: int) -> Callable[..., int]:
    """Keep the detection of least squared distance; the prediction where there is none."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        return _keep(n, _nearest(hypotheses.table, rows), hypotheses, mixture)

    return reduce


def _keep_heaviest(n: int) -> Callable[..., int]:
    """Keep the hypothesis of greatest weight."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        return _keep(n, _heaviest(hypotheses.table, rows), hypotheses, mixture)

    return reduce


def _keep_true_origin(n: int) -> Callable[..., int]:
    """Keep the hypothesis of the detection that is the target's own, or 'not detected'."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        return _keep(n, _of_origin(hypotheses.table, rows, origin), hypotheses, mixture)

    return reduce


NEAREST = Reduction(_keep_nearest)
HEAVIEST = Reduction(_keep_heaviest)
TRUE_ORIGIN = Reduction(_keep_true_origin)
