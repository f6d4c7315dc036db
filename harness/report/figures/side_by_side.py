"""The strategies of one condition side by side: track loss, error and ANEES with intervals."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from harness.evidence.results import Results
from harness.report import style
from harness.report.figures.conditions import fixed_conditions
from harness.report.figures.lettering import line_height, text_width
from harness.report.figures.page import Grid, Layout, new_page
from harness.report.figures.panels import named_keys, setting_in_figure
from harness.report.figures.scales import Scale, apply_x, metric_scale
from harness.report.findings import finding, trials_run
from harness.report.numerals import typeset_sentence
from harness.report.quantities import METRICS
from harness.report.style import Look, house_style, looks
from harness.report.swept import STRATEGY, Setting, narrowed, settings_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

SHOWN = ("track_loss_rate", "rmse_position", "anees")


@house_style()
def side_by_side(results: Results, setting: Setting | None = None) -> Figure:
    """Each strategy's track loss, position RMSE and ANEES in one condition, with intervals.

    raises   ValueError: the setting is no condition, or several
    """
    view = narrowed(results, setting or {})
    conditions = settings_of(view)
    if len(conditions) > 1:
        raise ValueError(
            f"{dict(setting or {})} leaves {len(conditions)} conditions; give a value of each of "
            f"{', '.join(results.swept)}"
        )
    cases = view.summary.to_dict("records")
    names = [str(case[STRATEGY]) for case in cases]
    height = 0.15 + max(1.6 * line_height(style.LABEL_PT) * len(cases), 0.5)
    room = min(0.25 + max(text_width(name, style.LABEL_PT) for name in names), 2.2)
    page = new_page(
        typeset_sentence(finding(view, SHOWN[0])),
        "; ".join(
            [
                *filter(None, [setting_in_figure(named_keys(results), conditions[0])]),
                *fixed_conditions(results),
                trials_run(view),
                "bars: 95 % intervals; hollow, at the left edge: none; error and ANEES over trials "
                "that held track",
            ]
        ),
        Layout(Grid(len(SHOWN), len(SHOWN)), height, room_left=room),
    )
    for place, (axes, metric) in enumerate(zip(page.panels, SHOWN, strict=True)):
        quantity = METRICS[metric]
        scaled = [
            tuple(
                quantity.scale * float(case[name])
                for name in (metric, f"{metric}_low", f"{metric}_high")
            )
            for case in cases
        ]
        scale = metric_scale(
            quantity, [value for value, *_ in scaled], [end for _, *ends in scaled for end in ends]
        )
        apply_x(axes, scale)
        axes.set_ylim(len(cases) - 0.5, -0.5)
        axes.set_yticks(range(len(cases)), names if page.is_left(place) else [""] * len(cases))
        axes.tick_params(axis="y", length=0)
        axes.grid(axis="y", visible=False)
        axes.grid(axis="x")
        if quantity.expected is not None:
            axes.axvline(quantity.expected, color=style.BLACK, lw=0.8, ls=":")
        for row, (name, (value, low, high)) in enumerate(zip(names, scaled, strict=True)):
            _draw_point(axes, row, value, low, high, looks(results)[name], scale)
    return page.figure


def _draw_point(
    axes: Axes, row: int, value: float, low: float, high: float, look: Look, scale: Scale
) -> None:
    """A value with its interval; zero is hollow at the edge of a logarithmic axis."""
    at_edge = scale.logarithmic and value <= 0
    if not math.isnan(high):
        axes.hlines(row, max(low, scale.low), high, color=look.colour, lw=1.5 * style.BAR_PT)
    face: Any = "white" if at_edge else look.colour
    axes.plot(
        [scale.low if at_edge else value],
        [row],
        marker=look.marker,
        color=look.colour,
        mfc=face,
        clip_on=False,
        zorder=3,
    )
