"""Axes: logarithmic for densities and rates, ticks where the study has its values."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from harness.report.figures.lettering import broken, joined_parts, text_width
from harness.report.figures.panels import MOST_ACROSS
from harness.report.numerals import typeset_number, typeset_unit
from harness.report.quantities import Quantity, head
from harness.report.style import TICK_PT
from harness.report.swept import SweptKey

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.axis import Axis

_ACROSS = 4.6  # inches that panels have beside each other, roughly
_BETWEEN = 0.06  # between words below an axis
_MARGIN = 0.08  # of the axis, beside the first and the last value
_WIDE_RATIO = 10.0  # values that differ by more than this factor need a logarithmic axis


@dataclass(frozen=True)
class Scale:
    """One axis.

    low, high  its ends
    ticks      where the values are, with their labels; without any, at round numbers
    label      what it shows, with the unit
    """

    logarithmic: bool
    low: float
    high: float
    label: str
    ticks: tuple[float, ...] = ()
    tick_labels: tuple[str, ...] = ()

    @property
    def tick_lines(self) -> int:
        """Lines that the longest label takes."""
        return 1 + max((label.count("\n") for label in self.tick_labels), default=0)

    def shifted(self, values: np.ndarray, share: float) -> np.ndarray:
        """Values moved along the axis by a share of its length."""
        if self.logarithmic:
            return np.asarray(values * (self.high / self.low) ** share)
        return np.asarray(values + share * (self.high - self.low))

    def place(self, value: float) -> float:
        """Where a value is on the axis, from 0 to 1."""
        low, high = self.low, self.high
        if self.logarithmic:
            value, low, high = (math.log(x) for x in (max(value, low), low, high))
        return (value - low) / (high - low)


def most_across(key: SweptKey) -> int:
    """How many panels may stand beside each other, so that words below their axes stay whole."""
    if key.numeric:
        return MOST_ACROSS
    widest = max(text_width(part, TICK_PT) for text in key.labels for part in joined_parts(text))
    return min(max(int(_ACROSS / ((widest + _BETWEEN) * len(key.levels))), 1), MOST_ACROSS)


def swept_scale(key: SweptKey, axis_width: float) -> Scale:
    """The axis of a swept quantity; levels that are no numbers stand beside each other.

    Logarithmic for densities and wide ranges, unless zero is among the levels.

    axis_width   inches, which decide whether every level gets a tick
    """
    label = head(key.name, typeset_unit(key.unit))
    if not key.numeric:
        places = tuple(swept_places(key).values())
        room = max(axis_width / len(places) - _BETWEEN, 0.2)
        lines = tuple("\n".join(broken(text, TICK_PT, room)) for text in key.labels)
        return Scale(False, -0.5, len(places) - 0.5, label, places, lines)
    levels = sorted(key.levels)
    labels = tuple(typeset_number(key.label(level)) for level in levels)
    widths = [text_width(text, TICK_PT) for text in labels]
    logarithmic = levels[0] > 0 and ("density" in key.name or levels[-1] / levels[0] >= _WIDE_RATIO)
    margin = max(_MARGIN, max(widths[0], widths[-1]) / 2 / axis_width)
    low, high = _padded(levels[0], levels[-1], logarithmic, margin)
    bare = Scale(logarithmic, low, high, label)
    centres = [bare.place(level) * axis_width for level in levels]
    apart = all(
        right - left > (first + second) / 2 + 0.04
        for left, right, first, second in zip(
            centres, centres[1:], widths, widths[1:], strict=False
        )
    )
    return replace(bare, ticks=tuple(levels), tick_labels=labels) if apart else bare


def swept_places(key: SweptKey) -> dict[Any, float]:
    """Where the levels of a swept quantity are on its axis."""
    return {
        level: float(level) if key.numeric else float(place)
        for place, level in enumerate(key.levels)
    }


def metric_scale(quantity: Quantity, values: Iterable[float], ends: Iterable[float]) -> Scale:
    """The axis of a metric, logarithmic for rates and wide ranges.

    values, ends   of all points and intervals to be shown, in the quantity's unit
    """
    label = head(quantity.name, typeset_unit(quantity.unit))
    values = _finite(values)
    shown = sorted([*values, *_finite(ends)])
    positive = [x for x in shown if x > 0]
    if not positive:
        return Scale(False, 0.0, 1.0, label)
    if quantity.rate:
        return _rate_scale(label, [x for x in values if x > 0], positive)
    ratio = max(values) / min(values) if min(values) > 0 else 1.0
    logarithmic = shown[0] > 0 and (ratio > _WIDE_RATIO or quantity.expected is not None)
    low, high = _padded(shown[0], shown[-1], logarithmic)
    return Scale(logarithmic, low if logarithmic else max(low, 0.0), high, label)


def _rate_scale(label: str, rates: Sequence[float], shown: Sequence[float]) -> Scale:
    """Logarithmic, in per cent; it need not hold lower ends of intervals, which come near zero."""
    bottom = min(rates) / 2 if rates else min(shown) / 5
    top = min(max(shown) * 1.3, 105.0)
    return Scale(True, min(bottom, top / _WIDE_RATIO), top, label)


def apply_x(axes: Axes, scale: Scale, labelled: bool = True) -> None:
    """Give a panel its x axis; without labels where a panel below has the same."""
    axes.set_xscale("log" if scale.logarithmic else "linear")
    axes.set_xlim(scale.low, scale.high)
    _set_ticks(axes.xaxis, scale, labelled)


def apply_y(axes: Axes, scale: Scale, labelled: bool = True) -> None:
    """Give a panel its y axis; without labels where a panel to the left has the same."""
    axes.set_yscale("log" if scale.logarithmic else "linear")
    axes.set_ylim(scale.low, scale.high)
    _set_ticks(axes.yaxis, scale, labelled)


def _set_ticks(axis: Axis, scale: Scale, labelled: bool) -> None:
    from matplotlib import ticker

    if scale.ticks:
        axis.set_major_locator(ticker.FixedLocator(scale.ticks))
    elif scale.logarithmic:
        axis.set_major_locator(ticker.FixedLocator(_logarithmic_ticks(scale.low, scale.high)))
    else:
        axis.set_major_locator(ticker.MaxNLocator(5, steps=[1, 2, 2.5, 5, 10]))
    axis.set_minor_locator(ticker.NullLocator())
    axis.set_minor_formatter(ticker.NullFormatter())
    if not labelled:
        axis.set_major_formatter(ticker.NullFormatter())
        return
    axis.set_label_text(scale.label)
    if scale.ticks:
        axis.set_major_formatter(ticker.FixedFormatter(scale.tick_labels))
        return
    positional = not scale.logarithmic or (scale.low >= 1e-3 and scale.high < 1e5)
    axis.set_major_formatter(ticker.FuncFormatter(lambda value, _: _tick_label(value, positional)))
    if scale.logarithmic and scale.high / scale.low > _WIDE_RATIO:
        axis.set_minor_locator(ticker.LogLocator(subs=range(2, 10), numticks=50))


def _logarithmic_ticks(low: float, high: float) -> list[float]:
    """Powers of ten; 1, 2 and 5 times them where there are few; else round numbers."""
    from matplotlib.ticker import MaxNLocator

    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    for factors in ((1,), (1, 2, 5)):
        ticks = [factor * 10.0**n for n in decades for factor in factors]
        ticks = [tick for tick in ticks if low <= tick <= high]
        if len(ticks) > 2:
            return ticks
    return [
        x for x in MaxNLocator(4, steps=[1, 2, 5, 10]).tick_values(low, high) if low <= x <= high
    ]


def _tick_label(value: float, positional: bool) -> str:
    """A round number without trailing zeros."""
    if positional and (value == 0 or 1e-3 <= abs(value) < 1e5):
        return f"{value:.6g}"
    mantissa, _, exponent = f"{value:.3e}".partition("e")
    return typeset_number(f"{mantissa.rstrip('0').rstrip('.')}e{int(exponent)}")


def _padded(
    low: float, high: float, logarithmic: bool, margin: float = _MARGIN
) -> tuple[float, float]:
    """Ends with a margin beside the values, as a share of the whole axis at each end."""
    if low == high:
        return (low / 1.5, high * 1.5) if logarithmic else (low - 0.5, high + 0.5)
    share = margin / (1 - 2 * margin)
    if logarithmic:
        factor = (high / low) ** share
        return low / factor, high * factor
    beside = share * (high - low)
    return low - beside, high + beside


def _finite(values: Iterable[float]) -> list[float]:
    return [float(x) for x in values if math.isfinite(x)]
