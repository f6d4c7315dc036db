"""A metric against a swept quantity: one panel a combination of the other swept keys."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from harness.evidence.results import Results
from harness.report import style
from harness.report.figures.conditions import fixed_conditions
from harness.report.figures.curve_names import layout_with_names, name_curves, name_curves_below
from harness.report.figures.curves import Curve, curve_end, draw_curve
from harness.report.figures.page import new_page, say_empty
from harness.report.figures.panels import (
    MOST_PANELS,
    in_step_with,
    named_keys,
    panel_grid,
    panel_height,
    panel_keys,
    setting_in_figure,
)
from harness.report.figures.scales import (
    Scale,
    apply_x,
    apply_y,
    metric_scale,
    most_across,
    swept_places,
    swept_scale,
)
from harness.report.findings import compared, finding, finding_along, listed, trials_run
from harness.report.numerals import typeset_sentence
from harness.report.quantities import Quantity, metric_quantity
from harness.report.style import house_style, looks
from harness.report.swept import (
    STRATEGY,
    Setting,
    SweptKey,
    narrowed,
    plain,
    resolve,
    settings_of,
)

if TYPE_CHECKING:
    from matplotlib.figure import Figure

LOSS = "track_loss_rate"
_FEW = 5  # values; as many have bars in any case
_NARROWEST, _WIDEST = 0.018, 0.06  # inches between bars; closer ones give way to bands
_SPREAD = 0.3  # of the distance between neighbouring values, over which strategies are spread
_WIDEST_SPREAD = 0.15  # of the axis, which is within its margins


@house_style()
def metric_against(results: Results, metric: str, key: str, fixed: Setting | None = None) -> Figure:
    """A metric against a swept quantity, with 95 % intervals.

    key      a swept key, dotted or its last parts
    fixed    other swept keys held at one value
    raises   ValueError: no such metric, key or condition; or more than 12 panels
    """
    fixed = {resolve(results, name): level for name, level in (fixed or {}).items()}
    view = narrowed(results, fixed)
    quantity = metric_quantity(view, metric)
    x_key = named_keys(view).get(resolve(view, key))
    if x_key is None:
        raise ValueError("strategies are curves; draw a metric against a swept key")
    others = panel_keys(view, x_key.key)
    grid, settings = panel_grid(view, others, most_across(x_key))
    if grid.count > MOST_PANELS:
        raise ValueError(
            f"{metric} against {x_key.name} would take {grid.count} panels, more than "
            f"{MOST_PANELS}; fix the value of one of {', '.join(others)}"
        )
    names = compared(view, metric)
    layout = layout_with_names(grid, panel_height(grid), names)
    x_scale = swept_scale(x_key, layout.panel_width)
    layout = replace(layout, tick_lines=x_scale.tick_lines)
    bands = len(x_key.levels) > _FEW and _too_narrow(x_key, x_scale, layout.panel_width, len(names))
    page = new_page(
        _title(view, metric, x_key, grid.count),
        _subtitle(view, metric, x_key, others, fixed, bands),
        layout,
    )
    curves = _curves(view, metric, quantity, x_key, settings, names)
    if not bands:
        step = _step(x_key, x_scale, layout.panel_width, len(names))
        curves = [_spread_out(panel, x_scale, step) for panel in curves]
    y_scale = metric_scale(
        quantity,
        np.concatenate([curve.value for panel in curves for curve in panel.values()]),
        np.concatenate([[*c.low, *c.high] for panel in curves for c in panel.values()]),
    )
    look = looks(view)
    for place, panel in enumerate(curves):
        apply_x(page.panels[place], x_scale, labelled=page.is_bottom(place))
        apply_y(page.panels[place], y_scale, labelled=page.is_left(place))
        if quantity.expected_shown is not None:
            page.panels[place].axhline(quantity.expected_shown, color=style.BLACK, lw=0.8, ls=":")
        for name, curve in panel.items():
            draw_curve(page.panels[place], curve, look[name], y_scale, x_key.numeric, bands)
        ends = [curve_end(name, look[name], c, x_scale, y_scale) for name, c in panel.items()]
        name_curves(page, place, [end for end in ends if end])
        if not any(ends):
            say_empty(page.panels[place])
    name_curves_below(page, {name: look[name] for name in names})
    return page.figure


def track_loss_over_clutter(results: Results, fixed: Setting | None = None) -> Figure:
    """Track loss against the clutter density.

    raises   ValueError: no clutter is swept; and as `metric_against`
    """
    key = clutter_key(results)
    if key is None:
        swept = ", ".join(results.swept) or "nothing"
        raise ValueError(f"the study does not sweep clutter; it sweeps {swept}")
    return metric_against(results, LOSS, key, fixed)


def clutter_key(results: Results) -> str | None:
    """The first swept key that is about clutter, if there is one."""
    return next((key for key in results.swept if "clutter" in key), None)


def _curves(
    results: Results,
    metric: str,
    quantity: Quantity,
    x_key: SweptKey,
    settings: Sequence[Mapping[str, Any]],
    names: Sequence[str],
) -> list[dict[str, Curve]]:
    """For each panel, the curve of each strategy, its points ascending in x."""
    keys = list(settings[0])
    panels = {tuple(setting.values()): place for place, setting in enumerate(settings)}
    places = swept_places(x_key)
    points: list[dict[str, list[tuple[float, ...]]]] = [
        {name: [] for name in names} for _ in settings
    ]
    for case in results.summary[results.summary[STRATEGY].isin(names)].to_dict("records"):
        panel = panels[tuple(plain(case[key]) for key in keys)]
        values = (
            quantity.scale * float(case.get(column, math.nan))
            for column in (metric, f"{metric}_low", f"{metric}_high")
        )
        points[panel][case[STRATEGY]].append((places[plain(case[x_key.key])], *values))
    return [
        {name: Curve(*np.array(sorted(cases)).T) for name, cases in panel.items() if cases}
        for panel in points
    ]


def _spread_out(panel: Mapping[str, Curve], x_scale: Scale, step: float) -> dict[str, Curve]:
    """Curves moved a little along x, so that intervals stand beside each other."""
    middle = (len(panel) - 1) / 2
    return {
        name: replace(curve, x=x_scale.shifted(curve.x, (place - middle) * step))
        for place, (name, curve) in enumerate(panel.items())
    }


def _too_narrow(x_key: SweptKey, x_scale: Scale, width: float, curves: int) -> bool:
    """Whether bars would stand too close to be told apart."""
    return x_key.numeric and width * _step(x_key, x_scale, width, curves) < _NARROWEST


def _step(x_key: SweptKey, x_scale: Scale, width: float, curves: int) -> float:
    """From one curve's bars to the next one's, as a share of an axis so many inches wide."""
    spread = min(_SPREAD * _least_gap(x_key, x_scale), _WIDEST_SPREAD)
    return min(spread / max(curves, 2), _WIDEST / width)


def _least_gap(x_key: SweptKey, x_scale: Scale) -> float:
    """Least distance of two swept values, as a share of the axis."""
    places = sorted(x_scale.place(x) for x in swept_places(x_key).values())
    return float(min(np.diff(places), default=0.3))


def _title(results: Results, metric: str, x_key: SweptKey, panels: int) -> str:
    if metric == LOSS and panels == 1 and x_key.numeric and len(settings_of(results)) > 1:
        return typeset_sentence(finding_along(results, x_key))
    return typeset_sentence(finding(results, metric))


def _subtitle(
    view: Results,
    metric: str,
    x_key: SweptKey,
    others: Sequence[str],
    fixed: Setting,
    bands: bool,
) -> str:
    keys, quantity = named_keys(view), metric_quantity(view, metric)
    shown = view.summary[view.summary[STRATEGY].isin(compared(view, metric))]
    parts = [f"{quantity.name[0].upper()}{quantity.name[1:]} against {x_key.name}"]
    if others:
        parts[0] += f", by {listed([keys[key].name for key in others])}"
    if moved := [keys[key].name for key in in_step_with(view, x_key.key)]:
        parts[0] += f" ({listed(moved)} in step with it)"
    if fixed:
        parts.append(setting_in_figure(keys, fixed))
    parts += [*fixed_conditions(view), trials_run(view)]
    parts.append("bands: 95 % intervals" if bands else "bars: 95 % intervals, side by side")
    if quantity.rate and (shown[metric] == 0).any():
        parts.append("hollow, at the lower edge with pale lines to it: none")
    if quantity.held:
        parts.append("over trials that held track")
    if quantity.expected is not None:
        parts.append(f"dotted: {quantity.expected_shown:g}, as expected of an honest strategy")
    return "; ".join(parts)
