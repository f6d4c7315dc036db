"""Motions that a strategy follows a target through, as a study states them.

A mode is a motion without a start: the start is that of the target that the strategy assumes.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any, ClassVar, Union

import numpy as np
from pydantic import Field, create_model

from filters.models.contract import MotionModel
from filters.models.motion import MOTIONS
from filters.models.motion.target import Target
from filters.models.record import Probability, Record


class Mode(Record):
    """Parameters of one motion."""

    target: ClassVar[type[Target]]

    def motion_model(self, axes: int) -> MotionModel:
        """Functions and parameters for the kernels, along so many axes."""
        still = (0.0,) * axes
        start: dict[str, Any] = {"start_position_m": still, "start_velocity_m_per_s": still}
        return self.target.model_construct(**dict(self), **start).motion_model()


def _mode_of(target: Any) -> type[Mode]:
    """The record of a motion's parameters: its target's, but for the start."""
    fields: dict[str, Any] = {
        name: (info.annotation, info)
        for name, info in target.model_fields.items()
        if not name.startswith("start_")
    }
    mode = create_model(f"{target.__name__}Mode", __base__=Mode, __doc__=target.__doc__, **fields)
    mode.target = target
    return mode


MODES = tuple(_mode_of(motion) for motion in MOTIONS)

if TYPE_CHECKING:
    AnyMode = Mode
else:  # a union over whatever the catalogue holds
    AnyMode = Annotated[Union[MODES], Field(discriminator="motion")]  # noqa: UP007

Probabilities = Annotated[tuple[Probability, ...], Field(min_length=2, max_length=20)]
Transition = Annotated[tuple[Probabilities, ...], Field(min_length=2, max_length=20)]


def sums_to_one(row: tuple[float, ...]) -> bool:
    """Whether probabilities sum to one, up to how decimals are written."""
    return abs(float(np.sum(row)) - 1.0) < 1e-9
