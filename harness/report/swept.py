"""Swept keys as people read them: short names, units, and labels of their values."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pandas as pd

from harness.evidence.results import Results
from harness.report.numerals import distinct_labels, with_unit
from harness.report.quantities import head, nearest_names

STRATEGY = "strategy"
Setting = Mapping[str, Any]  # swept keys and their values

_UNIT = re.compile(
    r"_(?P<above>(?:m\d?|s\d?|deg|rad)(?:_(?:m\d?|s\d?|deg|rad))*)?"
    r"(?P<below>_?per(?:_(?:m\d?|s\d?|deg|rad|scan))+)?$"
)


@dataclass(frozen=True)
class SweptKey:
    """A swept key, or `strategy`, with its levels in the order of the study.

    key      dotted name in the study, and column in the results
    name     short name, unambiguous among the keys of the study
    unit     may be empty
    levels   values, each once
    labels   how they are written, each different
    numeric  whether the levels are numbers
    """

    key: str
    name: str
    unit: str
    levels: tuple[Any, ...]
    labels: tuple[str, ...]
    numeric: bool

    @property
    def head(self) -> str:
        """Name with the unit in brackets."""
        return head(self.name, self.unit)

    def label(self, level: Any) -> str:
        """How a level is written."""
        return self.labels[self.levels.index(level)]

    def described(self, level: Any) -> str:
        """A level as a sentence names it: 'clutter density 1e-5 per m2'."""
        return f"{self.name} {with_unit(self.label(level), self.unit)}"


def short_name(key: str) -> tuple[str, str]:
    """Last part of a dotted name in words, and the unit that it ends with.

    'scene.sensor.clutter_density_per_m2' gives ('clutter density', '1/m2'). A factor on an assumed
    value is named by the value; what a strategy assumes is called assumed. Clutter that comes back
    is told from other clutter.
    """
    parts = key.split(".")
    if parts[-1] == "factor" and len(parts) > 1:
        name, unit = f"{_name_and_unit(parts[-2])[0]} factor", ""
    else:
        name, unit = _name_and_unit(parts[-1])
    if "persistent_clutter" in parts[:-1]:
        name = f"persistent clutter {name}"
    return (f"assumed {name}" if "assumes" in parts else name), unit


def strategy_of(key: str) -> str:
    """The strategy that a dotted name is a setting or an assumption of; empty for all others."""
    first, _, rest = key.partition(".")
    return rest.split(".")[0] if first == "strategies" else ""


def swept_keys(results: Results) -> dict[str, SweptKey]:
    """Swept keys by their dotted names, in the order of the study."""
    names = _unambiguous(results.swept)
    return {key: _swept_key(key, *names[key], results.summary[key]) for key in results.swept}


def strategy_key(results: Results) -> SweptKey:
    """The strategies, as if they were swept; a partial study may not have all of them.

    raises  ValueError: there is no case at all
    """
    if results.summary.empty:
        raise ValueError("the results hold no case yet; run the study first")
    present = set(results.summary[STRATEGY])
    names = tuple(name for name in results.strategies if name in present)
    return SweptKey(STRATEGY, "strategy", "", names, names, numeric=False)


def resolve(results: Results, key: str) -> str:
    """Dotted name of a swept key given in full or by its last parts; or `strategy`.

    raises  ValueError: no key is meant, or several are
    """
    if key == STRATEGY or key in results.swept:
        return key
    meant = [name for name in results.swept if name.endswith(f".{key}")]
    if len(meant) > 1:
        raise ValueError(f"{key!r} may mean {' or '.join(meant)}; give the whole name")
    if not meant:
        names = [*results.swept, STRATEGY]
        raise ValueError(
            f"the study does not sweep {key!r}; {nearest_names(key, names, 'names to choose from')}"
        )
    return meant[0]


def settings_of(results: Results, keys: Iterable[str] | None = None) -> list[dict[str, Any]]:
    """Every combination of these swept keys' values that occurs (default: all), in order."""
    chosen = results.swept if keys is None else list(keys)
    rows = zip(*(map(plain, results.summary[key]) for key in chosen), strict=True)
    return [dict(zip(chosen, row, strict=True)) for row in dict.fromkeys(rows)] or [{}]


def narrowed(results: Results, setting: Setting) -> Results:
    """The results at one setting of some swept keys.

    raises  ValueError: a key is not swept, or the sweep has no such value
    """
    summary, scans, calibration = results.summary, results.scans, results.calibration
    keys = swept_keys(results)
    for name, level in setting.items():
        swept = keys.get(resolve(results, name))
        if swept is None or level not in swept.levels:
            known = "" if swept is None else f"; the sweep holds {', '.join(swept.labels)}"
            raise ValueError(f"the results have no condition with {name} = {level!r}{known}")
        summary = summary[_at(summary[swept.key], swept, level)]
        scans = scans[_at(scans[swept.key], swept, level)]
        if not calibration.empty:
            calibration = calibration[_at(calibration[swept.key], swept, level)]
    if summary.empty:
        raise ValueError(f"the results have no condition with all of {dict(setting)}")
    return replace(results, summary=summary, scans=scans, calibration=calibration)


def described(keys: Mapping[str, SweptKey], setting: Setting) -> str:
    """A setting as a sentence names it."""
    return ", ".join(keys[key].described(level) for key, level in setting.items())


def plain(value: Any) -> Any:
    """A swept value that can be a key of a dictionary: lists and tables become text."""
    value = value.item() if hasattr(value, "item") else value
    return value if isinstance(value, (bool, int, float, str)) else str(value)


def _at(column: pd.Series, swept: SweptKey, level: Any) -> np.ndarray:
    """Rows at a level; numbers may differ in the last digit, as text files round them."""
    if swept.numeric:
        return np.isclose(column.to_numpy(float), level, rtol=1e-12, atol=0.0)
    return (column.map(plain) == level).to_numpy(bool)


def _swept_key(key: str, name: str, unit: str, column: pd.Series) -> SweptKey:
    levels = tuple(dict.fromkeys(map(plain, column)))
    numeric = all(isinstance(x, (int, float)) and not isinstance(x, bool) for x in levels)
    labels = distinct_labels(levels) if numeric else tuple(map(str, levels))
    return SweptKey(key, name, unit, levels, labels, numeric)


def _name_and_unit(part: str) -> tuple[str, str]:
    found = _UNIT.search(part)
    if not found or found.start() == 0:
        return part.replace("_", " "), ""
    above = (found["above"] or "").replace("_", " ")
    below = (found["below"] or "").strip("_").removeprefix("per_").replace("_", " ")
    if " " in below:
        below = f"({below})"
    unit = f"{above or 1}/{below}" if below else above
    return part[: found.start()].replace("_", " "), unit


def _unambiguous(keys: Sequence[str]) -> dict[str, tuple[str, str]]:
    """Short names; where two are alike, led by the parts in which their dotted names differ."""
    told = {key: _name_with_strategy(key) for key in keys}
    names = dict(told)
    for key in keys:
        alike = [other.split(".") for other in keys if told[other] == told[key]]
        if len(alike) > 1:
            name, unit = told[key]
            names[key] = (f"{' '.join(_what_differs(key.split('.'), alike))} {name}".strip(), unit)
    return names


def _name_with_strategy(key: str) -> tuple[str, str]:
    """Short name and unit; a strategy's settings and assumptions name it."""
    name, unit = short_name(key)
    strategy = strategy_of(key)
    return (f"{name} of {strategy}" if strategy else name), unit


def _what_differs(parts: list[str], alike: list[list[str]]) -> list[str]:
    first = _common(alike)
    last = _common([other[first:][::-1] for other in alike])
    return parts[first : len(parts) - last]


def _common(lists: list[list[str]]) -> int:
    """How many leading entries all lists share."""
    count = 0
    for entries in zip(*lists, strict=False):
        if len(set(entries)) > 1:
            break
        count += 1
    return count
