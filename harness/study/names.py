"""Names that were meant: the nearest known one, and the same quantity in another unit."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable

_UNIT = r"(?:km|hm|cm|mm|nmi|ft|ms|us|min|rad|mrad|deg|kmh|kn|db|m|s|h|g)\d?"
_UNITS = re.compile(rf"^(.+?)_((?:per_)?{_UNIT}(?:_(?:per_)?{_UNIT})*)$")


def nearest(name: str, known: Iterable[str]) -> str | None:
    """Return the known name most like this one, None if none is alike."""
    alike = difflib.get_close_matches(name, list(known), n=1, cutoff=0.6)
    return alike[0] if alike else None


def in_another_unit(key: str, known: Iterable[str]) -> str | None:
    """Return the known key of the same quantity whose unit differs, None if there is none."""
    stem, _ = _parts(key)
    same = [
        other for other in known if other != key and _parts(other)[0] == stem and unit_of(other)
    ]
    return difflib.get_close_matches(key, same, n=1, cutoff=0.0)[0] if same else None


def unit_of(key: str) -> str:
    """Return how a key takes its value, such as 'in m/s' or 'per m2'; empty if it has no unit."""
    _, unit = _parts(key)
    if unit.startswith("per_"):
        return unit.replace("_", " ")
    written = unit.replace("_per_", "/").replace("_", " ").replace("db", "dB")
    return f"in {written}" if unit else ""


def _parts(key: str) -> tuple[str, str]:
    match = _UNITS.match(key)
    return (match[1], match[2]) if match else (key, "")
