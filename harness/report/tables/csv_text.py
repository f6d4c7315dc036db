"""A table as CSV: one head, a line a row, every number in full."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterator

from harness.report.tables.table import SIGN, Cell, Table


def as_csv(table: Table) -> str:
    """Keys, then each column's values; behind them low, high and the mark where a column has any.

    Numbers are in the unit of the head, with 12 significant digits; what has no value is empty.
    """
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    columns = range(len(table.columns))
    heads = [key.head for key in table.keys]
    bodies: list[list[object]] = [list(row.levels) for row in table.rows]
    for column in columns:
        for head, values in _fields(table, column):
            heads.append(head)
            for body, value in zip(bodies, values, strict=True):
                body.append(value)
    writer.writerows([heads, *bodies])
    return text.getvalue()


def _fields(table: Table, column: int) -> Iterator[tuple[str, list[str]]]:
    head, cells = table.columns[column], table.column_cells(column)
    yield head.head, [_number(cell.value) if cell else "" for cell in cells]
    given = [cell for cell in cells if cell]
    if head.shows_interval and any(not math.isnan(cell.high) for cell in given):
        yield f"{head.head}, low", [_number(cell.low) if cell else "" for cell in cells]
        yield f"{head.head}, high", [_number(cell.high) if cell else "" for cell in cells]
    if any(cell.marked for cell in given):
        yield f"{head.head}, best", [_mark(cell) for cell in cells]


def _number(value: float) -> str:
    return "" if math.isnan(value) else f"{value:.12g}"


def _mark(cell: Cell | None) -> str:
    return SIGN if cell and cell.marked else ""
