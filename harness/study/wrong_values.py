"""Single values that their key does not take: what it takes, and what to give instead."""

from __future__ import annotations

import sys
from typing import Any, get_args

from harness.study.keys import Leaf
from harness.study.names import nearest, unit_of


def wrong_value(key: str, leaf: Leaf, given: Any) -> tuple[str, str]:
    """Return rule and remedy for a value that is not what a leaf takes."""
    choices = [value for value in get_args(leaf.type) if isinstance(value, str)]
    if choices:
        alike = nearest(given, choices) if isinstance(given, str) else None
        remedy = f"did you mean {alike}?" if alike else "choose one of them"
        return f"must be {' or '.join(choices)}", remedy
    if leaf.type is str:
        is_empty = isinstance(given, str) and not given
        return ("must not be empty", "write some words") if is_empty else _TEXT
    noun = "a whole number" if leaf.type is int else "a number"
    if isinstance(given, bool):
        return f"must be {noun}, not true or false", _number_wanted(key, leaf)
    if isinstance(given, str):
        remedy = "write it without quotes" if _reads_as_number(given) else _number_wanted(key, leaf)
        return f"must be {noun}, not text", remedy
    if not isinstance(given, int | float):
        return f"must be {noun}", _number_wanted(key, leaf)
    if leaf.type is int and not isinstance(given, int):
        return "must be a whole number", "write it without a decimal point or exponent"
    if leaf.type is float and not abs(given) <= sys.float_info.max:
        return "must be finite", _number_wanted(key, leaf)
    return f"must {_broken_limit(leaf, given)}", _number_wanted(key, leaf, given)


_TEXT = ("must be text", "put it in quotes")


def _broken_limit(leaf: Leaf, given: float) -> str:
    low, is_low_in = _limit(leaf, "ge", "gt")
    high, is_high_in = _limit(leaf, "le", "lt")
    if leaf.type is int:  # the upper limit is mostly the machine's, no part of the meaning
        return f"be at least {low}" if given < low else f"be at most {high - (not is_high_in)}"
    if high is not None:
        return f"lie in {'[' if is_low_in else '('}{low:g}, {high:g}{']' if is_high_in else ')'}"
    return f"be at least {low:g}" if is_low_in else f"be above {low:g}"


def _number_wanted(key: str, leaf: Leaf, given: float = 0.0) -> str:
    if "probability" in key:
        percent = f", {given / 100:g} for {given:g} %" if 2 <= given <= 100 else ""
        return f"give a probability{percent}"
    noun = "a whole number" if leaf.type is int else "a number"
    low, is_low_in = _limit(leaf, "ge", "gt")
    high, _ = _limit(leaf, "le", "lt")
    if leaf.type is float and low == 0 and high is None:
        noun = "0 or a positive number" if is_low_in else "a positive number"
    unit = unit_of(key)
    return f"give {noun}, {unit}" if unit else f"give {noun}"


def _limit(leaf: Leaf, closed: str, open_: str) -> tuple[Any, bool]:
    """Return the tightest limit on a side, None without one, and whether it is itself allowed."""
    limits = [
        (getattr(limit, name), name == closed)
        for limit in leaf.limits
        for name in (closed, open_)
        if hasattr(limit, name)
    ]
    tightest = max if closed == "ge" else min
    return tightest(limits, key=lambda limit: limit[0], default=(None, False))


def _reads_as_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True
