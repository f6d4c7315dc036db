"""The contract of a strategy: checked settings, and a function from scans to tracks."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import Any, ClassVar, NamedTuple

from pydantic import Field

from filters.models.contract import Models
from filters.models.motion.target import Target
from filters.models.record import BadValue, Count, Positive, Record
from filters.models.sensor.sensor import Sensor
from filters.random_numbers import Numbers
from filters.strategies.starts import AnyStart, StartFromPrior
from filters.track import Ending, Prior, Scans, Tracks


class Assumptions(NamedTuple):
    """All that a strategy knows of target and sensor; it need not be true."""

    models: Models
    prior: Prior
    axes: int


class TrackEnding(Record):
    """When a strategy gives its track up; from then on it has no estimate."""

    empty_scans: Count | None = None
    """Give the track up after so many scans in a row with nothing in the gate."""
    position_sd_above_m: Positive | None = None
    """Give the track up when the position's standard deviation along an axis exceeds this, m."""

    def rule(self, axes: int) -> Ending:
        """The rule as kernels take it."""
        return Ending(
            self.empty_scans or 0,
            math.inf if self.position_sd_above_m is None else self.position_sd_above_m,
            axes,
        )


class Strategy(Record):
    """Settings that all strategies share; a family adds its own and its `run`."""

    ends: TrackEnding = TrackEnding()
    """When the track is given up; by default never."""
    start: AnyStart = StartFromPrior()
    """How the track starts: by default from the prior, at the first scan."""
    # Resolved by who reads the study.
    assumes: dict[str, Any] = Field(default_factory=dict)
    """What the strategy is told of target and sensor where it differs from the scene: the same
    keys, each with a value or with { factor = x } times the scene's own."""

    # Only a reference may be told which detection is the target's.
    is_told_origins: ClassVar[bool] = False
    # Whether the number of hypotheses formed is a measure of its cost.
    counts_hypotheses: ClassVar[bool] = True
    # Whether it can keep the posteriors of every scan.
    has_posteriors: ClassVar[bool] = False

    def kernel_choice(self) -> tuple[object, ...]:
        """Settings that decide which code is compiled, beside the kind."""
        return ()

    def misfits(self, target: Target, sensor: Sensor) -> Iterable[BadValue]:
        """What is wrong with the settings for the target and the sensor that are assumed."""
        return self.start.misfits(sensor)

    def memory_asked(self, n: int, m: int) -> Iterable[tuple[str, int, int]]:
        """Settings that ask for much working memory: key, number, and bytes of each.

        n, m    numbers in the state and in a measurement
        """
        return ()

    def prior_for(self, assumptions: Assumptions, scans: Scans) -> Prior:
        """Where each trial's track starts, as kernels take it."""
        return self.start.begin(assumptions.models, assumptions.prior, scans)

    def run(
        self,
        assumptions: Assumptions,
        scans: Scans,
        numbers: Numbers,
        first_trial: int,
        record: bool = False,
    ) -> Tracks:
        """Follow the target through a batch of trials.

        numbers         the study's random numbers, for strategies that draw some
        first_trial     number of the batch's first trial, which names its random streams
        record          whether to keep the posteriors of every scan, for families that have them
        """
        raise NotImplementedError
