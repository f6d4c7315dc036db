"""Names at the ends of curves, spread so that none covers another."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from harness.report import style
from harness.report.figures.lettering import broken, line_height, text_width
from harness.report.figures.page import Grid, Layout, Page
from harness.report.style import Look

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_WIDEST_NAME = 1.15
_LEADER = 0.1  # inches from the panel to the sample
_SAMPLE = 0.2
_SPACE = 0.04


@dataclass(frozen=True)
class CurveEnd:
    """Where a curve ends in its panel, both from 0 to 1, and how it looks."""

    name: str
    look: Look
    x: float
    y: float


def _room_beside(names: Sequence[str]) -> float:
    """Inches that samples and names take right of a panel."""
    widest = max((text_width(line, style.TICK_PT) for n in names for line in _lines(n)), default=0)
    return _LEADER + _SAMPLE + _SPACE + widest + 0.08


def layout_with_names(grid: Grid, panel_height: float, names: Sequence[str]) -> Layout:
    """A layout with room for the names of curves: beside the panels, or else below them all."""
    if sum(map(_height, names)) <= panel_height:
        return Layout(grid, panel_height, room_right=_room_beside(names))
    return Layout(grid, panel_height, room_below=_legend_height(names))


def name_curves(page: Page, panel: int, ends: Sequence[CurveEnd]) -> None:
    """Write the names of curves right of their panel, each led to from its curve's end.

    Nothing is written where the names stand below, or beside a panel that is not the last of a
    full row.
    """
    if not ends or page.layout.room_below or not page.is_right(panel):
        return
    axes = page.panels[panel]
    width, height = page.layout.panel_width, page.layout.panel_height
    # Curves that end at one height are named in the order of the study, from the top.
    ranked = sorted(enumerate(ends), key=lambda item: (item[1].y, -item[0]))
    ends = [end for _, end in ranked]
    places = spread([end.y for end in ends], [_height(end.name) / height for end in ends])
    for end, y in zip(ends, places, strict=True):
        sample = (1 + _LEADER / width, 1 + (_LEADER + _SAMPLE) / width)
        _line(axes, (end.x, sample[0]), (end.y, y), color=end.look.colour, lw=0.4, alpha=0.6)
        _sample(axes, sample, y, end.look)
        axes.text(
            sample[1] + _SPACE / width,
            y,
            "\n".join(_lines(end.name)),
            transform=axes.transAxes,
            fontsize=style.TICK_PT,
            linespacing=1.1,
            va="center_baseline" if len(_lines(end.name)) == 1 else "center",
        )


def spread(wanted: Sequence[float], heights: Sequence[float]) -> list[float]:
    """Centres of labels that do not overlap and stay within 0 to 1, moved as little as can be.

    wanted    centres, ascending; the sum of squared moves from them is least
    heights   of the labels, together at most 1
    """
    from scipy.optimize import isotonic_regression

    half = np.asarray(heights) / 2
    stacked = np.concatenate([[0.0], np.cumsum(half[:-1] + half[1:])])
    least = isotonic_regression(np.asarray(wanted) - stacked).x
    lowest, highest = half[0], 1 - half[-1] - stacked[-1]
    return [float(y) for y in np.clip(least, lowest, max(lowest, highest)) + stacked]


def name_curves_below(page: Page, looks: dict[str, Look]) -> None:
    """Samples and names in lines at the foot of the page, where panels have no room for them."""
    if not page.layout.room_below:
        return
    figure = page.figure
    width, height = figure.get_size_inches()
    for line, names in enumerate(reversed(_legend_lines(tuple(looks)))):
        x, y = 0.1, 0.08 + (line + 0.5) * line_height(style.TICK_PT) * 1.15
        for name in names:
            sample = (x / width, (x + _SAMPLE) / width)
            _figure_sample(figure, sample, y / height, looks[name])
            figure.text(
                (x + _SAMPLE + _SPACE) / width,
                y / height,
                name,
                fontsize=style.TICK_PT,
                va="center_baseline",
            )
            x += _legend_width(name)


def _legend_height(names: Sequence[str]) -> float:
    """Inches that `name_curves_below` takes."""
    return len(_legend_lines(names)) * line_height(style.TICK_PT) * 1.15 + 0.08


def _legend_lines(names: Sequence[str]) -> list[list[str]]:
    lines: list[list[str]] = [[]]
    for name in names:
        if lines[-1] and sum(map(_legend_width, [*lines[-1], name])) > style.WIDTH_IN - 0.2:
            lines.append([])
        lines[-1].append(name)
    return lines


def _legend_width(name: str) -> float:
    return _SAMPLE + _SPACE + text_width(name, style.TICK_PT) + 0.18


def _lines(name: str) -> list[str]:
    return broken(name, style.TICK_PT, _WIDEST_NAME)


def _height(name: str) -> float:
    return line_height(style.TICK_PT) * len(_lines(name))


def _line(axes: Axes, x: Sequence[float], y: Sequence[float], **look: object) -> None:
    from matplotlib.lines import Line2D

    axes.add_line(Line2D(x, y, transform=axes.transAxes, clip_on=False, **look))  # type: ignore[arg-type]


def _sample(axes: Axes, x: tuple[float, float], y: float, look: Look) -> None:
    _line(axes, x, (y, y), color=look.colour, ls=look.line)
    _line(axes, [sum(x) / 2], [y], color=look.colour, marker=look.marker, ls="")


def _figure_sample(figure: Figure, x: tuple[float, float], y: float, look: Look) -> None:
    from matplotlib.lines import Line2D

    figure.add_artist(Line2D(x, (y, y), color=look.colour, ls=look.line))
    figure.add_artist(Line2D([sum(x) / 2], [y], color=look.colour, marker=look.marker, ls=""))
