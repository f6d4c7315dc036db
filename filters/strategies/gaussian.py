"""Strategies of Gaussian components: one filter, with a choice of reduction."""

from __future__ import annotations

from typing import ClassVar, Literal

from filters.hypothesis_filter import (
    ESTIMATE_MEAN,
    HypothesisStrategy,
    compiled_filter,
    room_for,
)
from filters.posteriors import NOT_ASKED, room_for_posteriors
from filters.random_numbers import Numbers
from filters.reductions.keep_one import HEAVIEST, NEAREST, TRUE_ORIGIN
from filters.reductions.match_moments import MATCH_MOMENTS
from filters.reductions.reduction import Reduction
from filters.strategies.strategy import Assumptions, GateProbability, Strategy, gate_of
from filters.track import Scans, Tracks, room_for_tracks
from filters.update import Gate


class GaussianStrategy(Strategy):
    """A filter of Gaussian components; a kind names its reduction."""

    has_posteriors: ClassVar[bool] = True

    def reduction(self) -> Reduction:
        """How the hypotheses of a scan become few components again."""
        raise NotImplementedError

    def gate(self, measurement_size: int) -> Gate:
        """Which detections a component considers."""
        raise NotImplementedError

    def estimate_choice(self) -> int:
        """How a mixture becomes one estimate."""
        return ESTIMATE_MEAN

    def reduction_for(self, scans: Scans, n: int, first_trial: int) -> Reduction:
        """The reduction for a batch of trials, where its room depends on them."""
        return self.reduction()

    def most_recorded(self, scans: Scans, reduction: Reduction) -> int:
        """Most components that the posteriors of all trials and scans can have together."""
        return reduction.capacity * scans.origins.size

    def run(
        self,
        assumptions: Assumptions,
        scans: Scans,
        numbers: Numbers,
        first_trial: int,
        record: bool = False,
    ) -> Tracks:
        """Follow the target through a batch of trials."""
        n = len(assumptions.prior.mean)
        m = scans.detections.shape[1]
        reduction = self.reduction_for(scans, n, first_trial)
        strategy = HypothesisStrategy(
            reduction.compiled(n),
            reduction.settings,
            self.gate(m),
            self.ends.rule(assumptions.axes),
            self.estimate_choice(),
        )
        posteriors = NOT_ASKED
        if record:
            trials, length = scans.origins.shape
            most = self.most_recorded(scans, reduction)
            posteriors = room_for_posteriors(trials, length, n, most)
        tracks = room_for_tracks(scans, n, posteriors)
        room = room_for(n, m, reduction, scans.most_detections)
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

    def reduction(self) -> Reduction:
        """Keep the nearest."""
        return NEAREST


class MostProbableHypothesis(GatedStrategy):
    """Takes the heaviest of the M + 1 hypotheses as certain; it may choose 'not detected'."""

    kind: Literal["most-probable-hypothesis"]
    """Which strategy: most probable hypothesis."""

    def reduction(self) -> Reduction:
        """Keep the heaviest."""
        return HEAVIEST


class ProbabilisticDataAssociation(GatedStrategy):
    """Matches the moments of all hypotheses by one Gaussian."""

    kind: Literal["pda"]
    """Which strategy: probabilistic data association."""

    def reduction(self) -> Reduction:
        """Match the moments of all."""
        return MATCH_MOMENTS


class KnownAssociation(GaussianStrategy):
    """Is told which detection is the target's: a reference, possible only in simulation."""

    kind: Literal["known-association"]
    """Which strategy: known association, a reference."""
    is_told_origins: ClassVar[bool] = True

    def reduction(self) -> Reduction:
        """Keep the one of the true origin."""
        return TRUE_ORIGIN

    def gate(self, measurement_size: int) -> Gate:
        """No gate: the association is known."""
        return gate_of(1.0, measurement_size)
