"""Measured times: best of interleaved repeats, as records and as a table."""

import time
from collections.abc import Callable
from typing import NamedTuple


class Record(NamedTuple):
    """One row; a row that compares with nothing has no `against`."""

    name: str
    microseconds: float  # per unit named
    against: str | None = None
    ratio: float | None = None  # time of `against` over ours: above 1, ours is faster
    wanted: float | None = None  # the least ratio wanted
    spread: float = 1.0  # worst repeat over best, the larger of the two if two were measured


class Timing(NamedTuple):
    """Seconds of one thing measured."""

    best: float
    worst: float


def interleaved(*things: Callable[[], object], repeats: int) -> list[Timing]:
    """Time things in turn, A B A B ..., so that what disturbs the machine disturbs all alike.

    Each has run once before, untimed.
    """
    for thing in things:
        thing()
    seconds: list[list[float]] = [[] for _ in things]
    for _ in range(repeats):
        for thing, taken in zip(things, seconds, strict=True):
            start = time.perf_counter()
            thing()
            taken.append(time.perf_counter() - start)
    return [Timing(min(taken), max(taken)) for taken in seconds]


def table(records: list[Record]) -> str:
    """Plain aligned text, at most 100 columns wide."""
    head = ("", "us", "against", "times faster", "wanted", "spread")
    rows = [head, *(_cells(record) for record in records)]
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    left = (0, 2)  # columns of words
    lines = []
    for row in rows:
        parts = [
            cell.ljust(width) if i in left else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ]
        lines.append("  ".join(parts).rstrip())
    return "\n".join(lines)


def _cells(record: Record) -> tuple[str, ...]:
    return (
        record.name,
        f"{record.microseconds:.3f}",
        record.against or "",
        _factor(record.ratio),
        _factor(record.wanted),
        f"{record.spread:.2f}",
    )


def _factor(ratio: float | None) -> str:
    if ratio is None:
        return ""
    return f"{ratio:,.0f}" if ratio >= 10 else f"{ratio:.2f}"
