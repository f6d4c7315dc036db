"""The exact posterior on a grid, as a strategy: a reference for states of one or two numbers."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Annotated, ClassVar, Literal

from pydantic import Field

from filters.lattice import Resolution
from filters.models.motion.target import Target
from filters.models.record import BadValue
from filters.models.sensor.sensor import Sensor
from filters.point_mass import point_mass_posteriors
from filters.random_numbers import Numbers
from filters.strategies.starts import StartFromPrior
from filters.strategies.strategy import Assumptions, Strategy
from filters.track import Scans, Tracks, past_limit, room_for_tracks

_MOST_NUMBERS = 2


class PointMassGrid(Strategy):
    """Bayes' rule point by point: nothing linearised, no association chosen, no gate. Slow."""

    kind: Literal["point-mass-grid"]
    """Which strategy: a point-mass grid, a reference for states of one or two numbers."""
    steps_per_sd: Annotated[float, Field(strict=True, ge=1.0, le=100.0)] = 2.5
    """Grid steps in a standard deviation of the narrowest density that the scans allow."""
    most_points: Annotated[int, Field(strict=True, ge=1000, le=100_000_000)] = 2_000_000
    """Most points of a grid; a million takes some 200 MB."""

    counts_hypotheses: ClassVar[bool] = False

    def misfits(self, target: Target, sensor: Sensor) -> Iterable[BadValue]:
        """States that no grid can hold, and starts that it does not know."""
        if not isinstance(self.start, StartFromPrior):
            yield BadValue("start.kind", "is not for a grid", "leave start out")
        if target.state_size > _MOST_NUMBERS:
            yield BadValue(
                "kind",
                f"is for states of one or two numbers, but the target's has {target.state_size}",
                "take unreduced-mixture or a particle filter as the reference, or one axis",
            )

    def run(
        self,
        assumptions: Assumptions,
        scans: Scans,
        numbers: Numbers,
        first_trial: int,
        record: bool = False,
    ) -> Tracks:
        """Follow the target; a scan is empty where it has no detection at all.

        raises      ValueError naming the trial and scan that the grid cannot hold
        """
        tracks = room_for_tracks(scans, len(assumptions.prior.mean))
        for trial in range(len(scans.offsets)):
            self._follow(assumptions, scans, trial, tracks)
        return tracks

    def _follow(self, assumptions: Assumptions, scans: Scans, trial: int, tracks: Tracks) -> None:
        prior, ending = assumptions.prior, self.ends.rule(assumptions.axes)
        if len(prior.means) > 0:
            prior = prior._replace(mean=prior.means[trial])
        resolution = Resolution(self.steps_per_sd, most_points=self.most_points)
        empty_scans = 0
        posteriors = point_mass_posteriors(assumptions.models, prior, scans, trial, resolution)
        for k, posterior in enumerate(posteriors):
            is_empty = scans.offsets[trial, k] == scans.offsets[trial, k + 1]
            empty_scans = empty_scans + 1 if is_empty else 0
            tracks.scans_run[trial] += 1
            tracks.impossible[trial] += posterior.impossible
            if past_limit(ending, empty_scans, posterior.covariance):
                return
            tracks.means[trial, k] = posterior.mean
            tracks.covariances[trial, k] = posterior.covariance
            tracks.present[trial, k] = True
