"""What being detected, or missed, says of the weight of a hypothesis and of the state.

The detection probability is taken at the component's mean, or it stays inside the integral, by
quadrature.

Inside the integral, a Gaussian p weighed by f, where f = PD for a detection and f = 1 - PG PD for
none, has the weight E[f] and the density p f / E[f], whose moments are matched. So a miss moves the
estimate towards where the target would be missed, a detection towards where it would be seen.

With points mean + L xi of weights w the moments are formed among the xi, where p is standard.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

from filters.cholesky import factorise
from filters.compiled import chosen_by_type, helper
from filters.hypotheses import Component, Hypotheses, own_covariance
from filters.linearisation.room import PointRoom, UpdateRoom
from filters.linearisation.rules import PointRule
from filters.linearisation.sigma_points import place_points
from filters.mixture import mirror
from filters.models.contract import DetectionModel


class AtMean(NamedTuple):
    """The detection probability is that of the component's mean."""

    none: int = 0


@helper
def log_or_minus_infinity(value: float) -> float:
    """Logarithm with log 0 = -inf, without a warning in plain Python."""
    return math.log(value) if value > 0.0 else -math.inf


@helper
def _weigh_at_mean(
    n: int,
    how: AtMean,
    gate_probability: float,
    detection: DetectionModel,
    site: Any,
    component: Component,
    hypotheses: Hypotheses,
    first: int,
    end: int,
    room: UpdateRoom,
) -> None:
    """Weigh the rows of a component by PD, or 1 - PG PD for the first."""
    table = hypotheses.table
    detected = detection.probability(detection.parameters, site, component.mean)
    table[first].log_weight += log_or_minus_infinity(1.0 - detected * gate_probability)
    log_detected = log_or_minus_infinity(detected)
    for row in range(first + 1, end):
        table[row].log_weight += log_detected


@helper
def _weigh(
    n: int,
    detection: DetectionModel,
    site: Any,
    rule: PointRule,
    offset: float,
    slope: float,
    room: PointRoom,
    mean: Any,
) -> float:
    """Fill room.values with w f, f = offset + slope PD, and the mean of xi; return E[f]."""
    total = 0.0
    for row in range(n):
        mean[row] = 0.0
    for i in range(rule.points.shape[0]):
        detected = detection.probability(detection.parameters, site, room.states[i])
        room.values[i] = rule.weights[i] * (offset + slope * detected)
        total += room.values[i]
        for row in range(n):
            mean[row] += room.values[i] * rule.points[i, row]
    for row in range(n):
        mean[row] = mean[row] / total if total > 0.0 else 0.0
    return total


@helper
def _spread_among_points(
    n: int, rule: PointRule, total: float, mean: Any, room: PointRoom, out: Any
) -> None:
    """Write the covariance of xi, (n, n)."""
    for row in range(n):
        for column in range(row + 1):
            out[row, column] = 0.0
    for i in range(rule.points.shape[0]):
        share = room.values[i] / total
        for row in range(n):
            offset = share * (rule.points[i, row] - mean[row])
            for column in range(row + 1):
                out[row, column] += offset * (rule.points[i, column] - mean[column])
    mirror(n, out)


@helper
def _carry_over(n: int, root: Any, spread: Any, work: Any, out: Any) -> None:
    """Write L spread L', (n, n)."""
    for row in range(n):
        for column in range(n):
            value = 0.0
            for k in range(row + 1):
                value += root[row, k] * spread[k, column]
            work[row, column] = value
    for row in range(n):
        for column in range(row + 1):
            value = 0.0
            for k in range(column + 1):
                value += work[row, k] * root[column, k]
            out[row, column] = value
    mirror(n, out)


@helper
def _weigh_gaussian(
    n: int,
    detection: DetectionModel,
    site: Any,
    rule: PointRule,
    offset: float,
    slope: float,
    mean: Any,
    covariance: Any,
    room: PointRoom,
    out_mean: Any,
    out_covariance: Any,
) -> float:
    """Return E[f] of a Gaussian, f = offset + slope PD, and write the moments of p f / E[f].

    Where too few points have weight to span a covariance the Gaussian is kept. mean, out_mean (n,)
    and covariance, out_covariance (n, n) may be the same.
    """
    place_points(n, rule, mean, covariance, room)
    middle, spread, work = room.middle, room.spread[0], room.spread[1]
    total = _weigh(n, detection, site, rule, offset, slope, room, middle)
    usable = total > 0.0
    if usable:
        _spread_among_points(n, rule, total, middle, room, spread)
        usable = factorise(n, spread, work)
    for row in range(n):
        value = mean[row]
        if usable:
            for k in range(row + 1):
                value += room.root[row, k] * middle[k]
        out_mean[row] = value
    if usable:
        _carry_over(n, room.root, spread, work, out_covariance)
    else:
        for row in range(n):
            for column in range(n):
                out_covariance[row, column] = covariance[row, column]
    return total


@helper
def _weigh_by_quadrature(
    n: int,
    how: PointRule,
    gate_probability: float,
    detection: DetectionModel,
    site: Any,
    component: Component,
    hypotheses: Hypotheses,
    first: int,
    end: int,
    room: UpdateRoom,
) -> None:
    """Weigh each row by its own E[PD], or E[1 - PG PD] for the first, and move its moments."""
    table, means, covariances = hypotheses.table, hypotheses.means, hypotheses.covariances
    for row in range(first, end):
        own = own_covariance(hypotheses, row)
        is_missed = row == first
        expected = _weigh_gaussian(
            n,
            detection,
            site,
            how,
            1.0 if is_missed else 0.0,
            -gate_probability if is_missed else 1.0,
            means[row],
            covariances[table[row].covariance],
            room.points,
            means[row],
            covariances[own],
        )
        table[row].log_weight += log_or_minus_infinity(expected)
        table[row].covariance = own


# Rows first : end are those of one component, its 'not detected' first.
weigh_by_detection = chosen_by_type(
    "how", {AtMean: _weigh_at_mean, PointRule: _weigh_by_quadrature}
)
