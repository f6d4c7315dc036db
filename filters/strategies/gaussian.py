"""Strategies of Gaussian components: one filter, with a choice of reduction."""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import Annotated, Any, ClassVar, Literal

import numpy as np
from pydantic import Field

from filters.compiled import compile_to_pointer
from filters.hypotheses import REDUCE
from filters.hypothesis_filter import (
    ESTIMATE_HEAVIEST,
    ESTIMATE_MEAN,
    HypothesisStrategy,
    compiled_filter,
    room_for,
)
from filters.models.record import Count, NonNegative
from filters.random_numbers import Numbers
from filters.reductions.keep_one import heaviest, nearest, true_origin
from filters.reductions.match_moments import match_moments
from filters.reductions.prune_merge_cap import prune_merge_cap, reduction_settings
from filters.strategies.strategy import Assumptions, GateProbability, Strategy, gate_of
from filters.track import Scans, Tracks, room_for_tracks
from filters.update import Gate

NO_SETTINGS = np.zeros(1)


@functools.cache
def compiled_reduction(reduction: Callable[[int], Callable[..., int]], n: int) -> Any:
    """Return a reduction compiled for states of n numbers."""
    return compile_to_pointer(REDUCE, reduction(n))


class GaussianStrategy(Strategy):
    """A filter of Gaussian components; a kind names its reduction."""

    reduction: ClassVar[Callable[[int], Callable[..., int]]]

    def gate(self, measurement_size: int) -> Gate:
        """Which detections a component considers."""
        raise NotImplementedError

    def capacity(self) -> int:
        """Most components that the reduction leaves."""
        return 1

    def reduction_settings(self) -> np.ndarray:
        """Settings as the reduction takes them."""
        return NO_SETTINGS

    def estimate_choice(self) -> int:
        """How a mixture becomes one estimate."""
        return ESTIMATE_MEAN

    def run(
        self, assumptions: Assumptions, scans: Scans, numbers: Numbers, first_trial: int
    ) -> Tracks:
        """Follow the target through a batch of trials."""
        n = len(assumptions.prior.mean)
        m = scans.detections.shape[1]
        strategy = HypothesisStrategy(
            compiled_reduction(type(self).reduction, n),
            self.reduction_settings(),
            self.capacity(),
            self.gate(m),
            self.ends.rule(assumptions.axes),
            self.estimate_choice(),
        )
        tracks = room_for_tracks(scans, n)
        room = room_for(n, m, strategy.capacity, scans.most_detections)
        compiled_filter(n, m)(assumptions.models, strategy, assumptions.prior, scans, tracks, room)
        return tracks


class GatedStrategy(GaussianStrategy):
    """A Gaussian strategy that considers the detections in a gate."""

    gate_probability: GateProbability = 0.9997
    """Probability that the target's own detection lies in the gate, in (0, 1]; 1 is no gate."""

    def gate(self, measurement_size: int) -> Gate:
        """Which detections a component considers."""
        return gate_of(self.gate_probability, measurement_size)


class NearestNeighbour(GatedStrategy):
    """Takes the detection of least squared distance in the gate as certain."""

    kind: Literal["nearest-neighbour"]
    """Which strategy: nearest neighbour."""
    reduction: ClassVar = nearest


class MostProbableHypothesis(GatedStrategy):
    """Takes the heaviest of the M + 1 hypotheses as certain; it may choose 'not detected'."""

    kind: Literal["most-probable-hypothesis"]
    """Which strategy: most probable hypothesis."""
    reduction: ClassVar = heaviest


class ProbabilisticDataAssociation(GatedStrategy):
    """Matches the moments of all hypotheses by one Gaussian."""

    kind: Literal["pda"]
    """Which strategy: probabilistic data association."""
    reduction: ClassVar = match_moments


class GaussianMixture(GatedStrategy):
    """Keeps several components: light ones pruned, close ones merged, the heaviest kept."""

    kind: Literal["gaussian-mixture"]
    """Which strategy: Gaussian mixture."""
    max_components: Annotated[Count, Field(le=10_000)] = 20
    """Most components kept after each scan."""
    prune_below: Annotated[NonNegative, Field(lt=1.0)] = 1e-4
    """Components of less weight than this share of the total are dropped."""
    merge_below: NonNegative = 0.5
    """Components closer than this squared distance to a heavier one are merged with it."""
    estimate: Literal["mean", "heaviest"] = "mean"
    """What is reported: mean and matched covariance, or the heaviest component."""
    reduction: ClassVar = prune_merge_cap

    def capacity(self) -> int:
        """Most components that the reduction leaves."""
        return self.max_components

    def reduction_settings(self) -> np.ndarray:
        """Settings as the reduction takes them."""
        return reduction_settings(self.prune_below, self.merge_below, self.max_components)

    def estimate_choice(self) -> int:
        """How the mixture becomes one estimate."""
        return ESTIMATE_HEAVIEST if self.estimate == "heaviest" else ESTIMATE_MEAN


class KnownAssociation(GaussianStrategy):
    """Is told which detection is the target's: a reference, possible only in simulation."""

    kind: Literal["known-association"]
    """Which strategy: known association, a reference."""
    reduction: ClassVar = true_origin
    is_told_origins: ClassVar[bool] = True

    def gate(self, measurement_size: int) -> Gate:
        """No gate: the association is known."""
        return gate_of(1.0, measurement_size)
