"""Figures: small multiples, curves named at their ends, intervals always drawn.

matplotlib is imported when a figure is drawn, not before.
"""

from harness.report.figures.against import metric_against, track_loss_over_clutter
from harness.report.figures.default_set import all_figures, figures_against
from harness.report.figures.over_time import over_time
from harness.report.figures.save import save_figure
from harness.report.figures.side_by_side import side_by_side

__all__ = [
    "all_figures",
    "figures_against",
    "metric_against",
    "over_time",
    "save_figure",
    "side_by_side",
    "track_loss_over_clutter",
]
