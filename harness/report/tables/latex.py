r"""A table as LaTeX: a plain `tabular`, no packages needed, text in UTF-8."""

from __future__ import annotations

import itertools

from harness.report.tables.cells import CellText, cell_texts
from harness.report.tables.table import SOFT_HYPHEN, Table

_SPECIAL = {
    "\\": r"\textbackslash{}",
    "{": r"\{",
    "}": r"\}",
    "&": r"\&",
    "%": r"\%",
    "$": r"\$",
    "#": r"\#",
    "_": r"\_",
    "~": r"\textasciitilde{}",
    "^": r"\textasciicircum{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
    "–": "--",
    "[": "{[}",  # so that LaTeX takes none for an option of the line break before
    "*": "{*}",
    "…": r"\ldots{}",
    "∞": r"$\infty$",
    SOFT_HYPHEN: r"\-",
}


def as_latex(table: Table) -> str:
    """Question, tabular and meaning as paragraphs.

    A column is printed as two, number and interval, so that decimal points stand below each other;
    keys that head blocks are columns like the others.
    """
    body = [
        [escaped(key.label(level)) for key, level in zip(table.keys, row.levels, strict=True)]
        for row in table.rows
    ]
    for column in range(len(table.columns)):
        for cells, printed in zip(body, _printed_cells(cell_texts(table, column)), strict=True):
            cells.append(printed)
    specification = "l" * len(table.keys) + r"r@{ }l" * len(table.columns)
    lines = [
        rf"\begin{{tabular}}{{{specification}}}",
        *_heads(table),
        r"\hline",
        *(_line(cells) for cells in body),
        r"\end{tabular}",
    ]
    parts = [
        rf"\textbf{{{escaped(table.question)}}}",
        escaped(table.title),
        "\n".join(lines),
        "\\\\\n".join(escaped(note) for note in table.footnotes),
        escaped(table.meaning),
    ]
    return "\n\n".join(part for part in parts if part) + "\n"


def escaped(text: str) -> str:
    """Text that LaTeX prints as it is, in one line."""
    return "".join(_SPECIAL.get(character, character) for character in " ".join(text.splitlines()))


def _heads(table: Table) -> list[str]:
    groups = [
        (head, len(list(run))) for head, run in itertools.groupby(c.group for c in table.columns)
    ]
    lines = []
    if any(head for head, _ in groups):
        spans = [_across(2 * count, head) for head, count in groups]
        lines.append(_line([""] * len(table.keys) + spans))
    names = [_across(2, column.name) for column in table.columns]
    lines.append(_line([escaped(key.head) for key in table.keys] + names))
    return lines


def _across(columns: int, head: str) -> str:
    return rf"\multicolumn{{{columns}}}{{c}}{{{escaped(head)}}}"


def _line(cells: list[str]) -> str:
    return " & ".join(cells) + r" \\"


def _printed_cells(texts: list[CellText]) -> list[str]:
    """Number and interval; what a number lacks behind its point is filled with empty space."""
    fractions = ["".join(text.value.partition(".")[1:]) for text in texts]
    longest = max(fractions, key=len)
    any_mark = max((text.mark for text in texts), key=len)
    printed = []
    for text, fraction in zip(texts, fractions, strict=True):
        lacking = longest[len(fraction) :] + any_mark[len(text.mark) :]
        space = rf"\phantom{{{lacking}}}" if lacking and text.value else ""
        printed.append(f"{escaped(text.value)}{text.mark}{space} & {escaped(text.interval)}")
    return printed
