"""Truth and scans of a batch of trials, as separate records: strategies get the scans only."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from filters.track import ORIGIN_UNKNOWN, Scans


class Truth(NamedTuple):
    """Where the targets were."""

    states: np.ndarray  # (trials, scans, n) position, velocity, then what else the motion has
    outside: np.ndarray  # (trials, scans) bool: the measurement fell outside the sensor's region
    axes: int

    def rows(self, rows: slice) -> Truth:
        """The truth of some of the trials, without copying."""
        return self._replace(states=self.states[rows], outside=self.outside[rows])

    @property
    def position(self) -> np.ndarray:
        """(trials, scans, axes) m."""
        return self.states[..., : self.axes]

    @property
    def kinematics(self) -> np.ndarray:
        """Position and velocity, (trials, scans, 2 * axes)."""
        return self.states[..., : 2 * self.axes]

    @property
    def velocity(self) -> np.ndarray:
        """(trials, scans, axes) m/s."""
        return self.states[..., self.axes : 2 * self.axes]


class SceneBatch(NamedTuple):
    """Scenes of consecutive trials."""

    first_trial: int
    truth: Truth
    scans: Scans  # with the true origins

    @property
    def scans_without_origins(self) -> Scans:
        """The scans as strategies see them."""
        return self.scans._replace(origins=np.full_like(self.scans.origins, ORIGIN_UNKNOWN))
