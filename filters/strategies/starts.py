"""How a strategy starts its tracks: from what it is told of the target, or from detections."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Annotated, Literal

from pydantic import Field
from scipy.stats import chi2

from filters.models.contract import Models
from filters.models.record import BadValue, Positive, Record
from filters.models.sensor.sensor import Sensor
from filters.starts import StartRule, started_from_detections
from filters.strategies.gate import GateProbability
from filters.track import Prior, Scans


class StartFromPrior(Record):
    """The track starts from the prior, at the first scan."""

    kind: Literal["prior"] = "prior"
    """Which start: the prior, at the first scan."""

    def misfits(self, sensor: Sensor) -> Iterable[BadValue]:
        """What is wrong with it for the sensor that is assumed."""
        return ()

    def begin(self, models: Models, prior: Prior, scans: Scans) -> Prior:
        """The prior as it is."""
        return prior


class StartFromDetections(Record):
    """The track starts from detections, the prior only points to the first of them.

    That is the nearest one in the gate of the prior, in the first scan that has one. Before the
    start there is no track.
    """

    gate_probability: GateProbability = 0.9997
    """Probability that the target's own detection lies in the gate of the start; 1 is no gate."""

    def misfits(self, sensor: Sensor) -> Iterable[BadValue]:
        """Detections that are not converted into positions."""
        if not sensor.fixes_position():
            kind = sensor.model_dump()["kind"]
            yield BadValue(
                "start.kind",
                f"takes detections for positions, but those of {kind!r} are not converted into any",
                "leave start out: the track then starts from the prior",
            )

    def rule(self, gate_limit: float) -> StartRule:
        """The rule as kernels take it."""
        raise NotImplementedError

    def begin(self, models: Models, prior: Prior, scans: Scans) -> Prior:
        """A start of each trial's own."""
        gate_limit = float(chi2.ppf(self.gate_probability, scans.detections.shape[1]))
        return started_from_detections(models, self.rule(gate_limit), prior, scans)


class OnePointStart(StartFromDetections):
    """One detection gives the position; the velocity is zero with a stated spread."""

    kind: Literal["one-point"]
    """Which start: from one detection."""
    velocity_sd_m_per_s: Positive
    """Standard deviation of the velocity along each axis, m/s."""

    def rule(self, gate_limit: float) -> StartRule:
        """One point."""
        return StartRule(1, self.velocity_sd_m_per_s, gate_limit)


class TwoPointStart(StartFromDetections):
    """Two detections of successive scans give position and velocity.

    The second is the nearest to the first that a target of that speed could have come to.
    """

    kind: Literal["two-point"]
    """Which start: from two detections, by their difference."""
    fastest_m_per_s: Positive
    """Greatest speed of a target, m/s: it bounds the way between both but for noise."""

    def rule(self, gate_limit: float) -> StartRule:
        """Two points."""
        return StartRule(2, self.fastest_m_per_s, gate_limit)


AnyStart = Annotated[StartFromPrior | OnePointStart | TwoPointStart, Field(discriminator="kind")]
