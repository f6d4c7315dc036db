"""Strategies that keep several Gaussian components, told apart by how few they make of many."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal, Self

from pydantic import Field, model_validator

from filters.hypothesis_filter import ESTIMATE_HEAVIEST, ESTIMATE_MEAN
from filters.models.record import BadValue, Count, NonNegative
from filters.reductions.merge_by_bound import merge_by_bound
from filters.reductions.n_scan_pruning import n_scan_pruning
from filters.reductions.prune_and_cap import prune_and_cap
from filters.reductions.prune_merge_cap import prune_merge_cap
from filters.reductions.reduction import Reduction
from filters.strategies.interacting import InteractingStrategy


class MixtureStrategy(InteractingStrategy):
    """A gated strategy of several components; a kind says which are left after a scan."""

    max_components: Annotated[Count, Field(le=10_000)] = 20
    """Most components kept after each scan."""
    prune_below: Annotated[NonNegative, Field(lt=1.0)] = 1e-4
    """Components of less weight than this share of the total are dropped."""
    estimate: Literal["mean", "heaviest"] = "mean"
    """What is reported: mean and matched covariance, or the heaviest component."""

    mixes: ClassVar[bool] = False

    def estimate_choice(self) -> int:
        """How the mixture becomes one estimate."""
        return ESTIMATE_HEAVIEST if self.estimate == "heaviest" else ESTIMATE_MEAN


class GaussianMixture(MixtureStrategy):
    """Light components pruned, close ones merged, the heaviest kept."""

    kind: Literal["gaussian-mixture"]
    """Which strategy: Gaussian mixture, merged greedily from the heaviest."""
    merge_below: NonNegative = 0.5
    """Components closer than this squared distance to a heavier one are merged with it."""

    def reduction(self) -> Reduction:
        """Prune, merge, cap."""
        return prune_merge_cap(self.prune_below, self.merge_below, self.max_components)


class PrunedMixture(MixtureStrategy):
    """Light components pruned and the heaviest kept; nothing is merged."""

    kind: Literal["pruned-mixture"]
    """Which strategy: Gaussian mixture, pruned and capped."""

    def reduction(self) -> Reduction:
        """Prune, cap."""
        return prune_and_cap(self.prune_below, self.max_components)


class RunnallsMixture(MixtureStrategy):
    """Pairs merged in the order of Runnalls' bound on the Kullback-Leibler divergence it costs."""

    kind: Literal["runnalls-mixture"]
    """Which strategy: Gaussian mixture, merged by Runnalls' bound."""
    merge_among: Annotated[Count, Field(le=20_000)] | None = None
    """Most components compared pair by pair, the heaviest; by default 20 more than are kept."""

    @model_validator(mode="after")
    def _merges_among_enough(self) -> Self:
        if self.merge_among is not None and self.merge_among < self.max_components:
            raise BadValue(
                "merge_among",
                f"is below max_components ({self.max_components})",
                "make it as large or larger",
            )
        return self

    def reduction(self) -> Reduction:
        """Prune, merge by the least bound."""
        merge_among = self.merge_among or self.max_components + 20
        return merge_by_bound(self.prune_below, merge_among, self.max_components)


class NScanMixture(MixtureStrategy):
    """The heaviest hypothesis settles what was associated N scans ago; nothing is merged."""

    kind: Literal["n-scan-mixture"]
    """Which strategy: Gaussian mixture with N-scan pruning."""
    scans_back: Annotated[Count, Field(le=100)] = 5
    """N: components that disagree with the heaviest on the association N scans ago are dropped."""

    def reduction(self) -> Reduction:
        """Keep what agrees, prune, cap."""
        return n_scan_pruning(self.scans_back, self.prune_below, self.max_components)
