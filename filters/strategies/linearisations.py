"""Linearisations that a study may choose, with their settings."""

from __future__ import annotations

from typing import Annotated, Any, Literal, get_args

from pydantic import Field

from filters.linearisation.converted import Converted
from filters.linearisation.first_order import ByJacobian
from filters.linearisation.iterated import Iterated
from filters.linearisation.rules import (
    MOST_POINTS,
    PointRule,
    cubature_rule,
    gauss_hermite_rule,
    unscented_rule,
)
from filters.models.record import BadValue, Positive, Real, Record
from filters.models.sensor import SENSORS
from filters.models.sensor.sensor import Sensor

PointsPerAxis = Annotated[int, Field(strict=True, ge=2, le=32)]


class LinearisationKind(Record):
    """How a sensor that is not linear is taken; a kind adds its settings."""

    def settings(self, n: int) -> Any:
        """Settings as kernels take them, for states of n numbers."""
        raise NotImplementedError

    def misfit(self, n: int, sensor: Sensor) -> BadValue | None:
        """What keeps it from being used for states of n numbers and that sensor."""
        return None


class FirstOrder(LinearisationKind):
    """The sensor's Jacobian at the predicted mean: the extended Kalman filter."""

    kind: Literal["first-order"] = "first-order"
    """Which linearisation: the Jacobian at the predicted mean."""

    def settings(self, n: int) -> ByJacobian:
        """None."""
        return ByJacobian()


class IteratedJacobian(LinearisationKind):
    """The Jacobian at the estimate that each detection leads to."""

    kind: Literal["iterated"]
    """Which linearisation: the Jacobian at the estimate, found by iterating."""
    at_most: Annotated[int, Field(strict=True, ge=1, le=100)] = 5
    """Most steps for one detection; fewer are taken once the estimate stays put."""

    def settings(self, n: int) -> Iterated:
        """Settings as kernels take them."""
        return Iterated(self.at_most)


class Unscented(LinearisationKind):
    """The scaled unscented transform."""

    kind: Literal["unscented"]
    """Which linearisation: the scaled unscented transform."""
    alpha: Positive = 1.0
    """Scale of the points' distance from the mean."""
    beta: Real = 2.0
    """What the central point's weight in covariances adds; 2 suits a Gaussian."""
    kappa: Real | None = None
    """Further scale, above minus the size of the state; by default 3 minus that size."""

    def settings(self, n: int) -> PointRule:
        """2 n + 1 points."""
        kappa = 3.0 - n if self.kappa is None else self.kappa
        return unscented_rule(n, self.alpha, self.beta, kappa)

    def misfit(self, n: int, sensor: Sensor) -> BadValue | None:
        """Points at an imaginary distance."""
        if self.kappa is None or self.kappa > -n:
            return None
        return BadValue(
            "kappa",
            f"must be above {-n}, minus the numbers in the state",
            f"leave it out for {3 - n}, or give a larger one",
        )


class Cubature(LinearisationKind):
    """The spherical-radial cubature rule of third degree."""

    kind: Literal["cubature"]
    """Which linearisation: spherical-radial cubature of third degree."""

    def settings(self, n: int) -> PointRule:
        """2 n points."""
        return cubature_rule(n)


class GaussHermite(LinearisationKind):
    """All combinations of Gauss-Hermite points along the axes of the state."""

    kind: Literal["gauss-hermite"]
    """Which linearisation: Gauss-Hermite points along each axis of the state."""
    points_per_axis: PointsPerAxis = 3
    """Points along each axis; their number to the power of the state's size is the cost."""

    def settings(self, n: int) -> PointRule:
        """All combinations.

        raises      ValueError: too many
        """
        return gauss_hermite_rule(n, self.points_per_axis)

    def misfit(self, n: int, sensor: Sensor) -> BadValue | None:
        """Too many points."""
        return too_many_points("points_per_axis", self.points_per_axis, n)


class ConvertedMeasurements(LinearisationKind):
    """Each detection as a position with a covariance of its own, debiased."""

    kind: Literal["converted-measurements"]
    """Which linearisation: none; range and angles become positions, debiased."""

    def settings(self, n: int) -> Converted:
        """None."""
        return Converted()

    def misfit(self, n: int, sensor: Sensor) -> BadValue | None:
        """A measurement that fixes no position."""
        if sensor.fixes_position():
            return None
        return BadValue(
            "kind",
            "needs detections that fix a position, which those of this sensor don't",
            f"choose another, or a sensor of kind {' or '.join(_position_fixing())}",
        )


def too_many_points(key: str, per_axis: int, n: int) -> BadValue | None:
    """What is wrong with so many Gauss-Hermite points along each axis of the state, if anything."""
    if per_axis**n <= MOST_POINTS:
        return None
    most = max(fewer for fewer in range(1, per_axis) if fewer**n <= MOST_POINTS)
    return BadValue(
        key,
        f"makes {per_axis**n:,} points for a state of {n} numbers, beyond {MOST_POINTS:,}",
        f"take at most {most}",
    )


def _position_fixing() -> list[str]:
    """Kinds of sensor whose measurement fixes a position."""
    fixing = (sensor for sensor in SENSORS if sensor.fixes_position())
    return [get_args(sensor.model_fields["kind"].annotation)[0] for sensor in fixing]


LINEARISATIONS = (
    FirstOrder,
    IteratedJacobian,
    Unscented,
    Cubature,
    GaussHermite,
    ConvertedMeasurements,
)
