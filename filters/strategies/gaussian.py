"""Strategies of Gaussian components: one filter, with a choice of reduction."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Annotated, ClassVar, Literal, Union

from pydantic import Field

from filters.detecting import AtMean
from filters.existence import CERTAIN, Existence
from filters.hypothesis_filter import (
    ESTIMATE_MEAN,
    HypothesisStrategy,
    compiled_filter,
    room_for,
)
from filters.interacting import Modes, OneMode
from filters.linearisation.rules import gauss_hermite_rule
from filters.models.motion.target import Target
from filters.models.record import BadValue
from filters.models.sensor.sensor import Sensor
from filters.posteriors import NOT_ASKED, room_for_posteriors
from filters.random_numbers import Numbers
from filters.reductions.keep_one import HEAVIEST, NEAREST, TRUE_ORIGIN
from filters.reductions.reduction import Reduction
from filters.strategies.gate import GateProbability, gate_of
from filters.strategies.linearisations import (
    LINEARISATIONS,
    FirstOrder,
    LinearisationKind,
    PointsPerAxis,
    too_many_points,
)
from filters.strategies.strategy import Assumptions, Strategy
from filters.track import Scans, Tracks, room_for_tracks
from filters.update import Gate, UpdateRules

if TYPE_CHECKING:
    AnyLinearisation = LinearisationKind
else:  # a union over whatever the catalogue holds
    AnyLinearisation = Annotated[Union[LINEARISATIONS], Field(discriminator="kind")]  # noqa: UP007


class GaussianStrategy(Strategy):
    """A filter of Gaussian components; a kind names its reduction."""

    has_posteriors: ClassVar[bool] = True

    linearisation: AnyLinearisation = FirstOrder()
    """How a sensor that is not linear is taken; by default by its Jacobian."""
    detection_points_per_axis: PointsPerAxis | None = None
    """Keep a detection probability that varies inside the integral, by so many Gauss-Hermite points
    along each axis of the state; by default it is taken at the mean."""

    def kernel_choice(self) -> tuple[object, ...]:
        """How a component meets sensor and detection probability."""
        return (type(self.linearisation), self.detection_points_per_axis is None)

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

    def kernel_modes(self, assumptions: Assumptions) -> Modes:
        """The motions that a target may be in."""
        return OneMode(assumptions.models.motion)

    def existence_chain(self) -> Existence:
        """How likely a target is taken to be."""
        return CERTAIN

    def misfits(self, target: Target, sensor: Sensor) -> Iterable[BadValue]:
        """A linearisation, or a quadrature, that the sensor or the state does not allow."""
        yield from super().misfits(target, sensor)
        n, points = target.state_size, self.detection_points_per_axis
        wrong = self.linearisation.misfit(n, sensor)
        if wrong is not None:
            yield BadValue(f"linearisation.{wrong.key}", wrong.rule, wrong.remedy)
        wrong = None if points is None else too_many_points("detection_points_per_axis", points, n)
        if wrong is not None:
            yield wrong

    def update_rules(self, n: int, m: int) -> UpdateRules:
        """How hypotheses are formed, for states of n and measurements of m numbers."""
        points = self.detection_points_per_axis
        return UpdateRules(
            self.gate(m),
            self.linearisation.settings(n),
            AtMean() if points is None else gauss_hermite_rule(n, points),
        )

    def kernel_arguments(
        self, assumptions: Assumptions, m: int, reduction: Reduction
    ) -> HypothesisStrategy:
        """The strategy as kernels take it, for measurements of m numbers."""
        n = len(assumptions.prior.mean)
        return HypothesisStrategy(
            reduction.compiled(n),
            reduction.settings,
            self.update_rules(n, m),
            self.kernel_modes(assumptions),
            self.existence_chain(),
            self.ends.rule(assumptions.axes),
            self.estimate_choice(),
        )

    def run(
        self,
        assumptions: Assumptions,
        scans: Scans,
        numbers: Numbers,
        first_trial: int,
        record: bool = False,
    ) -> Tracks:
        """Follow the target through a batch of trials."""
        n, m = len(assumptions.prior.mean), scans.detections.shape[1]
        reduction = self.reduction_for(scans, n, first_trial)
        strategy = self.kernel_arguments(assumptions, m, reduction)
        posteriors = NOT_ASKED
        if record:
            trials, length = scans.origins.shape
            most = self.most_recorded(scans, reduction)
            posteriors = room_for_posteriors(trials, length, n, most)
        with_existence = strategy.existence != CERTAIN
        tracks = room_for_tracks(scans, n, posteriors, with_existence)
        room = room_for(n, m, strategy.rules, strategy.modes, reduction, scans.most_detections)
        kernel = compiled_filter(n, m)
        prior = self.prior_for(assumptions, scans)
        kernel(assumptions.models, strategy, prior, scans, tracks, room)
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
