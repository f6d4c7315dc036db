"""Calls a reduction as the filter does, compiled, on a table of hypotheses written by hand."""

from typing import NamedTuple

import numpy as np
from numba import njit

from filters.hypotheses import HYPOTHESIS, Hypotheses
from filters.mixture import room_for_mixture
from filters.records import zeroed_records


class Row(NamedTuple):
    weight: float
    mean: np.ndarray  # (n,)
    covariance: np.ndarray  # (n, n)
    mode: int = 0
    parent: int = 0
    detection: int = 0


class Left(NamedTuple):
    components: list  # of (weight, mean, covariance), as the reduction ordered them
    modes: np.ndarray
    histories: np.ndarray  # (components, depth)
    table: np.ndarray  # as the reduction left it


@njit(error_model="numpy")
def _call(reduce, hypotheses, rows, settings, mixture):
    return reduce(hypotheses, rows, -1, settings, mixture)


def random_rows(rng, count, n=2, modes=1, parents=1):
    """Rows with weights over three decades, some close together and some far apart."""
    weights = 10.0 ** rng.uniform(-3, 0, count)
    roots = rng.normal(size=(count, n, n)) * 10.0 ** rng.uniform(-0.7, 0.7, (count, 1, 1))
    return [
        Row(
            weight / weights.sum(),
            rng.normal(size=n) * rng.choice([0.3, 5.0]),
            root @ root.T + 0.05 * np.eye(n),
            int(rng.integers(modes)),
            int(rng.integers(parents)),
            int(rng.integers(-1, 3)),
        )
        for weight, root in zip(weights, roots, strict=True)
    ]


def reduce_rows(reduction, rows, histories=None):
    """What a reduction leaves of some rows, of parents with histories (parents, depth)."""
    n, depth = len(rows[0].mean), reduction.depth
    histories = np.zeros((1, depth), np.int64) if histories is None else np.asarray(histories)
    table = zeroed_records(len(rows), HYPOTHESIS)
    for name in ("weight", "mode", "parent", "detection"):
        table[name] = [getattr(row, name) for row in rows]
    table["covariance"] = np.arange(len(rows))
    hypotheses = Hypotheses(
        table,
        np.array([row.mean for row in rows], float),
        np.array([row.covariance for row in rows], float),
        np.empty((len(rows), depth), np.int64),
        np.empty((reduction.slots, n + 2, n)),
    )
    mixture = room_for_mixture(n, max(reduction.capacity, len(histories)), depth)
    mixture.histories[: len(histories)] = histories
    count = _call(reduction.compiled(n), hypotheses, len(rows), reduction.settings, mixture)
    assert 1 <= count <= reduction.capacity
    np.testing.assert_allclose(mixture.weights[:count].sum(), 1.0, rtol=1e-14)
    return Left(
        list(zip(*(part[:count] for part in mixture[:3]), strict=True)),
        mixture.modes[:count],
        mixture.histories[:count],
        table,
    )
