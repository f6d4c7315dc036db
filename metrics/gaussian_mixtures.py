"""Gaussian mixtures as metrics take them: plain arrays, any number of leading axes at once.

A posterior of each trial and scan is weights (trials, scans, C), means (trials, scans, C, n) and
covariances (trials, scans, C, n, n). Components of weight 0 are not in use, and their numbers are
never read; a scan whose weights are all 0 has no posterior, and what is said of it is NaN.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import ndtr

from metrics.present import BoolArray, FloatArray

LOG_TWO_PI = np.log(2 * np.pi)
# Most entries of one intermediate array: several of them fit into a processor's cache.
BLOCK = 1 << 15


class GaussianMixtures(NamedTuple):
    """A batch of mixtures, as `gaussian_mixtures` checks and completes them."""

    weights: FloatArray  # (..., C), summing to one, or all 0 where there is no posterior
    means: FloatArray  # (..., C, n)
    covariances: FloatArray  # (..., C, n, n)
    roots: FloatArray  # (..., C, n, n) lower triangular L of covariance L L'

    def at(self, index: tuple[int, ...]) -> "GaussianMixtures":
        """One mixture of the batch."""
        return GaussianMixtures(*(part[index] for part in self))

    @property
    def exist(self) -> FloatArray:
        """(...) 1 where there is a posterior and NaN elsewhere, to multiply results by."""
        return np.where(self.weights.any(axis=-1), 1.0, np.nan)


def gaussian_mixtures(
    weights: ArrayLike, means: ArrayLike, covariances: ArrayLike
) -> GaussianMixtures:
    """Check a batch of mixtures.

    weights      (..., C), not negative; they sum to one, or to 0 where there is no posterior
    means        (..., C, n), covariances (..., C, n, n), of which the lower triangle is read
    raises       ValueError: shapes disagree, weights are not as above, or a component in use is
                 not finite or its covariance not positive definite
    """
    weights, means, covariances = (np.asarray(a, float) for a in (weights, means, covariances))
    n = means.shape[-1] if means.ndim else 0
    if (
        n == 0
        or weights.shape[-1:] == (0,)
        or means.shape != (*weights.shape, n)
        or covariances.shape != (*weights.shape, n, n)
    ):
        raise ValueError(
            "shapes must be (..., C), (..., C, n) and (..., C, n, n) with C and n ≥ 1, "
            f"got {weights.shape}, {means.shape} and {covariances.shape}"
        )
    finite = np.isfinite(means).all(axis=-1) & np.isfinite(covariances).all(axis=(-2, -1))
    weights = checked_weights(weights, finite)
    used = weights > 0
    means = np.where(used[..., None], means, 0.0)
    covariances = np.where(used[..., None, None], covariances, np.eye(n))
    roots = lower_roots(covariances, "the component", "give weight 0 to one not in use")
    return GaussianMixtures(weights, means, covariances, roots)


def checked_weights(weights: FloatArray, finite: BoolArray) -> FloatArray:
    """Weights (..., C) that sum to one exactly, or to 0; `finite` tells of what they belong to.

    raises      ValueError: a weight is negative, they sum to something else, or belong to
                something not finite
    """
    total = weights.sum(axis=-1)
    sound = (weights >= 0).all(axis=-1) & ((np.abs(total - 1) < 1e-6) | (total == 0))
    if not np.all(sound):
        raise ValueError(
            f"the weights at {_first(~sound)} must not be negative and sum to one, or to 0 where "
            "there is no posterior"
        )
    bad = (weights > 0) & ~finite
    if np.any(bad):
        raise ValueError(
            f"what has the weight at {_first(bad)} is not finite; give weight 0 to what is not in "
            "use, and leave failed trials out"
        )
    return weights / np.where(total > 0, total, 1.0)[..., None]


def lower_roots(covariances: FloatArray, what: str, remedy: str) -> FloatArray:
    """Lower triangular L of each covariance L L'.

    raises      ValueError: a covariance is not positive definite, with what it belongs to
    """
    try:
        return np.asarray(np.linalg.cholesky(covariances), np.float64)
    except np.linalg.LinAlgError:  # does not say which
        bad = ~(np.linalg.eigvalsh(covariances)[..., 0] > 0)
        place = _first(bad) if np.any(bad) else "some place"  # singular to rounding
        raise ValueError(
            f"the covariance of {what} at {place} is not positive definite; {remedy}, and leave "
            "failed trials out"
        ) from None


def _first(bad: BoolArray) -> tuple[int, ...]:
    return tuple(int(i) for i in np.argwhere(bad)[0])


def marginal(mixtures: GaussianMixtures, coordinates: slice) -> GaussianMixtures:
    """The mixtures of some coordinates alone, such as the position: slice(axes)."""
    means = mixtures.means[..., coordinates]
    covariances = mixtures.covariances[..., coordinates, coordinates]
    roots = lower_roots(covariances, "the component", "give weight 0 to one not in use")
    return GaussianMixtures(mixtures.weights, means, covariances, roots)


def log_weights(mixtures: GaussianMixtures) -> FloatArray:
    """Logarithms of the weights, (..., C); minus infinity for a component not in use."""
    with np.errstate(divide="ignore"):
        return np.log(mixtures.weights)


def log_sum(terms: FloatArray, axis: int) -> FloatArray:
    """Logarithm of the sum of exp(terms) along an axis; all may be minus infinity."""
    highest = terms.max(axis=axis, keepdims=True)
    shift = np.where(np.isfinite(highest), highest, 0.0)
    with np.errstate(divide="ignore"):
        return np.log(np.exp(terms - shift).sum(axis=axis)) + np.squeeze(shift, axis)


def log_density(mixtures: GaussianMixtures, points: ArrayLike) -> FloatArray:
    """ln sum w_i N(x; mu_i, P_i), never leaving the range of numbers.

    points      (..., M, n), the leading axes those of the mixtures
    returns     (..., M), NaN where there is no posterior
    raises      ValueError: shapes disagree
    """
    points = np.asarray(points, float)
    weights, means, _, roots = mixtures
    if points.ndim < 2 or (*points.shape[:-2], points.shape[-1]) != (
        *weights.shape[:-1],
        means.shape[-1],
    ):
        raise ValueError(
            f"points must be (..., M, n) for mixtures with means (..., C, n), "
            f"got {points.shape} and {means.shape}"
        )
    n = means.shape[-1]
    half_log_determinant = np.log(np.diagonal(roots, axis1=-2, axis2=-1)).sum(axis=-1)
    heights = log_weights(mixtures) - half_log_determinant - n / 2 * LOG_TWO_PI  # (..., C)
    density = np.empty(points.shape[:-1])
    at_once = max(1, BLOCK // max(1, weights.size))
    for start in range(0, points.shape[-2], at_once):
        block = slice(start, start + at_once)
        squares = _squared_distances(mixtures, points[..., block, :])
        density[..., block] = log_sum(heights[..., None] - 0.5 * squares, axis=-2)
    return density * mixtures.exist[..., None]


def _squared_distances(mixtures: GaussianMixtures, points: FloatArray) -> FloatArray:
    """(x - mu_i)' P_i⁻¹ (x - mu_i), (..., C, M), by forward substitution in L y = x - mu."""
    means, roots = mixtures.means[..., None], mixtures.roots[..., None]
    total = np.zeros((*mixtures.weights.shape, points.shape[-2]))
    solved: list[FloatArray] = []
    for row in range(points.shape[-1]):
        rest = points[..., None, :, row] - means[..., row, :]
        for column, value in enumerate(solved):
            rest -= roots[..., row, column, :] * value
        rest /= roots[..., row, row, :]
        total += rest**2
        solved.append(rest)
    return total


def distribution(mixtures: GaussianMixtures, point: ArrayLike) -> FloatArray:
    """Probability of a value below the point's, for each coordinate by itself.

    point       (..., n)
    returns     (..., n) sum w_i Phi((x - mu_i) / sd_i); NaN where there is no posterior
    raises      ValueError: shapes disagree
    """
    point = np.asarray(point, float)
    if point.shape != (*mixtures.means.shape[:-2], mixtures.means.shape[-1]):
        raise ValueError(
            f"the point must be (..., n) for mixtures with means (..., C, n), "
            f"got {point.shape} and {mixtures.means.shape}"
        )
    spread = np.sqrt(np.diagonal(mixtures.covariances, axis1=-2, axis2=-1))
    below = ndtr((point[..., None, :] - mixtures.means) / spread)
    return np.einsum("...c,...ci->...i", mixtures.weights, below) * mixtures.exist[..., None]


def draw(mixture: GaussianMixtures, count: int, rng: np.random.Generator) -> FloatArray:
    """Independent draws (count, n) of one mixture; components not in use change none of them."""
    weights, means, _, roots = mixture
    which = rng.choice(len(weights), count, p=weights)
    normals = rng.standard_normal((count, means.shape[-1]))
    return means[which] + np.einsum("kij,kj->ki", roots[which], normals)
