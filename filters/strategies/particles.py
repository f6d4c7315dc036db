"""The particle filter as a strategy."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Annotated, ClassVar, Literal

from pydantic import Field

from filters.models.record import NonNegative
from filters.particle_filter import ParticleStrategy, compiled_particle_filter
from filters.particles.cloud import DETECTIONS, MOTION, bytes_per_particle, cloud_for
from filters.particles.resampling import STRATIFIED, SYSTEMATIC
from filters.posteriors import NOT_ASKED, room_for_posteriors
from filters.random_numbers import Numbers
from filters.strategies.gate import GateProbability, gate_of
from filters.strategies.strategy import Assumptions, Strategy
from filters.track import Scans, Tracks, room_for_tracks

ParticleCount = Annotated[int, Field(strict=True, ge=2, le=1_000_000_000)]
Share = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0.0, le=1.0)]
PROPOSALS = {"motion": MOTION, "detections": DETECTIONS}
RESAMPLINGS = {"systematic": SYSTEMATIC, "stratified": STRATIFIED}


class ParticleFilter(Strategy):
    """A particle filter with the association summed out of the likelihood."""

    kind: Literal["particle-filter"]
    """Which strategy: particle filter."""
    particles: ParticleCount = 1000
    """Number of samples."""
    proposal: Literal["motion", "detections"] = "motion"
    """Where particles are drawn: from the motion alone (bootstrap), or from a mixture of it and,
    for each detection, what a linearised Kalman filter of the particle makes of that detection."""
    resample_below: Share = 0.5
    """Resample when the effective number of samples falls below this share of `particles`."""
    resampling: Literal["systematic", "stratified"] = "systematic"
    """How copies are chosen when resampling: one random number for all, or one for each."""
    roughening: NonNegative = 0.0
    """Jitter after resampling, which moves the posterior: in a state of n numbers the standard
    deviation is this factor times that number's range over the N particles, times N^(-1/n). 0 is
    none."""
    gate_probability: GateProbability = 0.9997
    """Only for ending the track after empty scans: the filter itself has no gate."""

    counts_hypotheses: ClassVar[bool] = False
    has_posteriors: ClassVar[bool] = True

    def kernel_choice(self) -> tuple[object, ...]:
        """The proposal."""
        return (self.proposal,)

    def memory_asked(self, n: int, m: int) -> Iterable[tuple[str, int, int]]:
        """The cloud."""
        return [("particles", self.particles, bytes_per_particle(n, m))]

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
        settings = ParticleStrategy(
            self.resample_below,
            RESAMPLINGS[self.resampling],
            self.roughening,
            gate_of(self.gate_probability, m),
            self.ends.rule(assumptions.axes),
        )
        posteriors = NOT_ASKED
        if record:
            trials, length = scans.origins.shape
            most = self.particles * scans.origins.size
            posteriors = room_for_posteriors(trials, length, n, most, samples=True)
        tracks = room_for_tracks(scans, n, posteriors)
        compiled_particle_filter(n, m, PROPOSALS[self.proposal])(
            assumptions.models,
            settings,
            self.prior_for(assumptions, scans),
            scans,
            first_trial,
            numbers,
            tracks,
            cloud_for(n, m, self.particles, scans.most_detections),
        )
        return tracks
