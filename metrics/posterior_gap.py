"""How far a posterior is from the exact one: what an approximation costs, apart from the data.

Between Gaussian mixtures, or between a grid's density and a mixture. All leading axes (trials and
scans) at once; NaN where either has no posterior.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike
from scipy.spatial.distance import cdist
from scipy.special import xlogy

from metrics.consistency import eliminate
from metrics.gaussian_mixtures import (
    BLOCK,
    LOG_TWO_PI,
    GaussianMixtures,
    draw,
    gaussian_mixtures,
    log_density,
    log_sum,
    log_weights,
)
from metrics.present import FloatArray


def normalised_squared_error(first: GaussianMixtures, second: GaussianMixtures) -> FloatArray:
    """Integrated squared error of two mixtures over the sum of their own integrated squares.

        integral (p - q)² / (integral p² + integral q²)
            = 1 - 2 integral p q / (integral p² + integral q²)

    0 if they are equal, 1 if they do not overlap (p and q are not negative, so it is never more);
    no unit. Values below 1e-13 are rounding.

    returns     (...); numbers of components may differ
    raises      ValueError: shapes disagree
    source      closed form: Williams & Maybeck, Fusion 2003; normalisation: D'Ortenzio & Manes,
                Consistency issues in Gaussian mixture models reduction algorithms (2021), both
                from memory
    """
    return gap_of_overlaps(
        log_overlap(first, first), log_overlap(second, second), log_overlap(first, second)
    )


def gap_of_overlaps(own_first: ArrayLike, own_second: ArrayLike, shared: ArrayLike) -> FloatArray:
    """`normalised_squared_error` from ln integral p², ln integral q² and ln integral p q, (...).

    So that the reference's own, the dearest of the three, is computed once for all strategies.
    """
    with np.errstate(over="ignore"):  # they do not overlap: 1
        own = np.exp(np.subtract(own_first, shared)) + np.exp(np.subtract(own_second, shared))
    return np.maximum(0.0, 1 - 2 / own)


def log_overlap(first: GaussianMixtures, second: GaussianMixtures) -> FloatArray:
    """ln integral p q = ln sum_ij w_i v_j N(mu_i; nu_j, P_i + Q_j), never leaving the range.

    Costs C D pairs for mixtures of C and D components, some 50 ns each in the plane and 150 ns
    with four states; less with kernels that share their covariance.

    returns     (...)
    raises      ValueError: shapes disagree
    """
    _check_alike(first, second)
    if _shares_covariance(second):
        return _overlap_with_kernels(first, second)
    if _shares_covariance(first):
        return _overlap_with_kernels(second, first)
    n, components, others = first.means.shape[-1], first.weights.shape[-1], second.weights.shape[-1]
    # Rows: the components in use of all first mixtures, each against all of its second mixture.
    rows = np.flatnonzero(first.weights)
    own, means = log_weights(first).reshape(-1)[rows], first.means.reshape(-1, n)[rows]
    covariances = first.covariances.reshape(-1, n, n)[rows]
    other_weights = log_weights(second).reshape(-1, others)
    other_means = second.means.reshape(-1, others, n)
    other_covariances = second.covariances.reshape(-1, others, n, n)
    terms = np.full(first.weights.size, -np.inf)
    at_once = max(1, BLOCK // others)
    for start in range(0, len(rows), at_once):
        block = slice(start, start + at_once)
        mixture = rows[block] // components
        density = _log_gaussian(
            means[block, None] - other_means[mixture],
            covariances[block, None] + other_covariances[mixture],
        )
        terms[rows[block]] = own[block] + log_sum(density + other_weights[mixture], axis=-1)
    overlap = log_sum(terms.reshape(first.weights.shape), axis=-1)
    return overlap * first.exist * second.exist


def _shares_covariance(mixtures: GaussianMixtures) -> bool:
    """Whether the components of a mixture are one and the same kernel, as `kernel_mixtures` are."""
    return mixtures.covariances.strides[-3] == 0 and mixtures.weights.shape[-1] > 1


def _overlap_with_kernels(mixtures: GaussianMixtures, kernels: GaussianMixtures) -> FloatArray:
    """`log_overlap` where all Q_j of the second are the same: the first, widened, at its means."""
    if _shares_covariance(mixtures):
        return _overlap_of_kernels(mixtures, kernels)
    widened = gaussian_mixtures(
        mixtures.weights, mixtures.means, mixtures.covariances + kernels.covariances[..., :1, :, :]
    )
    at_means = log_density(widened, kernels.means) + log_weights(kernels)
    return log_sum(at_means, axis=-1) * kernels.exist


def _overlap_of_kernels(first: GaussianMixtures, second: GaussianMixtures) -> FloatArray:
    """`log_overlap` where all P_i are the same and all Q_j are: by distances after whitening."""
    overlap = np.full(first.weights.shape[:-1], np.nan)
    for place in map(tuple, np.argwhere(~np.isnan(first.exist * second.exist))):
        p, q = first.at(place), second.at(place)
        root = np.linalg.cholesky(p.covariances[0] + q.covariances[0])
        ours, others = (np.linalg.solve(root, m.means.T).T for m in (p, q))
        squares = cdist(ours, others, "sqeuclidean")
        terms = log_weights(p)[:, np.newaxis] + log_weights(q) - 0.5 * squares
        height = np.log(np.diagonal(root)).sum() + len(root) / 2 * LOG_TWO_PI
        overlap[place] = log_sum(terms.ravel(), axis=0) - height
    return overlap[()]


def _check_alike(first: GaussianMixtures, second: GaussianMixtures) -> None:
    ours, others = first.means.shape, second.means.shape
    if (ours[:-2], ours[-1]) != (others[:-2], others[-1]):
        raise ValueError(
            "mixtures must agree in all but the number of components, "
            f"got means {ours} and {others}"
        )


def _log_gaussian(difference: FloatArray, covariance: FloatArray) -> FloatArray:
    """ln N(d; 0, C) (...) of d (..., n) and C (..., n, n)."""
    total = np.full(difference.shape[:-1], difference.shape[-1] * LOG_TWO_PI)
    for pivot, rest in eliminate(difference, covariance):
        total += np.log(pivot) + rest**2 / pivot
    return -0.5 * total


class Divergence(NamedTuple):
    """A Kullback-Leibler divergence estimated from draws."""

    estimate: FloatArray  # (...) nats; small ones may come out below 0
    standard_error: FloatArray  # (...) of the draws


class ReferenceDraws(NamedTuple):
    """Draws of a batch of reference mixtures, to be compared with many others."""

    points: FloatArray  # (..., draws, n), NaN where there is no posterior
    log_density: FloatArray  # (..., draws) of the reference there


def reference_draws(
    reference: GaussianMixtures, draws: int, rng: np.random.Generator
) -> ReferenceDraws:
    """Draw from each mixture, one after the other.

    draws       at least 2 for each mixture
    raises      ValueError: fewer draws
    """
    if draws < 2:
        raise ValueError(f"draws must be at least 2, got {draws}")
    exist = ~np.isnan(reference.exist)
    points = np.full((*exist.shape, draws, reference.means.shape[-1]), np.nan)
    for place in map(tuple, np.argwhere(exist)):
        points[place] = draw(reference.at(place), draws, rng)
    return ReferenceDraws(points, log_density(reference, points))


def divergence_at(drawn: ReferenceDraws, other: GaussianMixtures) -> Divergence:
    """`kullback_leibler` of the mixtures that were drawn from and others, from those very draws.

    raises      ValueError: shapes disagree
    """
    points, at_reference = drawn
    if (*points.shape[:-2], points.shape[-1]) != (
        *other.weights.shape[:-1],
        other.means.shape[-1],
    ):
        raise ValueError(
            f"mixtures must agree in all but the number of components, got draws {points.shape} "
            f"and means {other.means.shape}"
        )
    ratios = at_reference - log_density(other, points)
    return Divergence(
        np.asarray(ratios.mean(axis=-1))[()],
        np.asarray(ratios.std(axis=-1, ddof=1) / np.sqrt(ratios.shape[-1]))[()],
    )


def kullback_leibler(
    reference: GaussianMixtures, other: GaussianMixtures, draws: int, rng: np.random.Generator
) -> Divergence:
    """Integral of p ln(p / q), the mean of ln p(X) - ln q(X) over draws X of the reference p.

    If p is right, q's log score of the truth is worse by so many nats on average. Where q is much
    narrower than p, rare draws carry the mean, and the standard error is too small itself.

    draws       at least 2 for each reference mixture, which draw one after the other
    raises      ValueError: shapes disagree, or fewer draws
    source      Hershey & Olsen, ICASSP 2007, Monte Carlo sampling (from memory)
    """
    return divergence_at(reference_draws(reference, draws, rng), other)


def grid_squared_error(
    points: ArrayLike, cell: float, density: ArrayLike, mixture: GaussianMixtures
) -> float:
    """`normalised_squared_error` of a density on a grid and one mixture, by the midpoint rule.

    points      (K, n) centres of the cells; outside the grid its density is 0
    cell        volume of a cell
    density     (K,)
    raises      ValueError: shapes disagree
    """
    density = np.asarray(density, float)
    at_points = np.exp(log_density(mixture, points))
    with np.errstate(divide="ignore"):
        own, shared = np.log([cell * density @ density, cell * density @ at_points])
    return float(gap_of_overlaps(own, log_overlap(mixture, mixture), shared))


def grid_kullback_leibler(
    points: ArrayLike, cell: float, density: ArrayLike, mixture: GaussianMixtures
) -> float:
    """Integral of p ln(p / q), p on a grid and q one mixture, by the midpoint rule; in nats.

    Arguments and errors as `grid_squared_error`.
    """
    density = np.asarray(density, float)
    terms = xlogy(density, density) - density * log_density(mixture, points)
    return float(cell * np.sum(terms))
