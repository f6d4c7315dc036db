"""What PDA and mixtures can do beside: follow a target that changes its motion, and doubt it."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Annotated, ClassVar, Self

import numpy as np
from pydantic import Field, model_validator

from filters.existence import CERTAIN, Existence
from filters.interacting import Modes, OneMode, SeveralModes
from filters.models.motion.target import Target
from filters.models.record import BadValue, Probability, Record
from filters.models.sensor.sensor import Sensor
from filters.strategies.gaussian import GatedStrategy
from filters.strategies.modes import AnyMode, Mode, Probabilities, Transition, sums_to_one
from filters.strategies.strategy import Assumptions

ModeName = Annotated[str, Field(pattern=r"^[A-Za-z0-9_-]+$", max_length=40)]


class ExistenceChain(Record):
    """Whether there is a target at all, from scan to scan (Musicki, Evans and Stankovic 1994)."""

    start: Probability
    """Probability that there is a target at the first scan, before it; after the scan of the start
    if that is from detections."""
    survival: Probability
    """Probability that a target that exists still does at the next scan."""
    birth: Probability = 0.0
    """Probability that one that does not exist does at the next scan."""
    end_below: Probability
    """Give the track up when the probability falls below this."""

    def chain(self) -> Existence:
        """As kernels take it."""
        return Existence(self.start, self.survival, self.birth, self.end_below)


class InteractingStrategy(GatedStrategy):
    """A gated strategy that may follow several motions, and the existence of the target."""

    modes: Annotated[dict[ModeName, AnyMode], Field(min_length=2, max_length=20)] | None = None
    """Motions that the target changes between, each a table of a name of your own, in place of the
    one that is assumed; all with states of the same size."""
    mode_transition: Transition | None = None
    """Probability of each mode at the next scan, a row for each mode now, in the order of modes."""
    mode_start: Probabilities | None = None
    """Probability of each mode at the first scan, or at that of a start from detections; by default
    all are equally likely."""
    existence: ExistenceChain | None = None
    """Follow the probability that there is a target, and end the track by it."""

    # Into one component for each mode before every scan; else every component goes on in each.
    mixes: ClassVar[bool]

    @property
    def mode_count(self) -> int:
        """Number of motions."""
        return 1 if self.modes is None else len(self.modes)

    def existence_chain(self) -> Existence:
        """How likely a target is taken to be."""
        return CERTAIN if self.existence is None else self.existence.chain()

    def kernel_modes(self, assumptions: Assumptions) -> Modes:
        """The motions that a target may be in."""
        if self.modes is None:
            return OneMode(assumptions.models.motion)
        count = len(self.modes)
        start = self.mode_start or (1.0 / count,) * count
        return SeveralModes(
            tuple(mode.motion_model(assumptions.axes) for mode in self.modes.values()),
            np.array(self.mode_transition, float),
            np.array(start, float),
            self.mixes,
        )

    def kernel_choice(self) -> tuple[object, ...]:
        """Kernels are compiled for a number of modes."""
        return (*super().kernel_choice(), self.mode_count, self.existence is None)

    def misfits(self, target: Target, sensor: Sensor) -> Iterable[BadValue]:
        """Modes whose states are not of the size of the target's."""
        wrong = (_misfit(name, mode, target) for name, mode in (self.modes or {}).items())
        return (*super().misfits(target, sensor), *(one for one in wrong if one is not None))

    @model_validator(mode="after")
    def _modes_are_a_chain(self) -> Self:
        if self.modes is None:
            for key in ("mode_transition", "mode_start"):
                if getattr(self, key) is not None:
                    raise BadValue(key, "is given but there are no modes", "add the tables modes")
            return self
        if self.mode_transition is None:
            raise BadValue(
                "mode_transition",
                "is missing",
                "give, for each mode, the probability of each mode at the next scan",
            )
        count = len(self.modes)
        if len(self.mode_transition) != count:
            raise BadValue(
                "mode_transition",
                f"has {len(self.mode_transition)} rows but there are {count} modes",
                "give a row for each mode",
            )
        for place, row in enumerate(self.mode_transition):
            _check_probabilities(f"mode_transition[{place}]", row, count)
        if self.mode_start is not None:
            _check_probabilities("mode_start", self.mode_start, count)
        return self


def _check_probabilities(key: str, row: tuple[float, ...], count: int) -> None:
    if len(row) != count:
        raise BadValue(key, f"has {len(row)} entries but there are {count} modes", "give one each")
    if not sums_to_one(row):
        raise BadValue(key, f"sums to {sum(row):.6g}, not to 1", "make its probabilities sum to 1")


def _misfit(name: str, mode: Mode, target: Target) -> BadValue | None:
    """What is wrong with a mode for the target that a strategy assumes."""
    size, axes = type(mode).target.state_size_along(target.axes), target.axes
    if size is None:
        return BadValue(
            f"modes.{name}.motion",
            f"does not move along {axes} axes",
            "choose another motion, or another target",
        )
    if size != target.state_size:
        return BadValue(
            f"modes.{name}.motion",
            f"has a state of {size} numbers but the target assumed has {target.state_size}",
            "all modes need the state of the target that is assumed: choose another motion for "
            "the mode, or for assumes.target",
        )
    return None
