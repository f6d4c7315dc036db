"""Match the moments of all hypotheses by one Gaussian: probabilistic data association.

Source: Bar-Shalom and Tse (1975), Automatica 11, Tracking in a cluttered environment with
probabilistic data association.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from filters.compiled import helper
from filters.hypotheses import Hypotheses
from filters.mixture import Mixture, add_to_covariance, add_to_mean, clear_moments, mirror
from filters.reductions.reduction import Reduction


@helper
def _match(n: int, hypotheses: Hypotheses, rows: int, mode: int, mixture: Mixture, i: int) -> bool:
    """Write the moments of a mode's rows as component i; False if they have no weight."""
    table, means, covariances = hypotheses.table, hypotheses.means, hypotheses.covariances
    total = 0.0
    for h in range(rows):
        if table[h].mode == mode:
            total += table[h].weight
    if not total > 0.0:
        return False
    share = 1.0 / total
    mean, covariance = mixture.means[i], mixture.covariances[i]
    clear_moments(n, mean, covariance)
    for h in range(rows):
        if table[h].mode == mode:
            add_to_mean(n, share * table[h].weight, means[h], mean)
    for h in range(rows):
        if table[h].mode == mode:
            spread = covariances[table[h].covariance]
            add_to_covariance(n, share * table[h].weight, means[h], spread, mean, covariance)
    mirror(n, covariance)
    mixture.weights[i] = total
    mixture.modes[i] = mode
    return True


def _match_moments(n: int) -> Callable[..., int]:
    """One Gaussian for each mode."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        written = 0
        for mode in range(int(settings[0])):
            if _match(n, hypotheses, rows, mode, mixture, written):
                written += 1
        return written

    return reduce


def match_moments(modes: int = 1) -> Reduction:
    """One Gaussian with the moments of all hypotheses together; one for each mode, if several."""
    return Reduction(_match_moments, modes, np.array([modes], float))
