"""The exact posterior as a strategy: a Gaussian mixture that nothing is taken from."""

from __future__ import annotations

import math
from typing import Literal

from filters.reductions.keep_all import keep_all
from filters.reductions.reduction import Reduction
from filters.strategies.gate import gate_of
from filters.strategies.gaussian import GaussianStrategy
from filters.track import Scans
from filters.unreduced import capacity_unreduced, components_recorded
from filters.update import Gate


class UnreducedMixture(GaussianStrategy):
    """Keeps a component for every history of associations: a reference for short scenes.

    Exact where motion and sensor are linear; otherwise exact in the associations alone.
    """

    kind: Literal["unreduced-mixture"]
    """Which strategy: unreduced mixture, exact; a scan multiplies its components."""

    def reduction_for(self, scans: Scans, n: int, first_trial: int) -> Reduction:
        """Keep all.

        raises      ValueError: a trial needs more components than there is room for
        """
        return keep_all(capacity_unreduced(scans, n, first_trial))

    def most_recorded(self, scans: Scans, reduction: Reduction) -> int:
        """Components of all scans together."""
        return math.ceil(components_recorded(scans))

    def gate(self, measurement_size: int) -> Gate:
        """No gate."""
        return gate_of(1.0, measurement_size)
