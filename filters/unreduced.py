"""How large a mixture grows when nothing is pruned or merged: exact, and for short scenes only."""

from __future__ import annotations

import math

import numpy as np

from filters.hypotheses import HYPOTHESIS
from filters.track import Scans


def components_unreduced(scans: Scans) -> np.ndarray:
    """Components after the last scan of each trial without gate or reduction, (trials,) float.

    The product of 1 + M over the scans, one for every history of associations; exact up to 2^53,
    infinite beyond 1e308.
    """
    with np.errstate(over="ignore"):
        return np.prod(1.0 + np.diff(scans.offsets, axis=1), axis=1)


def bytes_a_component(n: int, most_detections: int) -> int:
    """Memory that `hypothesis_filter.room_for` takes for a component of n states."""
    hypotheses = (1 + most_detections) * (HYPOTHESIS.itemsize + 8 * n) + 2 * 8 * n * n
    return hypotheses + 8 * (2 + n + n * n)


def capacity_unreduced(scans: Scans, n: int, most_bytes: float = 2e9) -> int:
    """Components that the largest trial needs, once it is known that there is room for them.

    n           size of the state
    raises      ValueError naming the trial that needs more than most_bytes
    """
    components = components_unreduced(scans)
    trial = int(np.argmax(components))
    most = math.floor(most_bytes / bytes_a_component(n, scans.most_detections))
    if components[trial] > most:
        first, end = scans.offsets[trial, [0, -1]]
        raise ValueError(
            f"trial {trial} would need {components[trial]:.3g} components unreduced, for "
            f"{end - first} detections in {scans.offsets.shape[1] - 1} scans, and {most:.3g} fit "
            f"into {most_bytes / 1e9:.3g} GB; take fewer scans or less clutter, or prune"
        )
    return int(components[trial])
