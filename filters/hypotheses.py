"""The table of hypotheses: one row for each way to explain a scan by one component of the prior.

Row h says: the target was component `parent`, and detection `detection` was its own, or it was not
detected (NOT_DETECTED). Its mean stands in row h of an array beside the table, its covariance in
row `covariance` of another: detections of one parent usually share theirs.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numba import from_dtype, types

from filters.compiled import helper
from filters.mixture import Mixture
from filters.models.contract import MATRIX, VECTOR

NOT_DETECTED = -1

HYPOTHESIS = np.dtype(
    [
        ("log_weight", np.float64),  # not normalised
        ("weight", np.float64),  # normalised over the table
        ("distance", np.float64),  # squared distance of the detection, 0 if not detected
        ("clutter", np.float64),  # intensity at the detection
        ("parent", np.int64),
        ("detection", np.int64),
        ("covariance", np.int64),
        ("mode", np.int64),  # which of the motions the component moved by
        # for the reduction's own use
        ("listed", np.int64),  # a row in the list that begins in row 0
        ("group", np.int64),
        ("partner", np.int64),
        ("group_weight", np.float64),
        ("log_determinant", np.float64),
        ("cost", np.float64),
    ],
    align=True,
)


class Component(NamedTuple):
    """A component of the prediction; its covariance is row 2 * slot of the hypotheses'."""

    slot: int  # among all components predicted
    parent: int  # among those of the mixture
    mode: int
    weight: float
    mean: Any  # (n,)


class Hypotheses(NamedTuple):
    """Room for the hypotheses of one scan; how many rows are in use is told beside it."""

    table: Any  # (capacity,) HYPOTHESIS
    means: Any  # (capacity, n)
    covariances: Any  # (at least the highest index in `covariance` + 1, n, n)
    histories: Any  # (capacity, depth) int64, for reductions that look at them
    work: Any  # (slots, n + 2, n) for the reduction's own use


_INTEGERS = types.Array(types.int64, 1, "C")
_HISTORIES = types.Array(types.int64, 2, "C")
_CUBE = types.Array(types.float64, 3, "C")
_TABLE = types.Array(from_dtype(HYPOTHESIS), 1, "C")
_HYPOTHESES = types.NamedTuple((_TABLE, MATRIX, _CUBE, _HISTORIES, _CUBE), Hypotheses)
_MIXTURE = types.NamedTuple((VECTOR, MATRIX, _CUBE, _INTEGERS, _HISTORIES), Mixture)

# A reduction: (hypotheses, rows, origin, settings, mixture) -> number of components written
REDUCE = types.int64(_HYPOTHESES, types.int64, types.int64, VECTOR, _MIXTURE)


@helper
def own_covariance(hypotheses: Hypotheses, row: int) -> int:
    """Place of a covariance that one row alone uses: behind those of the components."""
    return hypotheses.covariances.shape[0] - hypotheses.means.shape[0] + row


class TotalWeight(NamedTuple):
    """Sum of a table's weights before they were normalised, as exp(log_scale) * sum.

    It is how much likelier the scan is with the target than as clutter alone.
    """

    log_scale: float  # infinite where the scan needs a target, -inf where it is impossible
    sum: float


@helper
def log_total(total: TotalWeight) -> float:
    """Logarithm of a total weight."""
    return total.log_scale + math.log(total.sum)


@helper
def normalise(table: Any, rows: int) -> TotalWeight:
    """Set weight = exp(log_weight) / sum, safe at any magnitude; not all may be -inf."""
    heaviest = -math.inf
    for h in range(rows):
        heaviest = max(heaviest, table[h].log_weight)
    total = 0.0
    for h in range(rows):
        weight = math.exp(table[h].log_weight - heaviest)
        table[h].weight = weight
        total += weight
    scale = 1.0 / total
    for h in range(rows):
        table[h].weight *= scale
    return TotalWeight(heaviest, total)
