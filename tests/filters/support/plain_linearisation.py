"""Linear regression of a measurement over a Gaussian, in plain NumPy, from the formulas.

`integrals` come from a rule of the test's own: points, and weights for expected values.
"""

import itertools
import math
from typing import NamedTuple

import numpy as np


class Regression(NamedTuple):
    """Expected measurement, its covariance without noise, and cov(x, z)."""

    expected: np.ndarray  # (m,)
    spread: np.ndarray  # (m, m)
    cross: np.ndarray  # (n, m)


def wrapped(differences, periods):
    """Angles the short way round, by their sine and cosine."""
    out = np.array(differences, float)
    angles = np.broadcast_to(np.asarray(periods) > 0, out.shape)
    out[angles] = np.arctan2(np.sin(out[angles]), np.cos(out[angles]))
    return out


def grid(axes, half_width=9.0, points=241):
    """Trapezoidal rule for the standard normal: exact to rounding where integrands are smooth."""
    along = np.linspace(-half_width, half_width, points)
    shares = np.exp(-0.5 * along**2)
    shares /= shares.sum()
    places = np.stack(np.meshgrid(*[along] * axes, indexing="ij"), axis=-1).reshape(-1, axes)
    weights = np.ones(1)
    for _ in range(axes):
        weights = np.outer(weights, shares).ravel()
    return places, weights


def hermite(axes, order):
    """Gauss-Hermite points by SciPy's physicists' rule would do as well; here NumPy's."""
    along, shares = np.polynomial.hermite.hermgauss(order)
    places = math.sqrt(2) * np.array(list(itertools.product(along, repeat=axes)))
    weights = np.prod(list(itertools.product(shares / math.sqrt(math.pi), repeat=axes)), axis=1)
    return places, weights


def regression_over_leading(measure, mean, P, rule, periods):
    """Regress a measurement of the leading entries of the state; the others follow from theirs."""
    places, weights = rule
    used = places.shape[1]
    own = P[:used, :used]
    offsets = places @ np.linalg.cholesky(own).T
    found = regression(measure, mean[:used], offsets, weights, weights, periods)
    return found._replace(cross=P[:, :used] @ np.linalg.solve(own, found.cross))


def regression(measure, mean, offsets, mean_weights, weights, periods):
    """Regress over points mean + offsets (count, n)."""
    reference = measure(mean)
    measured = np.array([measure(state) for state in mean + offsets])
    measured = wrapped(measured - reference, periods)
    middle = mean_weights @ measured
    measured -= middle
    return Regression(
        reference + middle,
        np.einsum("i,ij,ik->jk", weights, measured, measured),
        np.einsum("i,ij,ik->jk", weights, offsets, measured),
    )


def updated(mean, P, found, R, z, periods):
    """Mean and covariance of the state given a detection, and the log of its density."""
    S = found.spread + R
    K = found.cross @ np.linalg.inv(S)
    innovation = wrapped(z - found.expected, periods)
    distance = innovation @ np.linalg.solve(S, innovation)
    log_density = -0.5 * (distance + np.linalg.slogdet(2 * np.pi * S)[1])
    return mean + K @ innovation, P - K @ S @ K.T, log_density
