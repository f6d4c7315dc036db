"""The figures that a run leaves behind."""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Collection
from typing import TYPE_CHECKING

from harness.evidence.results import Results
from harness.report.figures.against import LOSS, clutter_key, metric_against
from harness.report.figures.calibration import coverage_of_regions, transform_histograms
from harness.report.figures.gap import GAPS, gap_over_time
from harness.report.figures.over_time import over_time
from harness.report.figures.panels import MOST_PANELS, named_keys, panel_keys, setting_in_words
from harness.report.figures.side_by_side import SHOWN, side_by_side
from harness.report.quantities import metric_quantity
from harness.report.swept import STRATEGY, Setting, resolve, settings_of, swept_keys

if TYPE_CHECKING:
    from matplotlib.figure import Figure

MOST_FIGURES = 4  # of one metric against one key
_LONGEST_STEM = 100


def all_figures(results: Results) -> dict[str, Figure]:
    """Figures by the stems of their file names.

    Track loss, position error and ANEES against the clutter (or else the key of most levels), track
    loss against each other swept key, and a few telling conditions over time. Without a sweep, the
    strategies side by side. Of whole posteriors, what the study asks for; the gap against the same
    key as well.
    """
    main = main_key(results)
    asked = posterior_figures(results)
    if main is None:
        return {"strategies": side_by_side(results), "over_time": over_time(results), **asked}
    figures: dict[str, Figure] = {}
    for metric in SHOWN:
        figures |= figures_against(results, metric, main)
    for key in panel_keys(results, main):
        figures |= figures_against(results, LOSS, key)
    if GAPS[0] in results.summary:
        figures |= figures_against(results, GAPS[0], main)
    return {**figures, "over_time": over_time(results), **asked}


def posterior_figures(results: Results) -> dict[str, Figure]:
    """What the study asks of whole posteriors: histograms, coverage, and the gap over time."""
    figures: dict[str, Figure] = {}
    if not results.calibration.empty:
        figures["transforms"] = transform_histograms(results)
        figures["coverage"] = coverage_of_regions(results)
    if GAPS[0] in results.scans:
        figures["posterior_gap"] = gap_over_time(results)
    return figures


def figures_against(results: Results, metric: str, key: str) -> dict[str, Figure]:
    """`metric_against` in as many figures as its panels need, by the stems of their file names.

    Four figures at most, evenly chosen from the values that they are split by.
    raises   ValueError: as `metric_against`
    """
    key = resolve(results, key)
    if key == STRATEGY:
        raise ValueError("figures are drawn against a swept key; name one of them, not 'strategy'")
    quantity = metric_quantity(results, metric)
    settings = _settings_of_figures(results, key)
    name = f"{quantity.name} over {named_keys(results)[key].name}"
    figures: dict[str, Figure] = {}
    for setting in _evenly_chosen(settings, MOST_FIGURES):
        at = f" at {setting_in_words(results, setting)}" if setting else ""
        stem = _unused_stem(name + at, figures)
        figures[stem] = metric_against(results, metric, key, setting)
    return figures


def main_key(results: Results) -> str | None:
    """The swept key that figures are drawn against: clutter, or else the one of most levels."""
    keys = swept_keys(results)
    several = [key for key in keys if len(keys[key].levels) > 1]
    if clutter_key(results) in several:
        return clutter_key(results)
    numbers = [key for key in several if keys[key].numeric]
    return max(numbers or several, key=lambda key: len(keys[key].levels), default=None)


def _settings_of_figures(results: Results, key: str) -> list[Setting]:
    """What is fixed in each figure, so that none has too many panels and there are few figures."""
    keys = swept_keys(results)
    left, split = panel_keys(results, key), list[str]()
    while left and len(settings_of(results, left)) > MOST_PANELS:
        enough = [
            one
            for one in left
            if len(settings_of(results, [other for other in left if other != one])) <= MOST_PANELS
        ]
        fewest = min(enough or left, key=lambda one: len(keys[one].levels))
        split.append(fewest)
        left.remove(fewest)
    return list(settings_of(results, split)) if split else [{}]


def _evenly_chosen(settings: list[Setting], most: int) -> list[Setting]:
    """At most so many, the first and the last among them."""
    if len(settings) <= most:
        return settings
    return [settings[math.floor(i * (len(settings) - 1) / (most - 1) + 0.5)] for i in range(most)]


def _unused_stem(text: str, used: Collection[str]) -> str:
    """Text as the stem of a file name on any system, with a number where it is taken."""
    stem = re.sub(r"[^a-z0-9.-]+", "_", text.lower())[:_LONGEST_STEM].strip("_.")
    candidates = (stem if number == 1 else f"{stem}_{number}" for number in itertools.count(1))
    return next(candidate for candidate in candidates if candidate not in used)
