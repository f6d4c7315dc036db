"""A table as Markdown (CommonMark with pipe tables)."""

from __future__ import annotations

import re

from harness.report.tables.cells import aligned_cells, padded
from harness.report.tables.table import SOFT_HYPHEN, Column, Table

_SPECIAL = re.compile(r"[\\`*_\[\]<>&|~$#^]")


def as_markdown(table: Table) -> str:
    """Question, table and meaning; keys that head blocks are columns like the others."""
    columns = [
        [escaped(key.head), "---", *(escaped(key.label(row.levels[place])) for row in table.rows)]
        for place, key in enumerate(table.keys)
    ]
    for place, column in enumerate(table.columns):
        cells = [escaped(cell) for cell in aligned_cells(table, place)]
        columns.append([escaped(_head(table, column)), "---:", *cells])
    lines = zip(*map(padded, columns), strict=True)
    parts = [
        f"**{escaped(table.question.strip())}**",
        escaped(table.title),
        "\n".join(f"| {' | '.join(line)} |" for line in lines),
        "  \n".join(escaped(note) for note in table.footnotes),
        escaped(table.meaning),
    ]
    return "\n\n".join(part for part in parts if part) + "\n"


def escaped(text: str) -> str:
    """Text that Markdown shows as it is, in one line."""
    return _SPECIAL.sub(r"\\\g<0>", " ".join(text.splitlines()))


def _head(table: Table, column: Column) -> str:
    """The title has named what all columns have in common."""
    in_common = len({other.group for other in table.columns}) == 1
    return column.name.replace(SOFT_HYPHEN, "") if in_common else column.head
