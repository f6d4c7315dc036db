"""One curve: its line, its points, and the interval of each."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from harness.report import style
from harness.report.figures.curve_names import CurveEnd
from harness.report.figures.scales import Scale
from harness.report.style import Look

if TYPE_CHECKING:
    from matplotlib.axes import Axes


@dataclass(frozen=True)
class Curve:
    """Points with intervals, all (points,) in the units of the axes; NaN where there is none."""

    x: np.ndarray
    value: np.ndarray
    low: np.ndarray
    high: np.ndarray


def draw_curve(
    axes: Axes, curve: Curve, look: Look, y_scale: Scale, joined: bool, bands: bool
) -> None:
    """Draw a curve; on a logarithmic axis a value of zero is hollow, at the lower edge.

    joined    whether a line joins the points; not where they are no numbers
    bands     whether intervals are a band instead of bars
    """
    at_edge = y_scale.logarithmic & (curve.value <= 0)
    value = np.where(at_edge, y_scale.low, curve.value)
    low = np.fmax(curve.low, y_scale.low) if y_scale.logarithmic else curve.low
    in_band = bands & ~at_edge
    if np.any(in_band):
        axes.fill_between(
            curve.x, low, curve.high, where=in_band, color=look.colour, alpha=0.12, lw=0
        )
    with_bar = ~_beside_another(in_band) & np.isfinite(low) & np.isfinite(curve.high)
    axes.vlines(
        curve.x[with_bar],
        low[with_bar],
        curve.high[with_bar],
        color=look.colour,
        lw=style.BAR_PT,
        alpha=0.4 if bands else 1.0,
    )
    if joined:
        above = np.where(at_edge, np.nan, curve.value)
        axes.plot(curve.x, above, color=look.colour, ls=look.line, solid_capstyle="butt")
        x, y = _segments(curve.x, value, at_edge[:-1] | at_edge[1:])
        axes.plot(x, y, color=look.colour, lw=style.BAR_PT, alpha=0.5)
    for face, chosen in ((look.colour, ~at_edge), ("white", at_edge)):
        if np.any(chosen):
            axes.plot(
                curve.x[chosen],
                value[chosen],
                ls="",
                marker=look.marker,
                color=look.colour,
                mfc=face,
                mew=0.8,
                clip_on=False,
                zorder=3,
            )


def curve_end(
    name: str, look: Look, curve: Curve, x_scale: Scale, y_scale: Scale
) -> CurveEnd | None:
    """Where a curve ends in its panel; None if it has no point."""
    last = np.flatnonzero(np.isfinite(curve.value))[-1:]
    return next(
        (
            CurveEnd(name, look, x_scale.place(x), y_scale.place(y))
            for x, y in zip(curve.x[last], curve.value[last], strict=True)
        ),
        None,
    )


def _beside_another(in_band: np.ndarray) -> np.ndarray:
    """Points whose band reaches to a neighbour; a band of one point would not show."""
    beside = np.zeros_like(in_band)
    beside[:-1] |= in_band[1:]
    beside[1:] |= in_band[:-1]
    return in_band & beside


def _segments(x: np.ndarray, y: np.ndarray, chosen: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Chosen segments between neighbouring points as one line with gaps."""
    gap = np.full(len(x) - 1, np.nan)
    across, up = (np.stack([values[:-1], values[1:], gap], axis=1)[chosen] for values in (x, y))
    return across.ravel(), up.ravel()
