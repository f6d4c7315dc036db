"""The overall table at the end of a run: one row a strategy, over all conditions."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import replace

import pandas as pd

from harness.evidence.results import Results
from harness.report.findings import (
    best_counts,
    candidates,
    closest_case,
    finding,
    over_confident,
    trials_run,
)
from harness.report.numerals import NO_VALUE, short
from harness.report.quantities import METRICS
from harness.report.swept import STRATEGY, settings_of, strategy_key
from harness.report.tables.comparison import case_cell
from harness.report.tables.notes import common_notes, sign_meaning
from harness.report.tables.table import SOFT_HYPHEN, Cell, Column, Row, Table
from metrics.intervals import wilson_interval

LOSS, ERROR, CALIBRATION = "track_loss_rate", "rmse_position", "anees"

EQUAL_COSTS = 0.1  # costs that differ by less are as good as equal: they are measured

Measure = tuple[Column, Callable[[pd.DataFrame], Cell]]  # of a strategy's cases


def overall_table(results: Results) -> Table:
    """What to choose a strategy by: losses, errors, honesty and cost over all conditions.

    Lost tracks are pooled over the conditions, without an interval, as those share their scenes;
    'best' counts the conditions in which a strategy is not told apart from the best.
    """
    conditions = len(settings_of(results))
    measures = _over_conditions(results, conditions) if conditions > 1 else _at_one(results)
    strategies = strategy_key(results)
    rows = []
    for name in strategies.levels:
        cases = results.summary[results.summary[STRATEGY] == name]
        rows.append(Row((name,), tuple(measure(cases) for _, measure in measures)))
    return Table(
        question=results.question or results.title,
        title=_title(results, conditions),
        keys=(strategies,),
        columns=tuple(column for column, _ in measures),
        rows=tuple(rows),
        block_keys=0,
        sign=sign_meaning(METRICS[LOSS]),
        notes=_notes(results, conditions),
        meaning=_meaning(results, conditions),
    )


def _over_conditions(results: Results, conditions: int) -> list[Measure]:
    loss, error, calibration = (METRICS[metric].head for metric in (LOSS, ERROR, CALIBRATION))
    best = f"best of {conditions}"
    return [
        (_bare("all", loss), _pooled_loss),
        (_bare("median", loss), lambda cases: _median(cases, LOSS)),
        (_bare("worst", loss), lambda cases: _worst(cases, LOSS)),
        (_bare("median", error), lambda cases: _median(cases, ERROR)),
        (_bare("worst", error), lambda cases: _worst(cases, ERROR)),
        (_bare("median", calibration), lambda cases: _median(cases, CALIBRATION)),
        (_bare("worst", calibration), lambda cases: _worst(cases, CALIBRATION)),
        (Column("loss", best, whole=True), _count_of_best(results, LOSS)),
        (Column("error", best, whole=True), _count_of_best(results, ERROR)),
        *_costs(),
    ]


def _bare(name: str, group: str) -> Column:
    return Column(name, group, shows_interval=False)


def _at_one(results: Results) -> list[Measure]:
    marking = len(candidates(results)) > 1
    return [
        *(
            (Column(METRICS[metric].head), _value_of(metric, marking))
            for metric in (LOSS, ERROR, CALIBRATION)
        ),
        *_costs(),
    ]


def _costs() -> list[Measure]:
    return [
        (
            Column(f"hypo{SOFT_HYPHEN}theses", "a scan"),
            lambda cases: Cell(cases["hypotheses_per_scan"].median()),
        ),
        (Column("time [us]", "a scan"), lambda cases: Cell(cases["us_per_scan"].median())),
    ]


def _value_of(metric: str, marking: bool) -> Callable[[pd.DataFrame], Cell]:
    return lambda cases: case_cell(cases.iloc[0].to_dict(), metric, METRICS[metric], marking)


def _count_of_best(results: Results, metric: str) -> Callable[[pd.DataFrame], Cell]:
    counts = best_counts(results, metric)
    return lambda cases: Cell(counts.get(cases[STRATEGY].iloc[0], math.nan))


def _median(cases: pd.DataFrame, metric: str) -> Cell:
    """Median over the conditions, with the interval of the case closest to it."""
    median = cases[metric].median()
    return replace(_closest(cases, metric, median), value=METRICS[metric].scale * median)


def _worst(cases: pd.DataFrame, metric: str) -> Cell:
    """The case with the greatest value; of a ratio that should be 1, the farthest from it."""
    values = cases[metric]
    if METRICS[metric].expected is None:
        return _closest(cases, metric, values.max())
    ratios = values[values > 0]
    return _closest(cases, metric, max(ratios, key=lambda x: abs(math.log(x)), default=math.nan))


def _closest(cases: pd.DataFrame, metric: str, value: float) -> Cell:
    """The case whose value is closest to one; an empty cell for NaN."""
    if math.isnan(value):
        return Cell(math.nan)
    case = closest_case(cases, metric, value)
    return case_cell(case, metric, METRICS[metric], marking=False)


def _pooled_loss(cases: pd.DataFrame) -> Cell:
    trials, lost = int((cases["trials"] - cases["failed"]).sum()), int(cases["lost"].sum())
    low, high = wilson_interval(lost, trials)  # decides how many digits are shown, no more
    scale = METRICS[LOSS].scale
    return Cell(
        scale * lost / trials if trials else math.nan, scale * float(low), scale * float(high)
    )


def _title(results: Results, conditions: int) -> str:
    if conditions == 1:
        return f"Overall: {trials_run(results)}, 95 % intervals in brackets"
    return f"Over all {conditions} conditions: {trials_run(results)}"


def _notes(results: Results, conditions: int) -> tuple[str, ...]:
    notes = ["RMSE and ANEES are over trials that held track; ANEES of 1 is expected."]
    if conditions > 1:
        notes = [
            "all: lost tracks of all conditions together, without an interval, as conditions share",
            "their random numbers.",
            "worst ANEES: the one farthest from 1.",
            "best: in how many conditions it is best or not told apart from the best.",
            *notes,
        ]
    notes.append(f"{NO_VALUE} no candidate, no trial that held track, or no count of hypotheses.")
    return (*notes, *common_notes(results))


def _cheapest(costs: Mapping[str, float]) -> str:
    """Who costs least; of those within a tenth of it, the first in the study."""
    least = min(costs.values())
    return next(name for name, cost in costs.items() if cost <= (1 + EQUAL_COSTS) * least)


def _meaning(results: Results, conditions: int) -> str:
    """Which strategy leads, what the cheapest gives up, and whether the leader is honest."""
    loss, error = best_counts(results, LOSS), best_counts(results, ERROR)
    if conditions == 1 or len(loss) < 2 or not any(loss.values()):
        return finding(results, LOSS) + "."
    cost = results.summary.groupby(STRATEGY)["us_per_scan"].median()
    leader = max(loss, key=lambda name: (loss[name], error[name], -cost[name]))
    cheapest = _cheapest({name: cost[name] for name in loss})
    text = (
        f"{leader}: best or not told apart from the best in {loss[leader]} of {conditions} "
        f"conditions on track loss, in {error[leader]} on position error"
    )
    if cheapest == leader:
        text += "; it is also the cheapest."
    elif cost[leader] <= (1 + EQUAL_COSTS) * min(cost[name] for name in loss):
        text += f"; none is cheaper by more than {EQUAL_COSTS:.0%}."
    else:
        text += (
            f". The cheapest, {cheapest} ({short(cost[cheapest])} us a scan against "
            f"{short(cost[leader])}): in {loss[cheapest]} and {error[cheapest]}."
        )
    if wrong := over_confident(results, CALIBRATION, leader):
        text += f" {leader} is over-confident in {wrong}."
    return text
