"""Errors, NEES and lost tracks over time, in a few telling conditions."""

from __future__ import annotations

from collections.abc import Hashable, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from harness.evidence.results import Results
from harness.report import style
from harness.report.figures.conditions import fixed_conditions
from harness.report.figures.curve_names import layout_with_names, name_curves, name_curves_below
from harness.report.figures.curves import Curve, curve_end
from harness.report.figures.page import Grid, Page, new_page, say_empty
from harness.report.figures.panels import levels_in_figure, named_keys
from harness.report.figures.scales import Scale, apply_x, apply_y, metric_scale
from harness.report.findings import case_in_words, rivals, trials_run
from harness.report.quantities import METRICS, Quantity
from harness.report.style import Look, house_style, looks
from harness.report.swept import (
    STRATEGY,
    Setting,
    narrowed,
    plain,
    settings_of,
    strategy_key,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST_CONDITIONS = 4
_PANEL_HEIGHT = 1.2
_MOST_POINTS = 400  # of a curve; more would not be seen
_MARKERS_A_CURVE = 4

_LOSS = "track_loss_rate"
_ERROR = METRICS["rmse_position"]
_NEES = Quantity("NEES", held=True, expected=1.0)
_LOST = Quantity("lost so far", "%", 100.0, rate=True)


@dataclass(frozen=True)
class Told:
    """A condition worth showing: what it is called, its cases, and their scans."""

    head: str
    summary: pd.DataFrame
    scans: pd.DataFrame


@house_style()
def over_time(results: Results, settings: Sequence[Setting] | None = None) -> Figure:
    """Position RMSE, NEES with its chi-square bounds, and lost tracks over time.

    settings   one column each; default: the easiest, the middle and the hardest condition
    raises     ValueError: a setting is no condition or several, or there are more than four
    """
    told = told_conditions(results, settings)
    names = strategy_key(results).levels
    rows = (("rmse_position", _ERROR), ("nees", _NEES), ("lost", _LOST))
    heads = [one.head for one in told]
    grid = Grid(len(told), len(told) * len(rows), column_heads=heads)
    layout = layout_with_names(grid, _PANEL_HEIGHT, names)
    page = new_page(_title(results, told), _subtitle(results, told), layout)
    for row, (column, quantity) in enumerate(rows):
        draw_row(page, row, told, column, quantity, results, names)
    name_curves_below(page, {name: looks(results)[name] for name in names})
    return page.figure


def telling_conditions(results: Results) -> dict[str, dict[str, Any]]:
    """The easiest, the middle and the hardest condition, by mean track loss, then mean error."""
    compared = rivals(results)
    hardness: dict[tuple[Any, ...], list[tuple[float, float]]] = {}
    for case in results.summary.to_dict("records"):
        if case[STRATEGY] in compared:
            condition = tuple(plain(case[key]) for key in results.swept)
            found = hardness.setdefault(condition, [])
            found.append((case["track_loss_rate"], case["rmse_position"]))
    ordered = sorted(hardness, key=lambda condition: _means(hardness[condition]))
    settings = [dict(zip(results.swept, condition, strict=True)) for condition in ordered]
    if len(settings) == 1:
        return {"": settings[0]}
    telling = {"easiest": settings[0]}
    if len(settings) > 2:
        telling["middle"] = settings[(len(settings) - 1) // 2]
    return {**telling, "hardest": settings[-1]}


def _means(values: Sequence[tuple[float, float]]) -> tuple[float, ...]:
    """Mean of each, what is no number counting as worse than any."""
    return tuple(
        float(np.mean(np.nan_to_num(column, nan=np.inf))) for column in zip(*values, strict=True)
    )


def told_conditions(results: Results, settings: Sequence[Setting] | None = None) -> list[Told]:
    """The conditions of these settings; default: those of `telling_conditions`.

    raises     ValueError: a setting is no condition or several, or there are more than four
    """
    keys = named_keys(results)
    if settings is None:
        chosen: list[tuple[str, Setting]] = list(telling_conditions(results).items())
    else:
        chosen = [("", setting) for setting in settings]
    if not 1 <= len(chosen) <= MOST_CONDITIONS:
        raise ValueError(f"give 1 to {MOST_CONDITIONS} conditions, got {len(chosen)}")
    told = []
    for word, setting in chosen:
        view = narrowed(results, setting)
        conditions = settings_of(view)
        if len(conditions) > 1:
            raise ValueError(
                f"{dict(setting)} leaves {len(conditions)} conditions; give a value of each of "
                f"{', '.join(results.swept)}"
            )
        lines = [word, *levels_in_figure(keys, conditions[0])]
        told.append(Told("\n".join(filter(None, lines)), view.summary, view.scans))
    return told


def draw_row(
    page: Page,
    row: int,
    told: Sequence[Told],
    column: str,
    quantity: Quantity,
    results: Results,
    names: Sequence[str],
) -> None:
    """One quantity over time: a panel a condition, a curve for each of the strategies named."""
    look = looks(results)
    scale = _y_scale(told, column, quantity, names)
    for place, one in enumerate(told, start=row * len(told)):
        axes = page.panels[place]
        x_scale = _time_scale(one.scans)
        apply_x(axes, x_scale, labelled=page.is_bottom(place))
        apply_y(axes, scale, labelled=page.is_left(place))
        axes.axvline(_first_scored_time(results, one.scans), color=style.FRAME, lw=0.6, ls=":")
        if column == "nees":
            _draw_bounds(axes, one.scans)
        ends = []
        for number, name in enumerate(names):
            scans = one.scans[one.scans[STRATEGY] == name]
            y = quantity.scale * scans[column].to_numpy(float)
            if scale.logarithmic:
                y = np.fmax(y, np.where(np.isnan(y), np.nan, scale.low))
            curve = Curve(scans["time_s"].to_numpy(float), y, y, y)
            _draw_line(axes, curve, look[name], number)
            ends.append(curve_end(name, look[name], curve, x_scale, scale))
        name_curves(page, place, [end for end in ends if end])
        if not any(ends):
            say_empty(axes)


def _y_scale(told: Sequence[Told], column: str, quantity: Quantity, names: Sequence[str]) -> Scale:
    shown = [one.scans[one.scans[STRATEGY].isin(names)] for one in told]
    values = np.concatenate([scans[column].to_numpy(float) for scans in shown])
    bounds = [one.scans[["nees_low", "nees_high"]].to_numpy(float).ravel() for one in told]
    scale = metric_scale(
        quantity,
        quantity.scale * values,
        np.concatenate(bounds) if column == "nees" else [],
    )
    if column != "nees":
        return scale
    dimension = int(told[0].scans["dimension"].iloc[0])
    return replace(scale, label=f"NEES ({dimension} expected)")


def _time_scale(scans: pd.DataFrame) -> Scale:
    first, last = float(scans["time_s"].min()), float(scans["time_s"].max())
    return Scale(False, first, last if last > first else first + 1.0, "time [s]")


def _draw_line(axes: Axes, curve: Curve, look: Look, number: int) -> None:
    """A curve with a few markers, at scans that differ from strategy to strategy."""
    step = -(-len(curve.x) // _MOST_POINTS)
    time, value = curve.x[::step], curve.value[::step]
    apart = max(len(time) // _MARKERS_A_CURVE, 1)
    axes.plot(
        time,
        value,
        color=look.colour,
        ls=look.line,
        marker=look.marker,
        markevery=(number * apart // 7 % apart, apart),
        lw=style.CURVE_PT * 0.8,
        clip_on=False,
    )


def _draw_bounds(axes: Axes, scans: pd.DataFrame) -> None:
    """Chi-square bounds for the strategy that holds most tracks; others have wider ones."""
    most = scans.sort_values("held", kind="stable").groupby("scan").tail(1).sort_values("scan")
    axes.fill_between(
        most["time_s"].to_numpy(float),
        most["nees_low"].to_numpy(float),
        most["nees_high"].to_numpy(float),
        color=style.BOUNDS,
        lw=0,
        zorder=0.5,
    )


def _first_scored_time(results: Results, scans: pd.DataFrame) -> float:
    """Time at which the scoring window begins; by default after the first tenth of the scans."""
    given = results.document.get("scoring", {}).get("from_scan")
    first = int(scans["scan"].max()) // 10 + 1 if given is None else int(given)
    return float(scans.loc[scans["scan"] >= first, "time_s"].min())


def _title(results: Results, told: Sequence[Told]) -> str:
    """What the worst and the best candidate lose where most is lost, or else how they err."""
    hardest = max((one.summary for one in told), key=_worst)
    compared = hardest[hardest[STRATEGY].isin(rivals(results))]
    cases = compared.dropna(subset=_LOSS).to_dict("records")
    cases.sort(key=lambda case: case[_LOSS])
    if not any(case["lost"] for case in cases):
        return f"No strategy loses a track{_errors(compared, len(told) > 1)}"
    best, worst = cases[0], cases[-1]
    where = "in the hardest condition shown" if len(told) > 1 else "in the end"
    if best[_LOSS] == worst[_LOSS] and len(cases) > 1:
        return f"Every strategy has lost {_loss(worst)} of its tracks {where}"
    text = f"{worst[STRATEGY]} has lost {_loss(worst)} of its tracks {where}"
    return f"{text}, against {_loss(best)} with {best[STRATEGY]}" if len(cases) > 1 else text


def _worst(cases: pd.DataFrame) -> tuple[float, float]:
    """The largest share of lost tracks, then the largest error, of a condition's strategies."""
    return cases[_LOSS].max(), cases["rmse_position"].max()


def _errors(compared: pd.DataFrame, among_several: bool) -> str:
    """The largest and the smallest error, to go on with where no track is lost."""
    cases = compared.dropna(subset="rmse_position").to_dict("records")
    if len(cases) < 2:
        return ""
    cases.sort(key=lambda case: case["rmse_position"])
    small, large = (case_in_words(_ERROR, case, "rmse_position") for case in (cases[0], cases[-1]))
    text = f"; {cases[-1][STRATEGY]} errs by {large}, {cases[0][STRATEGY]} by {small}"
    return f"{text}, in the hardest condition shown" if among_several else text


def how_conditions_are_told(told: Sequence[Told]) -> list[str]:
    """How the conditions were chosen, unless by the reader or because there is one only."""
    if not any(one.head.startswith("easiest") for one in told):
        return []
    return ["easiest to hardest: by the candidates' mean track loss, then their mean error"]


def _subtitle(results: Results, told: Sequence[Told]) -> str:
    none_lost = any((one.scans["lost"] == 0).any() for one in told)
    parts = [
        "Position RMSE and NEES of the trials that hold track, and lost tracks, over time",
        *fixed_conditions(results),
        trials_run(results),
        *how_conditions_are_told(told),
        "light band: 95 % chi-square bounds of the mean NEES where most tracks are held",
        *(["along the lower edge: none lost yet"] if none_lost else []),
        "dotted: scoring begins",
    ]
    return "; ".join(parts)


def _loss(case: dict[Hashable, Any]) -> str:
    return case_in_words(METRICS[_LOSS], case, _LOSS)
