"""Which panels a figure has, and what stands above and beside them."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from harness.evidence.results import Results
from harness.report.figures.lettering import NO_BREAK_SPACE
from harness.report.figures.page import Grid
from harness.report.findings import listed
from harness.report.numerals import typeset_number, typeset_unit, with_unit
from harness.report.swept import (
    SweptKey,
    described,
    settings_of,
    short_name,
    strategy_of,
    swept_keys,
)

MOST_PANELS = 12
MOST_ACROSS = 4
# Inches, by the number of panels beside each other.
_PANEL_HEIGHT = {1: 2.7, 2: 1.9, 3: 1.4, 4: 1.15}


def named_keys(results: Results) -> dict[str, SweptKey]:
    """Swept keys as figures name them.

    One setting of several strategies that takes the same values in step has one name, which lists
    the strategies.
    """
    keys = swept_keys(results)
    names = {key: _shared_name(results, keys, key) for key in keys}
    return {key: replace(keys[key], name=name) for key, name in names.items()}


def panel_keys(results: Results, drawn: str) -> list[str]:
    """Swept keys that make panels when one is drawn along the x axis.

    Left out are keys of one level, and keys that move in step with the one drawn.
    """
    keys = swept_keys(results)
    return [
        key
        for key in keys
        if key != drawn and len(keys[key].levels) > 1 and not _in_step(results, keys, key, drawn)
    ]


def in_step_with(results: Results, drawn: str) -> list[str]:
    """Other swept keys, by another name, whose values change exactly where those of one key do."""
    keys = named_keys(results)
    return [
        key
        for key in keys
        if keys[key].name != keys[drawn].name and _in_step(results, keys, key, drawn)
    ]


def panel_grid(
    results: Results, keys: Sequence[str], most_across: int = MOST_ACROSS
) -> tuple[Grid, list[dict[str, Any]]]:
    """The panels of some swept keys: what stands where, and the setting of each.

    Two keys in full combination make rows and columns; anything else is laid out line by line.
    """
    swept = named_keys(results)
    settings = settings_of(results, keys) if keys else [{}]
    levels = [swept[key].levels for key in keys]
    if len(keys) == 2 and len(settings) == math.prod(map(len, levels)):
        slow, fast = keys
        if 1 < len(levels[1]) <= most_across:
            grid = Grid(
                columns=len(levels[1]),
                count=len(settings),
                column_heads=[in_figure(swept[fast], level) for level in levels[1]],
                row_heads=[in_figure(swept[slow], level) for level in levels[0]],
            )
            ordered = [{slow: row, fast: column} for row in levels[0] for column in levels[1]]
            return grid, ordered
    titles = [setting_in_figure(swept, setting) for setting in settings] if keys else []
    columns = min(_columns_for(len(settings)), most_across)
    return Grid(columns, len(settings), titles=titles), settings


def panel_height(grid: Grid) -> float:
    """Height of a panel in inches: lower where many stand beside or above each other."""
    return min(_PANEL_HEIGHT[grid.columns], _PANEL_HEIGHT[min(grid.rows, MOST_ACROSS)])


def in_figure(key: SweptKey, level: Any) -> str:
    """A level as a figure names it: 'clutter density 10⁻⁵ per m²'."""
    label = typeset_number(key.label(level)) if key.numeric else key.label(level)
    value = with_unit(label, typeset_unit(key.unit))
    return f"{key.name} {value.replace(' ', NO_BREAK_SPACE)}"


def setting_in_figure(keys: Mapping[str, SweptKey], setting: Mapping[str, Any]) -> str:
    """A setting as a figure names it."""
    return ", ".join(levels_in_figure(keys, setting))


def levels_in_figure(keys: Mapping[str, SweptKey], setting: Mapping[str, Any]) -> list[str]:
    """The levels of a setting as a figure names them; what has one name is told once."""
    return list(dict.fromkeys(in_figure(keys[key], level) for key, level in setting.items()))


def setting_in_words(results: Results, setting: Mapping[str, Any]) -> str:
    """A setting in plain text, for names of files and messages."""
    return described(swept_keys(results), setting)


def _columns_for(panels: int) -> int:
    if panels <= 3:
        return panels
    if panels == 4:
        return 2
    return 3 if panels <= 9 else MOST_ACROSS


def _shared_name(results: Results, keys: Mapping[str, SweptKey], key: str) -> str:
    """Name of a key, with all strategies whose same setting takes the same values in step."""
    sharing = [
        strategy_of(other)
        for other in keys
        if strategy_of(other)
        and _setting(other) == _setting(key)
        and keys[other].levels == keys[key].levels
        and _in_step(results, keys, other, key)
    ]
    return f"{short_name(key)[0]} of {listed(sharing)}" if len(sharing) > 1 else keys[key].name


def _setting(key: str) -> str:
    """Dotted name behind that of the strategy."""
    return key.removeprefix(f"strategies.{strategy_of(key)}.")


def _in_step(results: Results, keys: Mapping[str, SweptKey], first: str, second: str) -> bool:
    pairs = len(settings_of(results, [first, second]))
    return pairs == len(keys[first].levels) == len(keys[second].levels) > 1
