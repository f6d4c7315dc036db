"""Legs of a stated path: what a study may say of each, and the motion it makes.

Source: kinematics of constant velocity, constant acceleration and uniform circular motion.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Annotated, Any, Literal, NamedTuple, Self, Union

import numpy as np
from pydantic import Field, model_validator

from filters.models.record import BadValue, NonNegative, Positive, Real, Record, Ways, within

STANDARD_GRAVITY = 9.80665  # m/s2, by definition


class Kinematics(NamedTuple):
    """Where a target is and how it moves, SI; each (axes,)."""

    position: np.ndarray
    velocity: np.ndarray
    acceleration: np.ndarray


class Leg(Record):
    """Part of a path; a kind adds how it accelerates."""

    duration_s: Positive
    """How long the leg lasts, s."""

    def after(self, seconds: float, position: np.ndarray, velocity: np.ndarray) -> Kinematics:
        """Motion so long after the leg began with this position and velocity."""
        raise NotImplementedError

    def check(self, velocity: np.ndarray) -> None:
        """Check that the leg can be flown from this velocity.

        raises      BadValue
        """


class Straight(Leg):
    """Straight on at the same speed."""

    kind: Literal["straight"]
    """Which leg: straight on at the same speed."""

    def after(self, seconds: float, position: np.ndarray, velocity: np.ndarray) -> Kinematics:
        """Constant velocity."""
        return Kinematics(position + seconds * velocity, velocity, np.zeros_like(velocity))


class Turn(Leg):
    """A turn in the plane of the first two axes at a constant rate; a third axis goes on."""

    kind: Literal["turn"]
    """Which leg: a turn in the horizontal plane at the same speed."""
    turn_rate_deg_per_s: Real | None = None
    """Rate of the turn, counter-clockwise, deg/s."""
    lateral_acceleration_g: Real | None = None
    """Acceleration across the path in place of the rate, counter-clockwise, in units of
    9.80665 m/s2."""

    @classmethod
    def alternatives(cls) -> tuple[Ways, ...]:
        """A turn is stated in one of two ways."""
        ways: Ways = (("turn_rate_deg_per_s",), ("lateral_acceleration_g",))
        return (*super().alternatives(), ways)

    def rate(self, velocity: np.ndarray) -> float:
        """Rate of the turn at this velocity, rad/s."""
        if self.turn_rate_deg_per_s is not None:
            return math.radians(self.turn_rate_deg_per_s)
        assert self.lateral_acceleration_g is not None
        return self.lateral_acceleration_g * STANDARD_GRAVITY / math.hypot(*velocity[:2])

    def after(self, seconds: float, position: np.ndarray, velocity: np.ndarray) -> Kinematics:
        """Along a circle; the plane is taken as that of complex numbers."""
        rate = self.rate(velocity)
        half_angle = rate * seconds / 2
        start = complex(velocity[0], velocity[1])
        chord = start * seconds * np.exp(1j * half_angle) * np.sinc(half_angle / np.pi)
        turned = start * np.exp(2j * half_angle)
        across = 1j * rate * turned
        there = Kinematics(
            position + seconds * velocity, velocity.copy(), np.zeros_like(velocity)
        )  # along the third axis
        there.position[:2] = position[:2] + np.array([chord.real, chord.imag])
        there.velocity[:2] = turned.real, turned.imag
        there.acceleration[:2] = across.real, across.imag
        return there

    def check(self, velocity: np.ndarray) -> None:
        """A turn needs a plane, and one at an acceleration needs speed in it."""
        if len(velocity) < 2:
            raise BadValue("kind", "needs two axes or more", "choose straight or speed-change")
        if self.turn_rate_deg_per_s is None and not math.hypot(*velocity[:2]) > 0.0:
            raise BadValue(
                "lateral_acceleration_g",
                "is of no use to a target that stands still",
                "give it speed, or turn_rate_deg_per_s",
            )

    @model_validator(mode="after")
    def _is_stated(self) -> Self:
        if self.turn_rate_deg_per_s is None and self.lateral_acceleration_g is None:
            raise BadValue("turn_rate_deg_per_s", "is missing", "give it or lateral_acceleration_g")
        return self


class SpeedChange(Leg):
    """Another speed in the same direction, by constant acceleration."""

    kind: Literal["speed-change"]
    """Which leg: a change of speed by constant acceleration, straight on."""
    to_speed_m_per_s: NonNegative
    """Speed at the end of the leg, m/s."""

    def after(self, seconds: float, position: np.ndarray, velocity: np.ndarray) -> Kinematics:
        """Constant acceleration along the velocity."""
        speed = np.linalg.norm(velocity)
        acceleration = (self.to_speed_m_per_s - speed) / self.duration_s * velocity / speed
        return Kinematics(
            position + seconds * velocity + seconds**2 / 2 * acceleration,
            velocity + seconds * acceleration,
            acceleration,
        )

    def check(self, velocity: np.ndarray) -> None:
        """Where to go must be known."""
        if not np.linalg.norm(velocity) > 0.0:
            raise BadValue("kind", "needs a target that moves: it has no direction", "remove it")


LEGS = (Straight, Turn, SpeedChange)
if TYPE_CHECKING:
    AnyLeg = Leg
else:  # a union over the kinds
    AnyLeg = Annotated[Union[LEGS], Field(discriminator="kind")]  # noqa: UP007


def check_legs(legs: Sequence[Leg], velocity: np.ndarray) -> None:
    """Check that legs can be flown one after the other.

    velocity    (axes,) m/s at the start
    raises      BadValue
    """
    for number, leg in enumerate(legs):
        with within(f"legs[{number}]"):
            leg.check(velocity)
        velocity = leg.after(leg.duration_s, np.zeros_like(velocity), velocity).velocity


def states_along(
    legs: Sequence[Leg], position: np.ndarray, velocity: np.ndarray, times: Any
) -> np.ndarray:
    """Position, velocity and acceleration along legs, (times, 3 axes) SI.

    Behind the last leg the target goes straight on. Where two legs meet, the acceleration is that
    of the later one.

    position, velocity  (axes,) SI, at the start
    times               (times,) s since the start, growing
    """
    states = []
    started, number = 0.0, 0
    leg: Leg = legs[0]
    for time in times:
        while number < len(legs) and time >= started + leg.duration_s:
            position, velocity, _ = leg.after(leg.duration_s, position, velocity)
            started += leg.duration_s
            number += 1
            leg = legs[number] if number < len(legs) else Straight(kind="straight", duration_s=1.0)
        states.append(np.concatenate(leg.after(time - started, position, velocity)))
    return np.array(states)
