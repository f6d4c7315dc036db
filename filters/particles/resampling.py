"""Resampling: where copies are taken from when few samples carry most of the weight.

Copy i of N is taken from where the cumulated weights pass (i + u_i) / N, u_i uniform on [0, 1):

    systematic      one u for all: of weight w, N w copies, rounded down or up
    stratified      a u for each: less than two copies off N w, for a stretch of N w strata

Both keep the expected number of copies at N w, so that estimates of the evidence stay unbiased.

Source: Kitagawa (1996), Journal of Computational and Graphical Statistics 5; when to resample:
Kong, Liu and Wong (1994), Journal of the American Statistical Association 89 (from memory).
"""

from __future__ import annotations

from typing import Any

from filters.compiled import helper
from filters.random_numbers import Numbers, uniform

SYSTEMATIC, STRATIFIED = range(2)


@helper
def are_uneven(weights: Any, resample_below: float) -> bool:
    """Whether 1 / (sum of squared weights), their effective number, is below a share of them."""
    squares = 0.0
    for i in range(weights.shape[0]):
        squares += weights[i] ** 2
    return squares * resample_below * weights.shape[0] > 1.0


@helper
def choose_sources(weights: Any, scheme: int, numbers: Numbers, sources: Any) -> None:
    """Write whose copy each sample becomes, in order; from one uniform number, or one a sample.

    weights (N,) summing to one; scheme SYSTEMATIC or STRATIFIED; sources (N,) int64.
    """
    count = weights.shape[0]
    share = 1.0 / count
    offset = uniform(numbers)
    source = 0
    reached = weights[0]
    for i in range(count):
        if scheme == STRATIFIED and i > 0:
            offset = uniform(numbers)
        place = (i + offset) * share
        while place > reached and source < count - 1:
            source += 1
            reached += weights[source]
        sources[i] = source
