"""Densities at the points of a regular grid, and where the points are to be."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from scipy.special import ndtri


class Resolution(NamedTuple):
    """How fine and how wide a grid is."""

    # Grid steps in a standard deviation of the narrowest density that the scans allow, along an
    # axis with the others held.
    steps_per_sd: float = 2.5
    # Mass that may be cut off at a scan.
    tail: float = 1e-12
    # Most points of a grid; a million takes some 200 MB.
    most_points: int = 2_000_000

    def check(self) -> None:
        """Raise ValueError unless the numbers make sense."""
        if not self.steps_per_sd >= 1.0:
            raise ValueError(f"steps_per_sd must be at least 1, got {self.steps_per_sd}")
        if not 0.0 < self.tail < 0.01:
            raise ValueError(f"tail must lie between 0 and 0.01, got {self.tail}")

    def margin(self, covariances: np.ndarray) -> np.ndarray:
        """Half widths (..., n) of boxes that hold all but the tail of Gaussians (..., n, n)."""
        n = covariances.shape[-1]
        spread = np.sqrt(np.diagonal(covariances, axis1=-2, axis2=-1))
        return -float(ndtri(self.tail / (2 * n))) * spread


class Lattice(NamedTuple):
    """Places of the grid points: first + step * (i, j, ...)."""

    first: np.ndarray  # (n,)
    step: np.ndarray  # (n,)
    counts: tuple[int, ...]  # along each of the n axes

    def axis(self, d: int) -> np.ndarray:
        """Coordinates along one axis of the state, (counts[d],)."""
        return self.first[d] + self.step[d] * np.arange(self.counts[d])

    def states(self) -> np.ndarray:
        """All grid points (K, n), the last axis running fastest."""
        axes = np.meshgrid(*map(self.axis, range(len(self.counts))), indexing="ij")
        return np.stack([axis.ravel() for axis in axes], axis=-1)

    @property
    def cell(self) -> float:
        """Volume that belongs to a point."""
        return float(np.prod(self.step))


class GridDensity(NamedTuple):
    """A density at the points of a lattice."""

    lattice: Lattice
    values: np.ndarray  # (counts), per SI unit of the state


def cover(box: np.ndarray, step: np.ndarray, most_points: int) -> Lattice:
    """Cover a box (2, n), lowest and highest coordinates, by points `step` (n,) apart.

    raises      ValueError: that takes more than most_points
    """
    counts = np.ceil((box[1] - box[0]) / step) + 1
    if not np.prod(counts) <= most_points:
        shape = " x ".join(f"{count:.3g}" for count in counts)
        raise ValueError(
            f"the point-mass grid would need {shape} points, more than most_points = "
            f"{most_points:.3g}; allow more, take a lower steps_per_sd, or a tighter prior"
        )
    middle = box.mean(axis=0)
    return Lattice(middle - step * (counts - 1) / 2, step, tuple(int(count) for count in counts))


def points_that_hold(values: np.ndarray, tail: float) -> np.ndarray:
    """Mark the highest points, which together hold all but `tail` of the mass; bool."""
    ordered = np.sort(values, axis=None)
    mass = np.cumsum(ordered)
    dropped = int(np.searchsorted(mass, tail * mass[-1], side="right"))
    return values >= ordered[dropped]


def cut(grid: GridDensity, tail: float) -> GridDensity:
    """Cut a grid to the box of the points that hold all but `tail` of its mass.

    returns     a density that integrates to one
    """
    kept = np.nonzero(points_that_hold(grid.values, tail))
    low, high = np.array([(index.min(), index.max() + 1) for index in kept]).T
    box = tuple(slice(*ends) for ends in zip(low, high, strict=True))
    lattice = Lattice(
        grid.lattice.first + low * grid.lattice.step,
        grid.lattice.step,
        tuple(int(count) for count in high - low),
    )
    values = grid.values[box]
    return GridDensity(lattice, values / (lattice.cell * values.sum()))


def moments(grid: GridDensity) -> tuple[np.ndarray, np.ndarray]:
    """Mean (n,) and covariance (n, n) of a density; it need not integrate to one."""
    mass = grid.values.ravel() / grid.values.sum()
    states = grid.lattice.states() - grid.lattice.first
    mean = mass @ states
    offsets = states - mean
    return mean + grid.lattice.first, (offsets.T * mass) @ offsets


def edge_of_spectrum(grid: GridDensity) -> float:
    """Largest modulus of the characteristic function at the highest wave along any axis.

    What a grid does not resolve lies beyond it. 1 for a single spike, 0 for a smooth density.
    """
    edges = []
    for d in range(grid.values.ndim):
        signs = (-1.0) ** np.arange(grid.values.shape[d])
        across = np.atleast_1d(np.tensordot(signs, grid.values, axes=(0, d)))
        edges.append(np.abs(np.fft.fft(across)).max())
    return float(max(edges) / grid.values.sum())
