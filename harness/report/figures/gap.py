"""How far posteriors are from the reference's, over time."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from harness.evidence.results import Results
from harness.report.figures.conditions import fixed_conditions
from harness.report.figures.curve_names import layout_with_names, name_curves_below
from harness.report.figures.over_time import (
    Told,
    draw_row,
    how_conditions_are_told,
    told_conditions,
)
from harness.report.figures.page import Grid, new_page
from harness.report.findings import case_in_words, compared, rivals, trials_run
from harness.report.numerals import typeset_sentence
from harness.report.quantities import METRICS
from harness.report.style import house_style, looks
from harness.report.swept import STRATEGY

if TYPE_CHECKING:
    from matplotlib.figure import Figure

GAPS = ("posterior_gap_ise", "posterior_gap_kl")
_AXES = ("squared error", "divergence")
_PANEL_HEIGHT = 1.4


@house_style()
def gap_over_time(results: Results) -> Figure:
    """Squared error and divergence of the candidates' posteriors in a few telling conditions."""
    told = told_conditions(results)
    names = _compared(results)
    heads = [one.head for one in told]
    grid = Grid(len(told), len(told) * len(GAPS), column_heads=heads)
    layout = layout_with_names(grid, _PANEL_HEIGHT, names)
    title = typeset_sentence(_title(results, told))
    page = new_page(title, _subtitle(results, told), layout)
    for row, (metric, name) in enumerate(zip(GAPS, _AXES, strict=True)):
        draw_row(page, row, told, metric, replace(METRICS[metric], name=name), results, names)
    name_curves_below(page, {name: looks(results)[name] for name in names})
    return page.figure


def _compared(results: Results) -> list[str]:
    """The candidates but for the reference."""
    return [name for name in rivals(results) if name in compared(results, GAPS[0])]


def _title(results: Results, told: list[Told]) -> str:
    """Whose gap is the largest and whose the smallest where it is largest."""
    metric, reference = GAPS[0], results.document["posterior_gap"]["reference"]
    names = _compared(results)
    shown = [one.summary[one.summary[STRATEGY].isin(names)].dropna(subset=metric) for one in told]
    shown = [cases for cases in shown if not cases.empty]
    if not shown:
        return f"There is no other posterior to compare with {reference}'s"
    hardest = max(shown, key=lambda cases: float(cases[metric].max()))
    cases = sorted(hardest.to_dict("records"), key=lambda case: case[metric])
    far, near = cases[-1], cases[0]
    text = f"The posterior of {far[STRATEGY]} is {case_in_words(METRICS[metric], far, metric)} from"
    text += f" that of {reference}"
    if len(cases) > 1:
        text += f", that of {near[STRATEGY]} {case_in_words(METRICS[metric], near, metric)}"
    return f"{text}, where it is farthest" if len(shown) > 1 else text


def _subtitle(results: Results, told: list[Told]) -> str:
    parts = [
        "Integrated squared error between the posteriors of position and velocity (0 % equal, "
        "100 % apart; trials that did not fail), and Kullback-Leibler divergence (trials that held "
        "track), over time",
        *fixed_conditions(results),
        trials_run(results),
        *how_conditions_are_told(told),
        "dotted: scoring begins",
    ]
    return "; ".join(parts)
