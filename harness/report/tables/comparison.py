"""The comparison table: one metric, by strategies and swept keys."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from harness.evidence.results import Results
from harness.report.findings import candidates, finding, is_best, listed, trials_run
from harness.report.quantities import Quantity, metric_quantity
from harness.report.swept import STRATEGY, SweptKey, plain, resolve, strategy_key, swept_keys
from harness.report.tables.notes import metric_notes, sign_meaning
from harness.report.tables.table import Cell, Column, Row, Table

DEFAULT_METRICS = ("track_loss_rate", "rmse_position")


def comparison_table(
    results: Results,
    metric: str = DEFAULT_METRICS[0],
    rows: Sequence[str] = (),
    columns: Sequence[str] = (),
) -> Table:
    """A metric of every case, with its interval, and the best marked.

    rows, columns  swept keys (dotted, or their last parts) and `strategy`; what neither names
                   heads blocks of rows. Without any, rows: the swept keys; columns: the strategies
    raises         ValueError: no such metric or key, or a key named twice
    """
    quantity = metric_quantity(results, metric)
    keys = {**swept_keys(results), STRATEGY: strategy_key(results)}
    row_keys, column_keys = _chosen(results, rows, columns)
    block_keys = [key for key in keys if key not in (*row_keys, *column_keys)]
    down, across = [*block_keys, *row_keys], column_keys
    order = (*down, *across)
    marking = len(candidates(results)) > 1
    cases = {
        tuple(plain(case[key]) for key in order): case_cell(case, metric, quantity, marking)
        for case in results.summary.to_dict("records")
    }
    rows_down = _in_order(keys, down, (levels[: len(down)] for levels in cases))
    rows_across = _in_order(keys, across, (levels[len(down) :] for levels in cases))
    return Table(
        question=results.question or results.title,
        title=f"{_capital(quantity.head)}: {_how(results, metric)}",
        keys=tuple(keys[key] for key in down),
        columns=tuple(
            _column(quantity, [keys[key] for key in across], levels) for levels in rows_across
        ),
        rows=tuple(
            Row(levels, tuple(cases.get((*levels, *other)) for other in rows_across))
            for levels in rows_down
        ),
        block_keys=len(block_keys),
        sign=sign_meaning(quantity),
        notes=metric_notes(results, metric, quantity),
        meaning=finding(results, metric) + ".",
    )


def _chosen(
    results: Results, rows: Sequence[str], columns: Sequence[str]
) -> tuple[list[str], list[str]]:
    """Keys of the rows and of the columns; what is not given is chosen to suit what is."""
    if not rows and not columns:
        return (results.swept, [STRATEGY]) if results.swept else ([STRATEGY], [])
    down = [resolve(results, key) for key in rows]
    across = [resolve(results, key) for key in columns]
    if not columns:
        across = _what_is_left(results, down)[-1:]
    if not rows:
        down = _what_is_left(results, across)
    named = [*down, *across]
    for key in named:
        if named.count(key) > 1:
            raise ValueError(f"{key!r} is named twice; rows and columns take each key once")
    return down, across


def _what_is_left(results: Results, taken: Sequence[str]) -> list[str]:
    """The strategies, unless they are taken; then the swept keys that are not."""
    return [key for key in results.swept if key not in taken] if STRATEGY in taken else [STRATEGY]


def _in_order(
    keys: Mapping[str, SweptKey], chosen: Sequence[str], found: Iterable[tuple[Any, ...]]
) -> list[tuple[Any, ...]]:
    """Combinations of levels, each once, in the order of the study."""
    places = [{level: place for place, level in enumerate(keys[key].levels)} for key in chosen]
    return sorted(
        set(found),
        key=lambda levels: [place[level] for place, level in zip(places, levels, strict=True)],
    )


def _column(quantity: Quantity, keys: Sequence[SweptKey], levels: Sequence[Any]) -> Column:
    """Head of a column: its levels, below the metric and the swept keys they belong to."""
    if not keys:
        return Column(quantity.head, whole=quantity.whole)
    name = ", ".join(key.label(level) for key, level in zip(keys, levels, strict=True))
    swept = [key.head for key in keys if key.key != STRATEGY]
    group = f"{quantity.head} by {listed(swept)}" if swept else quantity.head
    return Column(name, group, whole=quantity.whole)


def case_cell(case: Mapping[Any, Any], metric: str, quantity: Quantity, marking: bool) -> Cell:
    """A case's value of a metric with its interval, in the metric's unit."""
    value, low, high = (
        quantity.scale * float(case.get(name, math.nan))
        for name in (metric, f"{metric}_low", f"{metric}_high")
    )
    return Cell(value, low, high, marked=marking and is_best(case.get("best_in"), metric))


def _how(results: Results, metric: str) -> str:
    bounded = f"{metric}_low" in results.summary
    return trials_run(results) + (", 95 % intervals in brackets" if bounded else "")


def _capital(text: str) -> str:
    return text[0].upper() + text[1:]
