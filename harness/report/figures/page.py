"""A figure laid out by hand: title, subtitle, a grid of panels, and room for names at curves' ends.

Everything is placed in inches, so that equal results give equal files and nothing overlaps.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

from harness.report import style
from harness.report.figures.lettering import broken, line_height

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_EDGE = 0.06
_LEFT = 0.56  # tick labels and the label of the y axis
_RIGHT = 0.1
_BELOW_PANELS = 0.46  # tick labels and the label of the x axis
_ABOVE_PANELS = 0.14
_GAP = 0.12  # between panels
_NEAR = 0.04  # between a panel and the head above it
_HEAD_LINE = line_height(style.HEAD_PT)

Lines = list[str]


@dataclass(frozen=True)
class Grid:
    """What stands where in a grid of panels.

    columns       panels beside each other
    count         panels; the last row may not be full
    titles        above each panel, or none
    column_heads  above the first row, or none
    row_heads     right of each row, or none
    """

    columns: int
    count: int
    titles: Sequence[str] = ()
    column_heads: Sequence[str] = ()
    row_heads: Sequence[str] = ()

    @property
    def rows(self) -> int:
        """Rows of panels."""
        return -(-self.count // self.columns)


@dataclass(frozen=True)
class Layout:
    """The measures of a page in inches.

    room_right, room_below   for names of curves, beside or below the panels
    room_left                for labels of the y axis and of its ticks
    tick_lines               lines of text that labels of x ticks take
    """

    grid: Grid
    panel_height: float
    room_right: float = _RIGHT
    room_below: float = 0.0
    room_left: float = _LEFT
    tick_lines: int = 1

    @cached_property
    def row_heads(self) -> list[Lines]:
        """Heads of rows, written from top to bottom, in lines."""
        return [broken(head, style.HEAD_PT, self.panel_height) for head in self.grid.row_heads]

    @cached_property
    def panel_width(self) -> float:
        """What a line of panels leaves for each."""
        right = self.room_right + (_EDGE if self.row_heads else 0.0)
        right += _HEAD_LINE * _most_lines(self.row_heads)
        gaps = _GAP * (self.grid.columns - 1)
        return (style.WIDTH_IN - self.room_left - right - gaps) / self.grid.columns

    @cached_property
    def column_heads(self) -> list[Lines]:
        """Heads of columns in lines."""
        return [broken(head, style.HEAD_PT, self.panel_width) for head in self.grid.column_heads]

    @cached_property
    def titles(self) -> list[Lines]:
        """Titles of panels in lines."""
        return [broken(title, style.HEAD_PT, self.panel_width) for title in self.grid.titles]

    @cached_property
    def title_height(self) -> float:
        """What titles take above each row of panels."""
        return _HEAD_LINE * _most_lines(self.titles) + (_NEAR if self.titles else 0.0)

    @cached_property
    def pitch(self) -> float:
        """From one row of panels to the next."""
        return self.title_height + self.panel_height + _GAP


@dataclass(frozen=True)
class Page:
    """A figure with its panels in reading order."""

    figure: Figure
    layout: Layout
    panels: tuple[Axes, ...]

    def is_left(self, panel: int) -> bool:
        """Whether a panel is the first of its row."""
        return panel % self.layout.grid.columns == 0

    def is_right(self, panel: int) -> bool:
        """Whether a panel is the last of a full row."""
        return panel % self.layout.grid.columns == self.layout.grid.columns - 1

    def is_bottom(self, panel: int) -> bool:
        """Whether nothing stands below a panel."""
        return panel + self.layout.grid.columns >= self.layout.grid.count


def new_page(title: str, subtitle: str, layout: Layout) -> Page:
    """A page with its texts and empty panels; its height follows from what it holds."""
    from matplotlib.figure import Figure

    text_width = style.WIDTH_IN - 2 * _EDGE
    title_lines = broken(title, style.TITLE_PT, text_width, bold=True)
    subtitle_lines = broken(subtitle, style.SUBTITLE_PT, text_width)
    below_title = _EDGE + line_height(style.TITLE_PT) * len(title_lines) + 0.02
    below_text = below_title + line_height(style.SUBTITLE_PT) * len(subtitle_lines)
    top = below_text + _ABOVE_PANELS + _HEAD_LINE * _most_lines(layout.column_heads)
    bottom = top + layout.pitch * layout.grid.rows - _GAP
    more_lines = line_height(style.TICK_PT) * (layout.tick_lines - 1)
    height = bottom + _BELOW_PANELS + more_lines + layout.room_below

    figure = Figure(figsize=(style.WIDTH_IN, height))
    _write(figure, _EDGE, _EDGE, title_lines, style.TITLE_PT, weight="bold")
    _write(figure, _EDGE, below_title, subtitle_lines, style.SUBTITLE_PT, color=style.QUIET_TEXT)
    panels = tuple(_add_panel(figure, layout, top, place) for place in range(layout.grid.count))
    return Page(figure, layout, panels)


def say_empty(panel: Axes) -> None:
    """Say in a panel that there is nothing to draw."""
    panel.set_yticks([])
    panel.text(
        0.5,
        0.5,
        "no value",
        transform=panel.transAxes,
        fontsize=style.HEAD_PT,
        color=style.QUIET_TEXT,
        ha="center",
        va="center",
    )


def _add_panel(figure: Figure, layout: Layout, top: float, place: int) -> Axes:
    """A panel with the titles and heads that stand beside it."""
    row, column = divmod(place, layout.grid.columns)
    left = layout.room_left + column * (layout.panel_width + _GAP)
    above = top + row * layout.pitch + layout.title_height
    heads = layout.titles[place : place + 1] or (layout.column_heads[place : place + 1])
    for lines in heads:
        _write(figure, left, above - _NEAR - _HEAD_LINE * len(lines), lines, style.HEAD_PT)
    if layout.row_heads and column == layout.grid.columns - 1:
        _write_row_head(figure, layout.row_heads[row], above + layout.panel_height / 2)
    height = figure.get_figheight()
    return figure.add_axes(
        (
            left / style.WIDTH_IN,
            1 - (above + layout.panel_height) / height,
            layout.panel_width / style.WIDTH_IN,
            layout.panel_height / height,
        )
    )


def _write(
    figure: Figure, left: float, above: float, lines: Lines, size: float, **look: Any
) -> None:
    """Lines of text below each other, from a point in inches from the upper left corner."""
    for place, line in enumerate(lines):
        y = 1 - (above + place * line_height(size)) / figure.get_figheight()
        figure.text(left / style.WIDTH_IN, y, line, fontsize=size, va="top", **look)


def _write_row_head(figure: Figure, lines: Lines, middle: float) -> None:
    """Lines that run from top to bottom at the right edge, the first of them outermost."""
    for place, line in enumerate(lines):
        x = 1 - (_EDGE + (place + 0.5) * _HEAD_LINE) / style.WIDTH_IN
        y = 1 - middle / figure.get_figheight()
        figure.text(x, y, line, fontsize=style.HEAD_PT, rotation=270, ha="center", va="center")


def _most_lines(texts: Iterable[Lines]) -> int:
    return max(map(len, texts), default=0)
