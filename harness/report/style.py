"""How everything drawn looks, in one place; to change the look, change this file.

Colours are those of Okabe and Ito, "Color Universal Design" (2008), which readers with any common
colour vision tell apart. No strategy is known by its colour alone: marker and line differ too.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

from harness.evidence.results import Results

BLACK = "#000000"  # known association and bounds
BLUE = "#0072B2"
VERMILION = "#D55E00"
GREEN = "#009E73"
PURPLE = "#CC79A7"
ORANGE = "#E69F00"
SKY_BLUE = "#56B4E9"
YELLOW = "#F0E442"

TEXT = "#1A1A1A"
QUIET_TEXT = "#555555"
FRAME = "#777777"
GRID = "#E6E6E6"
BOUNDS = "#DDDDDD"  # the light band of chi-square bounds

# The lightest colours come last, as thin lines in them are hard to see on white.
_COLOURS = (BLUE, VERMILION, GREEN, PURPLE, ORANGE, SKY_BLUE, YELLOW)
_MARKERS = ("o", "s", "^", "D", "v", "P", "X", "<", ">")
_LINES: tuple[Any, ...] = ("-", (0, (5, 1.5)), (0, (1.2, 1.2)), (0, (5, 1.5, 1.2, 1.5)))
_REFERENCE_LINES: tuple[Any, ...] = ("-", (0, (5, 1.5)), (0, (1.2, 1.2)))

FONT = "DejaVu Sans"  # comes with matplotlib, so that figures are the same everywhere
WIDTH_IN = 6.3  # 16 cm
TITLE_PT = 9.5
SUBTITLE_PT = 7.5
HEAD_PT = 7.5
LABEL_PT = 7.5
TICK_PT = 7.0
CURVE_PT = 1.1
BAR_PT = 0.7
MARKER_PT = 3.4

RC: dict[Any, Any] = {
    "font.family": FONT,
    "text.color": TEXT,
    "text.parse_math": False,  # names and titles are the user's: a $ is a $
    "axes.edgecolor": FRAME,
    "axes.linewidth": 0.6,
    "axes.labelsize": LABEL_PT,
    "axes.labelcolor": TEXT,
    "axes.labelpad": 3.0,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "axes.grid.axis": "y",
    "axes.axisbelow": True,
    "grid.color": GRID,
    "grid.linewidth": 0.5,
    "xtick.labelsize": TICK_PT,
    "ytick.labelsize": TICK_PT,
    "xtick.color": FRAME,
    "ytick.color": FRAME,
    "xtick.labelcolor": TEXT,
    "ytick.labelcolor": TEXT,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 2.5,
    "ytick.major.size": 2.5,
    "xtick.minor.width": 0.4,
    "ytick.minor.width": 0.4,
    "xtick.minor.size": 1.5,
    "ytick.minor.size": 1.5,
    "lines.linewidth": CURVE_PT,
    "lines.markersize": MARKER_PT,
    "savefig.dpi": 200,
    "pdf.fonttype": 42,  # fonts are embedded as they are, so that text stays text
    "svg.hashsalt": "trackassay",  # equal figures are equal files
}


@dataclass(frozen=True)
class Look:
    """How one strategy is drawn."""

    colour: str
    marker: str
    line: Any


def looks(results: Results) -> dict[str, Look]:
    """The look of each strategy, by its place in the study file; references are black."""
    references = set(results.references)
    candidates = [name for name in results.strategies if name not in references]
    found = {name: _candidate_look(place) for place, name in enumerate(candidates)}
    for place, name in enumerate(results.references):
        found[name] = Look(BLACK, "p", _REFERENCE_LINES[place % len(_REFERENCE_LINES)])
    return {name: found[name] for name in results.strategies}


@contextmanager
def house_style() -> Iterator[None]:
    """Draw and save in the house style, whatever settings the user's matplotlib has."""
    import matplotlib

    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        for name, value in RC.items():
            matplotlib.rcParams[name] = value
        yield


def _candidate_look(place: int) -> Look:
    return Look(
        _COLOURS[place % len(_COLOURS)],
        _MARKERS[place % len(_MARKERS)],
        _LINES[place % len(_LINES)],
    )
