"""Match the moments of all hypotheses by one Gaussian: probabilistic data association.

Source: Bar-Shalom and Tse (1975), Automatica 11, Tracking in a cluttered environment with
probabilistic data association.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from filters.compiled import helper
from filters.hypotheses import Hypotheses
from filters.mixture import Mixture, add_to_covariance, add_to_mean, clear_moments, mirror
from filters.reductions.reduction import Reduction


@helper
def _match(n: int, hypotheses: Hypotheses, rows: int, mixture: Mixture) -> int:
    table, means, covariances = hypotheses.table, hypotheses.means, hypotheses.covariances
    mean, covariance = mixture.means[0], mixture.covariances[0]
    clear_moments(n, mean, covariance)
    for h in range(rows):
        add_to_mean(n, table[h].weight, means[h], mean)
    for h in range(rows):
        spread = covariances[table[h].covariance]
        add_to_covariance(n, table[h].weight, means[h], spread, mean, covariance)
    mirror(n, covariance)
    mixture.weights[0] = 1.0
    return 1


def _match_moments(n: int) -> Callable[..., int]:
    """One Gaussian with the mean and the covariance of all hypotheses together."""

    def reduce(hypotheses: Any, rows: int, origin: int, settings: Any, mixture: Any) -> int:
        return _match(n, hypotheses, rows, mixture)

    return reduce


MATCH_MOMENTS = Reduction(_match_moments)
