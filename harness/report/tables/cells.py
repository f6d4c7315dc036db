"""Cells as text: value, mark and interval, aligned at the decimal point."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

from harness.report.numerals import NO_VALUE, written
from harness.report.tables.table import SIGN, Cell, Column, Table


class CellText(NamedTuple):
    """The parts of a cell as written; each may be empty."""

    value: str
    mark: str
    interval: str


def cell_texts(table: Table, column: int) -> list[CellText]:
    """A column's cells as written, from the top."""
    return [_written_cell(cell, table.columns[column]) for cell in table.column_cells(column)]


def aligned_cells(table: Table, column: int) -> list[str]:
    """A column's cells as texts of one width, with decimal points and intervals aligned."""
    texts = cell_texts(table, column)
    values = align_points([text.value for text in texts])
    before = [
        value.rstrip() + text.mark if text.mark else value
        for value, text in zip(values, texts, strict=True)
    ]
    intervals = [text.interval for text in texts]
    if any(intervals):
        before = [f"{value} " for value in padded(before)]
    return [
        value + interval for value, interval in zip(padded(before), padded(intervals), strict=True)
    ]


def padded(texts: Sequence[str]) -> list[str]:
    """Texts filled up with spaces to one width."""
    width = max(map(len, texts))
    return [f"{text:<{width}}" for text in texts]


def align_points(numbers: Sequence[str]) -> list[str]:
    """Numbers as texts of one width with their decimal points in one place."""
    parts = [number.partition(".") for number in numbers]
    before = max(len(whole) for whole, _, _ in parts)
    after = max(len(point + fraction) for _, point, fraction in parts)
    return [f"{whole:>{before}}{point + fraction:<{after}}" for whole, point, fraction in parts]


def _written_cell(cell: Cell | None, column: Column) -> CellText:
    if cell is None:
        return CellText("", "", "")
    if column.whole:
        return CellText(NO_VALUE if cell.value != cell.value else f"{cell.value:.0f}", "", "")
    value, interval = written(cell.value, cell.low, cell.high)
    interval = interval if column.shows_interval else ""
    return CellText(value, SIGN if cell.marked else "", f"({interval})" if interval else "")
