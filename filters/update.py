"""The Bayes update of one scan: a component and the scan in, weighted hypotheses out.

With prior p, detection probability PD, likelihood g and clutter intensity lambda, a scan of M
detections gives M + 1 hypotheses a component:

    not detected    1 - PD PG
    detection j     PD N(z_j; zhat, S) / lambda(z_j), in the gate of probability PG

as logarithms, times the component's own weight. PD is taken at the component's mean; by quadrature
it stays inside the integral, for detections as well as misses (see detecting). Without
that the density of 'not detected' stays the prior: the small correction for the gate is neglected.
Who is told the true origin considers no other detection.

Source: the weights of Bar-Shalom, Daum and Huang (2009), IEEE Control Systems 29(6), The
probabilistic data association filter, for Poisson clutter, with intensity and PD left as functions.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

from filters.compiled import helper
from filters.detecting import log_or_minus_infinity, weigh_by_detection
from filters.hypotheses import NOT_DETECTED, Component, Hypotheses, TotalWeight, normalise
from filters.linearisation.choice import compare, given_detection, predict_measurement
from filters.linearisation.room import UpdateRoom
from filters.models.contract import Models
from filters.track import ORIGIN_UNKNOWN, Scan

HALF_LOG_TWO_PI = 0.5 * math.log(2 * math.pi)


class Gate(NamedTuple):
    """Which detections a component considers."""

    probability: float  # PG; 1 means no gate
    limit: float  # squared distance; infinite without a gate


class UpdateRules(NamedTuple):
    """How hypotheses are formed; classes say which way, see linearisation.choice and detecting."""

    gate: Gate
    linearisation: Any
    detecting: Any


@helper
def _fill_row(row: Any, component: Component, detection: int, distance: float) -> None:
    row.weight = component.weight  # before the scan, until weights are settled
    row.distance = distance
    row.parent = component.parent
    row.mode = component.mode
    row.detection = detection


@helper
def explain_by_component(
    n: int,
    m: int,
    models: Models,
    rules: UpdateRules,
    scan: Scan,
    component: Component,
    hypotheses: Hypotheses,
    rows: int,
    room: UpdateRoom,
) -> int:
    """Append the hypotheses of one component to the table.

    What a detection leaves of the component's covariance is written behind it, or in a place of the
    row's own.
    returns     rows in use now
    """
    table, how, sensor = hypotheses.table, rules.linearisation, models.sensor
    log_weight = log_or_minus_infinity(component.weight)

    first = rows
    _fill_row(table[rows], component, NOT_DETECTED, 0.0)
    table[rows].log_weight = log_weight
    table[rows].covariance = 2 * component.slot
    for i in range(n):
        hypotheses.means[rows, i] = component.mean[i]
    rows += 1

    count = scan.detections.shape[0]
    if not predict_measurement(n, m, how, sensor, scan.site, component, hypotheses, room):
        count = 0
    for j in range(count):
        if scan.origin != ORIGIN_UNKNOWN and j != scan.origin:
            continue
        detection = scan.detections[j]
        distance = compare(n, m, how, sensor, scan.site, component, hypotheses, detection, room)
        if not distance < rules.gate.limit:
            continue
        _fill_row(table[rows], component, j, distance)
        clutter = models.clutter.intensity(models.clutter.parameters, scan.site, detection)
        table[rows].clutter = clutter
        log_clutter = math.log(clutter) if clutter > 0.0 else 0.0  # see settle for none
        log_density = given_detection(
            n, m, how, sensor, scan.site, component, hypotheses, detection, rows, room
        )
        table[rows].log_weight = log_weight + log_density - m * HALF_LOG_TWO_PI - log_clutter
        rows += 1

    weigh_by_detection(
        n,
        rules.detecting,
        rules.gate.probability,
        models.detection,
        scan.site,
        component,
        hypotheses,
        first,
        rows,
        room,
    )
    return rows


@helper
def settle(hypotheses: Hypotheses, rows: int) -> TotalWeight:
    """Complete the table of a scan: the two limits of the model, then normalised weights.

    No clutter: hypotheses that need clutter where there is none lose all weight to a detection in
    the gate, as in the limit from above. Impossible under the model (PD = 1, no gate, no
    detection): the prediction is kept.

    returns     the total weight; infinite without clutter, 0 if impossible
    """
    table = hypotheses.table
    without_clutter = _some_without_clutter(table, rows)
    if without_clutter:
        for h in range(rows):
            if not _is_without_clutter(table[h]):
                table[h].log_weight = -math.inf
    impossible = _all_impossible(table, rows)
    if impossible:
        for h in range(rows):
            if table[h].detection == NOT_DETECTED:
                table[h].log_weight = log_or_minus_infinity(table[h].weight)
    total = normalise(table, rows)
    if impossible:
        return TotalWeight(-math.inf, 1.0)
    return TotalWeight(math.inf, 1.0) if without_clutter else total


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
