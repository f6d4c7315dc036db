"""The Bayes update of one scan: a component and the scan in, weighted hypotheses out.

With prior p, detection probability PD, likelihood g and clutter intensity lambda, a scan of M
detections gives M + 1 hypotheses a component:

    not detected    1 - PD PG
    detection j     PD N(z_j; zhat, S) / lambda(z_j), in the gate of probability PG

as logarithms, times the component's own weight. PD is taken at the component's mean. The density of
'not detected' stays the prior: the small correction for the gate is neglected. Who is told the true
origin considers no other detection.

Source: the weights of Bar-Shalom, Daum and Huang (2009), IEEE Control Systems 29(6), The
probabilistic data association filter, for Poisson clutter, with intensity and PD left as functions.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

from filters.cholesky import inverse_root_determinant, squared_distance
from filters.compiled import helper
from filters.hypotheses import NOT_DETECTED, Hypotheses, normalise
from filters.linearise import first_order
from filters.models.contract import Models
from filters.track import ORIGIN_UNKNOWN, Scan

HALF_LOG_TWO_PI = 0.5 * math.log(2 * math.pi)


class Gate(NamedTuple):
    """Which detections a component considers."""

    probability: float  # PG; 1 means no gate
    limit: float  # squared distance; infinite without a gate


@helper
def log_or_minus_infinity(value: float) -> float:
    """Logarithm with log 0 = -inf, without a warning in plain Python."""
    return math.log(value) if value > 0.0 else -math.inf


@helper
def difference(m: int, periods: Any, detection: Any, expected: Any, out: Any) -> None:
    """Write detection - expected, angles the short way round."""
    for i in range(m):
        value = detection[i] - expected[i]
        if periods[i] > 0.0:
            value -= periods[i] * round(value / periods[i])
        out[i] = value


@helper
def _fill_row(
    row: Any, log_weight: float, distance: float, parent: int, detection: int, covariance: int
) -> None:
    row.log_weight = log_weight
    row.distance = distance
    row.parent = parent
    row.detection = detection
    row.covariance = covariance


@helper
def explain_by_component(
    n: int,
    m: int,
    models: Models,
    gate: Gate,
    scan: Scan,
    component: int,
    weight: float,
    mean: Any,
    hypotheses: Hypotheses,
    rows: int,
    prediction: Any,
    work: Any,
) -> int:
    """Append the hypotheses of one component to the table.

    mean (n,); the component's covariance stands in hypotheses.covariances[2 * component], and what
    a detection leaves of it is written behind it. work (2, m).
    returns     rows in use now
    """
    table, means, covariances = hypotheses.table, hypotheses.means, hypotheses.covariances
    innovation, solved = work[0], work[1]
    prior = 2 * component
    log_weight = log_or_minus_infinity(weight)
    usable = first_order(
        n, m, models.sensor, scan.site, mean, covariances[prior], covariances[prior + 1], prediction
    )
    detected = models.detection.probability(models.detection.parameters, scan.site, mean)

    log_missed = log_or_minus_infinity(1.0 - detected * gate.probability)
    _fill_row(table[rows], log_weight + log_missed, 0.0, component, NOT_DETECTED, prior)
    for i in range(n):
        means[rows, i] = mean[i]
    rows += 1
    if not usable:
        return rows

    density_at_peak = inverse_root_determinant(m, prediction.factor)
    peak = log_or_minus_infinity(detected * density_at_peak) - m * HALF_LOG_TWO_PI
    for j in range(scan.detections.shape[0]):
        if scan.origin != ORIGIN_UNKNOWN and j != scan.origin:
            continue
        difference(m, models.sensor.periods, scan.detections[j], prediction.measurement, innovation)
        distance = squared_distance(m, prediction.factor, innovation, solved)
        if not distance < gate.limit:
            continue
        clutter = models.clutter.intensity(models.clutter.parameters, scan.site, scan.detections[j])
        log_clutter = math.log(clutter) if clutter > 0.0 else 0.0  # see settle for none
        log_found = log_weight + peak - 0.5 * distance - log_clutter
        _fill_row(table[rows], log_found, distance, component, j, prior + 1)
        table[rows].clutter = clutter
        for i in range(n):
            value = mean[i]
            for k in range(m):
                value += prediction.gain[i, k] * innovation[k]
            means[rows, i] = value
        rows += 1
    return rows


@helper
def settle(hypotheses: Hypotheses, rows: int, weights: Any) -> None:
    """Complete the table of a scan: the two limits of the model, then normalised weights.

    No clutter: hypotheses that need clutter where there is none lose all weight to a detection in
    the gate, as in the limit from above. Impossible under the model (PD = 1, no gate, no
    detection): the prediction is kept.

    weights (components,) of the prior.
    """
    table = hypotheses.table
    if _some_without_clutter(table, rows):
        for h in range(rows):
            if not _is_without_clutter(table[h]):
                table[h].log_weight = -math.inf
    if _all_impossible(table, rows):
        for h in range(rows):
            if table[h].detection == NOT_DETECTED:
                table[h].log_weight = log_or_minus_infinity(weights[table[h].parent])
    normalise(table, rows)


@helper
def _is_without_clutter(row: Any) -> bool:
    return row.detection != NOT_DETECTED and row.clutter == 0.0 and row.log_weight > -math.inf


@helper
def _some_without_clutter(table: Any, rows: int) -> bool:
    for h in range(rows):
        if _is_without_clutter(table[h]):
            return True
    return False


@helper
def _all_impossible(table: Any, rows: int) -> bool:
    for h in range(rows):
        if table[h].log_weight > -math.inf:
            return False
    return True
