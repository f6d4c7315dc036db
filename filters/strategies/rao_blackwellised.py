"""The Rao-Blackwellised particle filter as a strategy."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Literal

from filters.hypothesis_filter import room_for
from filters.interacting import OneMode
from filters.posteriors import NOT_ASKED, room_for_posteriors
from filters.random_numbers import Numbers
from filters.rao_blackwellised import (
    RaoBlackwellisedStrategy,
    compiled_rao_blackwellised_filter,
    room_for_sampling,
)
from filters.reductions.keep_all import keep_all
from filters.reductions.reduction import Reduction
from filters.strategies.gaussian import GatedStrategy
from filters.strategies.particles import RESAMPLINGS, ParticleCount, Share
from filters.strategies.strategy import Assumptions
from filters.track import Scans, Tracks, room_for_tracks
from filters.unreduced import bytes_a_component


class RaoBlackwellisedParticleFilter(GatedStrategy):
    """Samples associations; each particle is a history of them with a Kalman filter of its own."""

    kind: Literal["rao-blackwellised-particle-filter"]
    """Which strategy: Rao-Blackwellised particle filter."""
    particles: ParticleCount = 100
    """Number of histories of associations."""
    resample_below: Share = 0.5
    """Resample when the effective number of samples falls below this share of `particles`."""
    resampling: Literal["systematic", "stratified"] = "systematic"
    """How copies are chosen when resampling: one random number for all, or one for each."""

    def reduction(self) -> Reduction:
        """None: a scan leaves as many components as it found, each a particle."""
        return keep_all(self.particles)

    def memory_asked(self, n: int, m: int) -> Iterable[tuple[str, int, int]]:
        """Components and hypotheses, with one detection a scan: the least that it comes to."""
        return [("particles", self.particles, bytes_a_component(n, 1))]

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
        settings = RaoBlackwellisedStrategy(
            self.resample_below,
            RESAMPLINGS[self.resampling],
            self.update_rules(n, m),
            OneMode(assumptions.models.motion),
            self.ends.rule(assumptions.axes),
        )
        reduction = self.reduction()
        posteriors = NOT_ASKED
        if record:
            trials, length = scans.origins.shape
            most = self.most_recorded(scans, reduction)
            posteriors = room_for_posteriors(trials, length, n, most)
        tracks = room_for_tracks(scans, n, posteriors)
        compiled_rao_blackwellised_filter(n, m)(
            assumptions.models,
            settings,
            self.prior_for(assumptions, scans),
            scans,
            first_trial,
            numbers,
            tracks,
            room_for(n, m, settings.rules, settings.modes, reduction, scans.most_detections),
            room_for_sampling(self.particles),
        )
        return tracks
