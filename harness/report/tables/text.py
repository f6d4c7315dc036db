"""A table as plain text for a terminal: aligned, a rule under the head, no boxes."""

from __future__ import annotations

import itertools
import re
import textwrap
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from harness.report.swept import STRATEGY, SweptKey
from harness.report.tables.cells import align_points, aligned_cells, padded
from harness.report.tables.table import SOFT_HYPHEN, Table

WIDEST = 100
WITHOUT_TERMINAL = 80

_LONGEST_LABEL = 60
_LONGEST_WORD = 12  # words of heads are broken where they are longer, and the cells are not
_RULE = "─"
# Heads can be broken behind spaces and soft hyphens, and behind signs that join words.
_PIECES = re.compile(rf".+?(?: |{SOFT_HYPHEN}|(?<=[A-Za-z])[_.+-](?=[A-Za-z])|$)")


@dataclass(frozen=True)
class _Printed:
    """Columns under one head, printed beside each other: lines all of one width."""

    head: tuple[str, ...]
    body: tuple[str, ...]

    @property
    def width(self) -> int:
        return len(self.body[0])


def as_text(table: Table, width: int = WITHOUT_TERMINAL) -> str:
    """The table in lines of at most `width` columns, and of 100 at most.

    A table too wide is split: into blocks of rows under a heading, one key after the other, if that
    helps; then into groups of columns one below the other.
    """
    width = min(width, WIDEST)
    block_keys, groups = _fitting_layout(table, width)
    parts = [_paragraphs((table.question, table.title), width)]
    parts += ["\n".join(_lines(table, block_keys, group, width)) for group in groups]
    parts += [_paragraphs(table.footnotes, width), _paragraphs((table.meaning,), width)]
    return "\n\n".join(part for part in parts if part) + "\n"


def _fitting_layout(table: Table, width: int) -> tuple[int, list[list[_Printed]]]:
    """Number of keys that head blocks, and the columns in groups: as few groups as may be."""
    layouts = []
    for block_keys in range(table.block_keys, max(len(table.keys), table.block_keys + 1)):
        keys = _key_columns(table, block_keys)
        left = width - sum(key.width + 2 for key in keys)
        layouts.append((block_keys, [[*keys, *group] for group in _in_groups(table, left)]))
    return min(layouts, key=lambda layout: (len(layout[1]), layout[0]))


def _in_groups(table: Table, width: int) -> list[list[_Printed]]:
    """Columns in groups that fit the width; those with one head stay together if they can."""
    columns = [_printed_column(table, column) for column in range(len(table.columns))]
    runs = [
        (head, [columns[place] for place, _ in run])
        for head, run in itertools.groupby(enumerate(table.columns), key=lambda item: item[1].group)
    ]
    if len(runs) > 1:
        for gap in (2, 1):
            units = [_under_head(head, run, gap) for head, run in runs]
            if _total(units) <= width:
                return [units]
        units = [_under_head(head, run, 2) for head, run in runs]
        if all(unit.width <= width for unit in units):
            return _filled(units, width)
    return [
        [_under_head(head, part, 2)] for head, run in runs for part in _evenly_filled(run, width)
    ]


def _filled(units: Sequence[_Printed], width: int) -> list[list[_Printed]]:
    """Units in groups, each as full as the width allows."""
    groups: list[list[_Printed]] = [[]]
    for unit in units:
        if groups[-1] and _total([*groups[-1], unit]) > width:
            groups.append([])
        groups[-1].append(unit)
    return groups


def _evenly_filled(units: Sequence[_Printed], width: int) -> list[list[_Printed]]:
    """As few groups, of one size if the width allows it."""
    groups = _filled(units, width)
    size = -(-len(units) // len(groups))
    even = [list(units[start : start + size]) for start in range(0, len(units), size)]
    return even if all(_total(group) <= width for group in even) else groups


def _total(columns: Sequence[_Printed]) -> int:
    return sum(column.width for column in columns) + 2 * (len(columns) - 1)


def _printed_column(table: Table, column: int) -> _Printed:
    body = aligned_cells(table, column)
    return _headed(_head_lines(table.columns[column].name, len(body[0])), body)


def _headed(head: Sequence[str], body: Sequence[str]) -> _Printed:
    lines = padded([*head, *body])
    return _Printed(tuple(lines[: len(head)]), tuple(lines[len(head) :]))


def _under_head(head: str, columns: Sequence[_Printed], gap: int) -> _Printed:
    """Columns beside each other, below what they have in common."""
    beside = (" " * gap).join
    below = [beside(line) for line in zip(*_bottom_aligned(columns), strict=True)]
    body = [beside(line) for line in zip(*(column.body for column in columns), strict=True)]
    return _headed([*(_head_lines(head, len(body[0])) if head else ()), *below], body)


def _bottom_aligned(columns: Sequence[_Printed]) -> list[list[str]]:
    """Heads filled up with empty lines above to the tallest."""
    tallest = max(len(column.head) for column in columns)
    return [
        [" " * column.width] * (tallest - len(column.head)) + list(column.head)
        for column in columns
    ]


def _key_columns(table: Table, block_keys: int) -> list[_Printed]:
    """Labels in front of the rows; a label is printed where it changes."""
    columns = []
    for place, key in list(enumerate(table.keys))[block_keys:]:
        body = _aligned_labels(key, [row.levels[place] for row in table.rows])
        for row in range(len(body) - 1, 0, -1):
            above, here = (table.rows[r].levels[: place + 1] for r in (row - 1, row))
            if above == here:
                body[row] = " " * len(body[row])
        unit = [f"[{key.unit}]"] if key.unit else []
        columns.append(_headed([*_head_lines(key.name, len(body[0])), *unit], body))
    return columns


def _aligned_labels(key: SweptKey, levels: Sequence[Any]) -> list[str]:
    labels = [key.label(level) for level in levels]
    if key.numeric and not any("e" in label for label in labels):
        return align_points(labels)
    return padded([_shortened(label) for label in labels])


def _shortened(label: str) -> str:
    return label if len(label) <= _LONGEST_LABEL else label[: _LONGEST_LABEL - 1] + "…"


def _head_lines(head: str, width: int) -> list[str]:
    """A head broken into lines no longer than the width, or than its longest word."""
    pieces = _PIECES.findall(head)
    longest = max(len(_visible(piece)) for piece in pieces)
    width = max(width, min(longest, _LONGEST_WORD))
    lines = [""]
    for piece in pieces:
        if lines[-1] and len(_visible(lines[-1] + piece)) > width:
            lines.append("")
        lines[-1] += piece
    return [part for line in lines for part in textwrap.wrap(_visible(line), width)]


def _visible(line: str) -> str:
    """A line of a head: a soft hyphen shows at its end only."""
    end = "-" if line.endswith(SOFT_HYPHEN) else ""
    return line.rstrip().replace(SOFT_HYPHEN, "") + end


def _lines(table: Table, block_keys: int, columns: Sequence[_Printed], width: int) -> Iterator[str]:
    """Head, rule and rows of one group of columns."""
    for line in zip(*_bottom_aligned(columns), strict=True):
        yield "  ".join(line).rstrip()
    yield _RULE * _total(columns)
    block: tuple[Any, ...] = ()
    for row, levels in enumerate(row.levels for row in table.rows):
        if block_keys and levels[:block_keys] != block:
            if block:
                yield ""
            block = levels[:block_keys]
            yield from textwrap.wrap(_block_heading(table.keys, block), width)
        elif row and not block_keys and _first_label_changes(table, row):
            yield ""
        yield "  ".join(column.body[row] for column in columns).rstrip()


def _first_label_changes(table: Table, row: int) -> bool:
    """Whether rows begin here that share the first of several labels."""
    above, here = (table.rows[r].levels[:1] for r in (row - 1, row))
    return len(table.keys) > 1 and above != here


def _block_heading(keys: Sequence[SweptKey], block: Sequence[Any]) -> str:
    return ", ".join(
        key.label(level) if key.key == STRATEGY else key.described(level)
        for key, level in zip(keys, block, strict=False)
    )


def _paragraphs(texts: Sequence[str], width: int) -> str:
    wrapped = (textwrap.fill(text, width, break_on_hyphens=False) for text in texts if text)
    return "\n".join(wrapped)
