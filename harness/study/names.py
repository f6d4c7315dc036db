"""Names that were meant: the nearest known one, and the same quantity in another unit."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable

_UNIT = r"(?:km|hm|cm|mm|nmi|ft|ms|us|min|rad|mrad|deg|kmh|kn|m|s|h)\d?"
_UNITS = re.compile(rf"^(.+?)_((?:per_)?{_UNIT}(?:_(?:per_)?{_UNIT})*)$")


def nearest(name: str, known: Iterable[str]) -> str | None:
    """Return the known name most like this one, None if none is alike."""
    alike = difflib.get_close_matches(name, list(known), n=1, cutoff=0.6)
    return alike[0] if alike else None


def unit_of(key: str) -> str:
    """Return the unit in which a key takes its value, in words; empty if it names none."""
    match = _UNITS.match(key)
    return match[2].replace("_", " ") if match else ""


def in_another_unit(key: str, known: Iterable[str]) -> str | None:
    """Return the known key of the same quantity whose unit differs, None if there is none."""
    stem = _stem(key)
    same = [other for other in known if other != key and unit_of(other) and _stem(other) == stem]
    return difflib.get_close_matches(key, same, n=1, cutoff=0.0)[0] if same else None


def _stem(key: str) -> str:
    match = _UNITS.match(key)
    return match[1] if match else key
