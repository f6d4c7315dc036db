"""One record for every table, whatever it is written as afterwards."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from harness.report.swept import SweptKey

SIGN = "*"
SOFT_HYPHEN = "\u00ad"


@dataclass(frozen=True)
class Cell:
    """A number in the unit of its column, with its interval; NaN where there is none."""

    value: float
    low: float = math.nan
    high: float = math.nan
    marked: bool = False


@dataclass(frozen=True)
class Column:
    """The head of a column of cells, which names their unit in brackets.

    name   may hold soft hyphens where it can be broken
    group  what neighbouring columns have in common; stands above their names
    whole  whether the cells are counts
    shows_interval  otherwise a cell's interval only decides how many digits it has
    """

    name: str
    group: str = ""
    whole: bool = False
    shows_interval: bool = True

    @property
    def head(self) -> str:
        """Group and name in one line."""
        name = self.name.replace(SOFT_HYPHEN, "")
        return f"{self.group}, {name}" if self.group else name


@dataclass(frozen=True)
class Row:
    """A level of each key of the table, and a cell a column; None where there is no such case."""

    levels: tuple[Any, ...]
    cells: tuple[Cell | None, ...]


@dataclass(frozen=True)
class Table:
    """A table that begins with its question and ends with what it means.

    keys        what the rows differ in, slowest first
    block_keys  how many of the keys, from the first, head a block of rows instead of a row
    sign        what the mark says
    """

    question: str
    title: str
    keys: tuple[SweptKey, ...]
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    block_keys: int
    sign: str
    notes: tuple[str, ...]
    meaning: str

    @property
    def has_marks(self) -> bool:
        """Whether any cell is marked."""
        return any(cell.marked for row in self.rows for cell in row.cells if cell)

    @property
    def footnotes(self) -> tuple[str, ...]:
        """What the sign says, if it occurs, and the notes."""
        return (f"{SIGN} {self.sign}", *self.notes) if self.has_marks else self.notes

    def column_cells(self, column: int) -> list[Cell | None]:
        """The cells of a column, from the top."""
        return [row.cells[column] for row in self.rows]
