"""A density on a grid, moved on by a motion model: the prediction of the point-mass filter.

With a linear motion it is done on the characteristic function, where it is exact for any process
noise, singular or none:

    phi'(w) = exp(i w'(f(c) - F c)) phi(F' w) exp(-w' Q w / 2)

phi is that of the grid, within the band that its steps resolve; transforming back gives the density
on any other grid. Errors fall faster than any power of the step for a smooth density. Any other
motion is integrated point by point, which needs noise that is not singular.

Source: Šimandl, Královec and Söderström (2006), Automatica 42, Advanced point-mass method for
nonlinear state estimation, for prediction by Fourier transform (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import partial
from typing import NamedTuple

import numpy as np

from filters.lattice import GridDensity, Lattice, Resolution, cover, points_that_hold
from filters.models.contract import MotionModel
from filters.tabulate import move
from filters.track import Prior

# Below this share of its peak a predicted density is rounding of the Fourier sums.
_ROUNDING = 1e-14
# A whitened step of this length integrates a Gaussian to 1e-13 (2 exp(-2 pi² / step²)).
_RESOLVED_STEP = 0.8
# Entries of one intermediate array.
_BLOCK = 1 << 20


class Prediction(NamedTuple):
    """What is known of the state just before a scan."""

    density: Callable[[Lattice], np.ndarray]  # its values at the points of any lattice, (counts)
    box: np.ndarray  # (2, n) lowest and highest coordinates; all but the tail lies between
    mean: np.ndarray  # (n,) about where it is
    narrowest: np.ndarray  # (n, n) covariance of the narrowest density that the scans allow


def gaussian_prediction(prior: Prior, resolution: Resolution) -> Prediction:
    """Take the prior as it is.

    raises      ValueError: its covariance is not positive definite
    """
    try:
        root = np.linalg.cholesky(prior.covariance)
    except np.linalg.LinAlgError:
        raise ValueError(
            "the prior's covariance must be positive definite for a point-mass grid, got "
            f"{prior.covariance.tolist()}"
        ) from None

    def density(lattice: Lattice) -> np.ndarray:
        whitened = np.linalg.solve(root, (lattice.states() - prior.mean).T)
        peak = np.prod(np.diag(root)) * (2 * math.pi) ** (len(root) / 2)
        return (np.exp(-0.5 * np.sum(whitened**2, axis=0)) / peak).reshape(lattice.counts)

    margin = resolution.margin(prior.covariance)
    box = np.array([prior.mean - margin, prior.mean + margin])
    return Prediction(density, box, prior.mean, prior.covariance)


def moved_prediction(
    motion: MotionModel,
    interval: float,
    grid: GridDensity,
    mean: np.ndarray,
    narrowest: np.ndarray,
    resolution: Resolution,
) -> Prediction:
    """Move a density with this mean on over an interval in s.

    raises      ValueError: the noise is singular where it has to be integrated, or that takes too
                many points
    """
    moved = move(motion, interval, grid.lattice.states())
    kept = points_that_hold(grid.values, resolution.tail).ravel()
    half_cell = np.abs(moved.jacobian[kept]) @ grid.lattice.step / 2
    margin = resolution.margin(moved.noise[kept]) + half_cell
    states = moved.states[kept]
    box = np.array([(states - margin).min(axis=0), (states + margin).max(axis=0)])

    at_mean = move(motion, interval, mean[np.newaxis])
    F, Q = at_mean.jacobian[0], at_mean.noise[0]
    density: Callable[[Lattice], np.ndarray]
    if motion.linear and np.array_equal(F, np.triu(F)):
        density = partial(_by_characteristic_function, grid, mean, at_mean.states[0], F, Q)
    else:
        fine = _refined(grid, motion, interval, resolution.most_points)
        density = partial(_by_quadrature, fine, motion, interval)
    return Prediction(density, box, at_mean.states[0], F @ narrowest @ F.T + Q)


def _by_characteristic_function(
    grid: GridDensity,
    place: np.ndarray,
    place_moved: np.ndarray,
    F: np.ndarray,
    Q: np.ndarray,
    to: Lattice,
) -> np.ndarray:
    """The density of F (x - place) + place_moved + noise of covariance Q; F upper triangular."""
    from_axes = [grid.lattice.axis(d) - place[d] for d in range(len(F))]
    to_axes = [to.axis(d) - place_moved[d] for d in range(len(F))]
    scale = grid.lattice.cell / (np.prod(to.counts) * to.cell)
    band = math.pi / grid.lattice.step  # what the old grid resolves
    # The new grid repeats with the period of its length. A real density needs half the waves of the
    # first axis: all but the zeroth count twice.
    half = [
        2 * math.pi / (count * step) * np.arange((count - 1) // 2 + 1)
        for count, step in zip(to.counts, to.step, strict=True)
    ]
    u = half[0]
    twice = np.where(u > 0, 2.0, 1.0)
    back = np.exp(-1j * np.outer(to_axes[0], u)) * twice
    if len(F) == 1:
        spectrum = np.exp(1j * np.outer(F[0, 0] * u, from_axes[0])) @ grid.values
        spectrum *= np.exp(-0.5 * Q[0, 0] * u**2) * (np.abs(F[0, 0] * u) <= band[0])
        density = scale * np.real(back @ spectrum)
    else:
        u, v = u[:, np.newaxis], np.concatenate([-half[1][:0:-1], half[1]])
        half_way = np.exp(1j * F[0, 0] * u * from_axes[0]) @ grid.values  # (u, old second axis)
        half_way *= np.exp(1j * F[0, 1] * u * from_axes[1])
        spectrum = half_way @ np.exp(1j * F[1, 1] * np.outer(from_axes[1], v))
        spectrum *= np.exp(-0.5 * (Q[0, 0] * u**2 + 2 * Q[0, 1] * u * v + Q[1, 1] * v**2))
        spectrum *= np.abs(F[0, 0] * u) <= band[0]
        spectrum *= np.abs(F[0, 1] * u + F[1, 1] * v) <= band[1]
        density = scale * np.real(back @ spectrum @ np.exp(-1j * np.outer(v, to_axes[1])))
    density[density < _ROUNDING * density.max()] = 0.0
    return density


def _refined(
    grid: GridDensity, motion: MotionModel, interval: float, most_points: int
) -> GridDensity:
    """The same density on a lattice fine enough for an integral over the process noise."""
    lattice = grid.lattice
    n = len(lattice.counts)
    moved = move(motion, interval, lattice.states())
    whiteners = _whiteners(moved.noise)
    whitened = whiteners @ moved.jacobian * lattice.step  # of a step along each axis, (K, n, n)
    longest = np.sqrt(np.sum(whitened**2, axis=1))[grid.values.ravel() > 0].max(axis=0)
    factor = np.maximum(1.0, np.ceil(longest / _RESOLVED_STEP))
    box = np.array([[axis[0], axis[-1]] for axis in map(lattice.axis, range(n))]).T
    fine = cover(box, lattice.step / factor, most_points)
    same, still = np.eye(n), np.zeros((n, n))
    values = _by_characteristic_function(grid, lattice.first, lattice.first, same, still, fine)
    return GridDensity(fine, values)


def _whiteners(noise: np.ndarray) -> np.ndarray:
    """Inverse lower roots (K, n, n) of covariances that must not be singular."""
    spread = np.sqrt(np.diagonal(noise, axis1=1, axis2=2))
    with np.errstate(divide="ignore", invalid="ignore"):
        correlation = noise / spread[:, :, None] / spread[:, None, :]
    if not np.all(np.linalg.det(correlation) > 1e-12):  # NaN where a variance is 0
        raise ValueError(
            "the process noise is singular and the motion is not linear with an upper "
            "triangular transition, which the point-mass filter cannot integrate; give every "
            "number of the state noise of its own"
        )
    return np.linalg.inv(np.linalg.cholesky(noise))


def _by_quadrature(
    grid: GridDensity, motion: MotionModel, interval: float, to: Lattice
) -> np.ndarray:
    """Sum of p(x) N(x'; f(x), Q(x)) over the points x of the grid, at every point x' of `to`."""
    n = len(to.counts)
    held = grid.values.ravel() > 0
    moved = move(motion, interval, grid.lattice.states()[held])
    whiteners = np.linalg.inv(np.linalg.cholesky(moved.noise))
    heights = np.prod(np.diagonal(whiteners, axis1=1, axis2=2), axis=1) / (2 * math.pi) ** (n / 2)
    masses = grid.lattice.cell * grid.values.ravel()[held] * heights
    centres = np.einsum("kij,kj->ik", whiteners, moved.states)
    states = to.states()
    density = np.empty(len(states))
    at_once = max(1, _BLOCK // len(masses))
    for start in range(0, len(states), at_once):
        block = slice(start, start + at_once)
        exponent = np.zeros((len(states[block]), len(masses)))
        for row in range(n):
            offset = states[block] @ whiteners[:, row].T - centres[row]
            exponent -= 0.5 * offset**2
        density[block] = np.exp(exponent) @ masses
    return density.reshape(to.counts)
