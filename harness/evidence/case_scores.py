"""All that is known of one case: its spans of trials joined in order."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harness.trials.posterior_scores import (
    POSTERIOR_SCAN_COLUMNS,
    POSTERIOR_TABLE_COLUMNS,
    POSTERIOR_TRIAL_COLUMNS,
    PosteriorScores,
)
from harness.trials.score import SCAN_COLUMNS, TRIAL_COLUMNS, SpanScores
from harness.trials.task import SpanResult


@dataclass(frozen=True)
class CaseScores:
    """Scores of a case; scan sums are added in a fixed tree, so that the bits never vary."""

    scores: SpanScores
    us_per_scan: float  # median over spans
    axes: int
    window: slice  # scans that count
    order: float  # of GOSPA

    @property
    def trials(self) -> int:
        """Trials run."""
        return len(self.scores.failed)

    @property
    def counted(self) -> np.ndarray:
        """Trials that did not fail, (trials,) bool."""
        return ~self.scores.failed

    @property
    def lost(self) -> np.ndarray:
        """Trials that lost track, (trials,) bool."""
        return self.scores.lost_at >= 0

    @property
    def held(self) -> np.ndarray:
        """Trials neither failed nor lost, (trials,) bool."""
        return self.counted & ~self.lost

    @property
    def gospa_power(self) -> np.ndarray:
        """Mean p-th power of GOSPA over the window, (trials,) m^p; NaN for failed trials."""
        scores = self.scores
        return scores.gospa_localisation + scores.gospa_missed + scores.gospa_false


def add_in_tree(parts: Sequence[np.ndarray]) -> np.ndarray:
    """Sum of arrays, pairwise in a tree that depends on their number alone."""
    level = list(parts)
    while len(level) > 1:
        pairs = [level[i] + level[i + 1] for i in range(0, len(level) - 1, 2)]
        level = pairs + level[len(level) - len(level) % 2 :]
    return level[0]


def join_spans(
    spans: Sequence[SpanResult], axes: int, window: slice, order: float
) -> CaseScores | None:
    """Join the spans of a case, given in order; None where there is none."""
    if not spans:
        return None
    parts = [span.scores for span in spans]
    joined = {name: np.concatenate([getattr(p, name) for p in parts]) for name in TRIAL_COLUMNS}
    summed = {name: add_in_tree([getattr(p, name) for p in parts]) for name in SCAN_COLUMNS}
    scores = SpanScores(**joined, **summed, posterior=_join_posteriors(parts))
    for name in (*TRIAL_COLUMNS, *SCAN_COLUMNS):
        getattr(scores, name).flags.writeable = False
    return CaseScores(
        scores, float(np.median([span.us_per_scan for span in spans])), axes, window, order
    )


def _join_posteriors(parts: Sequence[SpanScores]) -> PosteriorScores | None:
    scores = [part.posterior for part in parts if part.posterior is not None]
    if not scores:
        return None
    columns = (*POSTERIOR_TRIAL_COLUMNS, *POSTERIOR_TABLE_COLUMNS)
    return PosteriorScores(
        **{name: np.concatenate([getattr(one, name) for one in scores]) for name in columns},
        **{
            name: add_in_tree([getattr(one, name) for one in scores])
            for name in POSTERIOR_SCAN_COLUMNS
        },
    )
