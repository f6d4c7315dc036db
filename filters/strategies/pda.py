"""Probabilistic data association as a strategy."""

from __future__ import annotations

from typing import ClassVar, Literal

from filters.reductions.match_moments import match_moments
from filters.reductions.reduction import Reduction
from filters.strategies.interacting import InteractingStrategy


class ProbabilisticDataAssociation(InteractingStrategy):
    """Matches the moments of all hypotheses by one Gaussian."""

    kind: Literal["pda"]
    """Which strategy: probabilistic data association."""

    mixes: ClassVar[bool] = True

    def reduction(self) -> Reduction:
        """Match the moments of all, or of all in each mode."""
        return match_moments(self.mode_count)
