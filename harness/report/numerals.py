"""Numbers as tables, titles and axes write them: no more digits than their interval supports."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence

SIGNIFICANT_FIGURES = 3
NO_VALUE = "–"

_SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def decimal_places(value: float, low: float = math.nan, high: float = math.nan) -> int:
    """Last decimal place worth writing; negative for tens, hundreds and so on.

    Three significant figures at most. The interval allows two figures of its half-width where they
    lie below 35.5, otherwise one.
    source  rounding rule of the Particle Data Group, Review of Particle Physics, introduction
    """
    sizes = [abs(x) for x in (value, low, high) if math.isfinite(x) and x != 0]
    if not sizes:
        return 0
    places = SIGNIFICANT_FIGURES - 1 - _exponent(max(sizes))
    half_width = (high - low) / 2
    if 0 < half_width < math.inf:
        exponent = math.floor(math.log10(half_width))
        allowed = (1 if half_width / 10.0**exponent < 3.55 else 0) - exponent
        places = min(places, allowed)
    if math.isfinite(value) and value != 0:
        places = max(places, -_exponent(value))  # a value is never rounded away
    return places


def written(value: float, low: float = math.nan, high: float = math.nan) -> tuple[str, str]:
    """Value, and its interval as 'low–high' (empty without one), all to the same decimal place."""
    if not math.isfinite(value):
        return ("∞" if value == math.inf else NO_VALUE), ""
    places = decimal_places(value, low, high)
    sizes = [abs(x) for x in (value, low, high) if math.isfinite(x) and x != 0]
    positional = not sizes or 1e-3 <= max(sizes) < 1e6
    value_text, low_text, high_text = (_written(x, places, positional) for x in (value, low, high))
    if math.isnan(low) or math.isnan(high):
        return value_text, ""
    return value_text, f"{low_text}–{high_text}"


def with_interval(value: float, low: float, high: float, unit: str = "") -> str:
    """Value with unit and, in brackets, its interval: '4.2 % (3.1–5.6)'."""
    value_text, interval = written(value, low, high)
    return with_unit(value_text, unit) + (f" ({interval})" if interval else "")


def short(value: float) -> str:
    """Three significant figures."""
    return written(value)[0]


def with_unit(text: str, unit: str) -> str:
    """A number's text and its unit, as a sentence writes them: '1e-5 per m2'."""
    return f"{text} {unit.replace('1/', 'per ', 1)}".rstrip()


def distinct_labels(values: Sequence[float]) -> tuple[str, ...]:
    """Three significant figures, or as many more as it takes to tell the values apart.

    Whole numbers below a million are written in full; where one value needs a power of ten, all
    are written with one.
    """
    positional = all(x == 0 or 1e-3 <= abs(x) < 1e6 for x in values)
    for figures in range(SIGNIFICANT_FIGURES, 18):
        labels = tuple(_label(float(value), figures, positional) for value in values)
        if len(set(labels)) == len(set(values)):
            break
    return labels


def typeset_number(text: str) -> str:
    """A number's text as a figure shows it: '5e-5' as '5×10⁻⁵'."""
    mantissa, e, exponent = text.partition("e")
    if not e:
        return text
    power = "10" + exponent.translate(_SUPERSCRIPTS)
    return power if mantissa == "1" else f"{mantissa}×{power}"


def typeset_unit(unit: str) -> str:
    """A unit as a figure shows it: '1/m2' as '1/m²'."""
    if unit == "us":
        return "µs"
    return re.sub(r"(?<=[a-z])\d", lambda digit: digit[0].translate(_SUPERSCRIPTS), unit)


def typeset_sentence(text: str) -> str:
    """A sentence as a figure shows it: '1e-5 per m2' as '10⁻⁵ per m²'."""
    text = re.sub(r"(?<![\w.])\d(?:\.\d+)?e-?\d+\b", lambda number: typeset_number(number[0]), text)
    return re.sub(r"\bper \w+", lambda unit: typeset_unit(unit[0]), text)


def _exponent(x: float) -> int:
    """Power of ten of the first figure, after rounding to three."""
    return int(f"{x:.{SIGNIFICANT_FIGURES - 1}e}".partition("e")[2])


def _written(x: float, places: int, positional: bool) -> str:
    if x == 0:
        return "0"
    if not math.isfinite(x):
        return NO_VALUE if math.isnan(x) else "∞"
    if positional:
        return f"{round(x, places):.{max(places, 0)}f}"
    figures = min(max(places + _exponent(x), 0), SIGNIFICANT_FIGURES - 1)
    return _tidy(f"{x:.{figures}e}")


def _label(x: float, figures: int, positional: bool) -> str:
    if x == 0 or (positional and x.is_integer()):
        return str(int(x))
    if positional:
        return repr(float(f"{x:.{figures}g}")).removesuffix(".0")
    mantissa, _, exponent = f"{x:.{figures - 1}e}".partition("e")
    return _tidy(f"{mantissa.rstrip('0').rstrip('.')}e{exponent}")


def _tidy(text: str) -> str:
    """Without the zeros and the plus that programs write in exponents."""
    mantissa, _, exponent = text.partition("e")
    return f"{mantissa}e{int(exponent)}"
