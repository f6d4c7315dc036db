"""Calls model functions as kernels do: compiled, through their pointers."""

from typing import NamedTuple

import numpy as np
from numba import njit


class _Scalar(NamedTuple):
    function: object
    parameters: np.ndarray


@njit(error_model="numpy")
def _fill(model, site, points, out):
    for i in range(points.shape[0]):
        out[i] = model.function(model.parameters, site, points[i])


def values_at(model, site, points):
    """Probabilities of a detection model, or intensities of a clutter model, at some points."""
    points = np.ascontiguousarray(points, float)
    out = np.empty(len(points))
    _fill(_Scalar(model[0], model.parameters), np.asarray(site, float), points, out)
    return out
