"""How large a mixture grows when nothing is pruned or merged: exact, and for short scenes only."""

from __future__ import annotations

import math

import numpy as np

from filters.hypotheses import HYPOTHESIS
from filters.track import Scans

MOST_BYTES = 2e9


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


def components_recorded(scans: Scans) -> float:
    """Components of all scans and trials together without gate or reduction."""
    with np.errstate(over="ignore"):
        return float(np.cumprod(1.0 + np.diff(scans.offsets, axis=1), axis=1).sum())


def most_components(n: int, most_detections: int) -> int:
    """Components for which there is room."""
    return math.floor(MOST_BYTES / bytes_a_component(n, most_detections))


def capacity_unreduced(scans: Scans, n: int, first_trial: int = 0) -> int:
    """Components that the largest trial needs, once it is known that there is room for them.

    n           size of the state
    first_trial number of the batch's first trial
    raises      ValueError naming the trial that needs more than 2 GB
    """
    components = components_unreduced(scans)
    trial = int(np.argmax(components))
    most = most_components(n, scans.most_detections)
    if components[trial] > most:
        first, end = scans.offsets[trial, [0, -1]]
        raise ValueError(
            f"trial {first_trial + trial} would need {components[trial]:.3g} components unreduced, "
            f"for {end - first} detections in {scans.offsets.shape[1] - 1} scans, and {most:.3g} "
            f"fit into {MOST_BYTES / 1e9:.3g} GB; take fewer scans or less clutter, "
            "or a gaussian-mixture"
        )
    return int(components[trial])
