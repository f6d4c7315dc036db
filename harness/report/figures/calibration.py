"""Whether whole posteriors mean what they say: histograms of transforms, coverage of regions."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from harness.evidence.results import Results
from harness.report import style
from harness.report.figures.conditions import fixed_conditions
from harness.report.figures.curve_names import layout_with_names, name_curves, name_curves_below
from harness.report.figures.curves import Curve, curve_end, draw_curve
from harness.report.figures.over_time import Told, how_conditions_are_told, told_conditions
from harness.report.figures.page import Grid, Layout, new_page, say_empty
from harness.report.figures.scales import Scale, apply_x, apply_y
from harness.report.findings import listed, rivals, trials_run
from harness.report.style import Look, house_style, looks
from harness.report.swept import STRATEGY, narrowed, strategy_key

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_MOST_ACROSS = 4
_TRANSFORM = "transform_share"
_COVERAGE = "coverage"
_LEVEL_OF_TITLE = 0.9


@house_style()
def transform_histograms(results: Results) -> Figure:
    """Histogram of the position's transforms by strategy, in the hardest condition."""
    hardest = told_conditions(results)[-1]
    rows = _rows(results, hardest)
    names = [name for name in strategy_key(results).levels if name in set(rows[STRATEGY])]
    columns = 3 if len(names) in (5, 6) else min(len(names), _MOST_ACROSS)
    page = new_page(
        _title(results, rows, _TRANSFORM, hardest),
        "; ".join(
            [
                "Probability that the posterior gives to positions below the true one, each "
                "coordinate by itself, as shares of scans",
                *filter(None, [", ".join(hardest.head.split("\n"))]),
                *fixed_conditions(results),
                trials_run(results),
                "bars: 95 % intervals of one share by itself; dotted: uniform, as expected of an "
                "honest strategy; high at both ends: over-confident; over trials that held track",
            ]
        ),
        Layout(Grid(columns, len(names), titles=names), 1.1 if len(names) > 1 else 2.0),
    )
    bins = rows["level"].nunique()
    tops = 100 * rows[[_TRANSFORM, f"{_TRANSFORM}_high"]].to_numpy(float)
    top = np.nanmax(tops) if np.isfinite(tops).any() else 200 / bins
    y_scale = Scale(False, 0.0, 1.05 * max(float(top), 200 / bins), "share of scans [%]")
    x_scale = Scale(False, 0.0, 1.0, "transform", (0.0, 0.5, 1.0), ("0", "0.5", "1"))
    for place, (axes, name) in enumerate(zip(page.panels, names, strict=True)):
        apply_x(axes, x_scale, labelled=page.is_bottom(place))
        apply_y(axes, y_scale, labelled=page.is_left(place))
        _draw_histogram(axes, rows[rows[STRATEGY] == name], looks(results)[name], 100 / bins)
    return page.figure


@house_style()
def coverage_of_regions(results: Results) -> Figure:
    """Coverage of highest-density regions less their level, in a few telling conditions."""
    told = told_conditions(results)
    names = strategy_key(results).levels
    heads = [one.head for one in told]
    layout = layout_with_names(Grid(len(told), len(told), column_heads=heads), 2.2, names)
    page = new_page(
        _title(results, _rows(results, told[-1]), _COVERAGE, told[-1]),
        "; ".join(
            [
                "How often the true position and velocity lie in the highest-density region of a "
                "level, less that level",
                *fixed_conditions(results),
                trials_run(results),
                *how_conditions_are_told(told),
                "bands: 95 % intervals; dotted: 0, as expected of an honest strategy; below: "
                "over-confident; over trials that held track",
            ]
        ),
        layout,
    )
    panels = [_deviations(_rows(results, one)) for one in told]
    ends = [end for panel in panels for c in panel.values() for end in (*c.low, *c.high)]
    finite = [abs(end) for end in ends if math.isfinite(end)]
    most = 1.05 * max([*finite, 5.0])
    low = -most
    high = min(most, 1.2 * max([*(end for end in ends if math.isfinite(end)), 5.0]))
    y_scale = Scale(False, low, high, "coverage less level [%]")
    x_scale = Scale(False, 0.0, 100.0, "level [%]", (25.0, 50.0, 75.0), ("25", "50", "75"))
    for place, (axes, panel) in enumerate(zip(page.panels, panels, strict=True)):
        apply_x(axes, x_scale, labelled=page.is_bottom(place))
        apply_y(axes, y_scale, labelled=page.is_left(place))
        axes.axhline(0.0, color=style.BLACK, lw=0.8, ls=":")
        found = []
        for name, curve in panel.items():
            look = looks(results)[name]
            draw_curve(axes, curve, look, y_scale, joined=True, bands=True)
            found.append(curve_end(name, look, curve, x_scale, y_scale))
        name_curves(page, place, [end for end in found if end])
        if not any(found):
            say_empty(axes)
    name_curves_below(page, {name: looks(results)[name] for name in names})
    return page.figure


def _rows(results: Results, told: Told) -> pd.DataFrame:
    setting: dict[str, Any] = {key: told.summary[key].iloc[0] for key in results.swept}
    return narrowed(results, setting).calibration


def _draw_histogram(axes: Axes, rows: pd.DataFrame, look: Look, uniform: float) -> None:
    share, low, high = (
        100 * rows[f"{_TRANSFORM}{end}"].to_numpy(float) for end in ("", "_low", "_high")
    )
    if not np.isfinite(share).any():
        say_empty(axes)
        return
    ends = rows["level"].to_numpy(float)
    width = 1 / len(ends)
    middle = ends - width / 2
    axes.bar(middle, share, 0.86 * width, color=look.colour, alpha=0.35, lw=0)
    axes.vlines(middle, low, high, color=look.colour, lw=style.BAR_PT)
    axes.axhline(uniform, color=style.BLACK, lw=0.8, ls=":")


def _deviations(rows: pd.DataFrame) -> dict[str, Curve]:
    """Coverage less level, in per cent, by strategy; at level 1 there is nothing to see."""
    rows = rows[rows["level"] < 1 - 1e-9]
    curves = {}
    for name, own in rows.groupby(STRATEGY, sort=False):
        level = 100 * own["level"].to_numpy(float)
        value, low, high = (
            100 * own[f"{_COVERAGE}{end}"].to_numpy(float) - level for end in ("", "_low", "_high")
        )
        curves[str(name)] = Curve(level, value, low, high)
    return curves


def _title(results: Results, rows: pd.DataFrame, column: str, told: Told) -> str:
    """Whose posterior is too narrow: by the coverage at 90 %, or by the ends of the histogram."""
    where = " in the hardest condition" if told.head else ""
    rows = rows[rows[STRATEGY].isin(rivals(results))].dropna(subset=column)
    if rows.empty:
        return "No trial held track: there is nothing to judge posteriors by"
    if column == _COVERAGE:
        at = rows[np.isclose(rows["level"], _LEVEL_OF_TITLE)]
        narrow = list(at[at["coverage_high"] < _LEVEL_OF_TITLE][STRATEGY])
        if not narrow:
            return f"90 % regions of every strategy hold the target often enough{where}"
        worst = at.sort_values(_COVERAGE).to_dict("records")[0]
        held = f"{100 * worst[_COVERAGE]:.0f} % of scans{where}"
        text = f"90 % regions of {worst[STRATEGY]} hold the target in {held}"
        others = [name for name in narrow if name != worst[STRATEGY]]
        return f"{text}; those of {listed(others)} too rarely as well" if others else text
    first, last = rows["level"].min(), rows["level"].max()
    ends = rows[rows["level"].isin((first, last))].groupby(STRATEGY, sort=False)
    spill = ends[_TRANSFORM].sum() / (2 * first)
    worst_name, factor = str(spill.idxmax()), float(spill.max())
    sure = ends[f"{_TRANSFORM}_low"].sum() > 2 * first
    if not sure.any():
        return f"The truth lies at the ends of no posterior more often than it should{where}"
    return (
        f"The truth lies at the ends of {worst_name}'s posterior {factor:.1f} times as often as it "
        f"should{where}"
    )
