"""A weighted cloud of samples as a density: a Gaussian kernel on every sample."""

import numpy as np
from numpy.typing import ArrayLike

from metrics.gaussian_mixtures import GaussianMixtures, checked_weights, lower_roots


def kernel_mixtures(weights: ArrayLike, samples: ArrayLike) -> GaussianMixtures:
    """Clouds of weighted samples as Gaussian mixtures with the clouds' own means and covariances.

    Kernels have the covariance h² S, with S the weighted covariance of the cloud and Silverman's
    h = (4 / ((n + 2) N))^(1 / (n + 4)), N = 1 / sum of squared weights, at most 1. Their centres
    are drawn towards the cloud's mean m, to m + sqrt(1 - h²) (x_i - m): else the mixture would be
    wider than the cloud, by h² S.

    Bias: right in shape only for a Gaussian cloud. Where the posterior has several modes or sharp
    edges, they are blurred by h standard deviations of the whole cloud, so that it seems too wide.
    Of 1,000 independent samples in the plane (h = 0.32), regions of 50 and 90 % cover 51 and 90 %
    for a Gaussian, 59 and 94 % for two modes six of their standard deviations apart (simulated;
    4,000 samples change little). Samples that descend from few ancestors are worth less than N.

    weights     (..., P), not negative; they sum to one, or to 0 where there is no posterior
    samples     (..., P, n); what stands beside a weight of 0 is not read
    raises      ValueError: shapes disagree, weights are not as above, a sample with weight is not
                finite, or a cloud has collapsed: its covariance is not positive definite
    source      Silverman (1986), eq. 4.14; centres: West, J. Royal Statistical Society B 55 (1993)
    """
    weights, samples = np.asarray(weights, float), np.asarray(samples, float)
    if samples.ndim < 2 or 0 in samples.shape[-2:] or samples.shape[:-1] != weights.shape:
        raise ValueError(
            "weights must be (..., P) and samples (..., P, n) with P and n ≥ 1, "
            f"got {weights.shape} and {samples.shape}"
        )
    weights = checked_weights(weights, np.isfinite(samples).all(axis=-1))
    n = samples.shape[-1]
    mean = np.einsum("...p,...pi->...i", weights, np.where(weights[..., None] > 0, samples, 0.0))
    offsets = np.where(weights[..., None] > 0, samples - mean[..., None, :], 0.0)
    spread = np.einsum("...p,...pi,...pj->...ij", weights, offsets, offsets)
    spread = np.where(weights.sum(axis=-1)[..., None, None] > 0, spread, np.eye(n))

    squares = np.sum(weights**2, axis=-1)
    worth = 1 / np.where(squares > 0, squares, 1.0)
    width = np.minimum(1.0, (4 / ((n + 2) * worth)) ** (1 / (n + 4)))[..., None, None]
    roots = lower_roots(spread, "the cloud", "give a collapsed cloud the weights 0")

    def for_each(matrix: np.ndarray) -> np.ndarray:
        return np.broadcast_to(matrix[..., None, :, :], (*samples.shape, n))

    return GaussianMixtures(
        weights,
        mean[..., None, :] + np.sqrt(1 - width**2) * offsets,
        for_each(width**2 * spread),
        for_each(width * roots),
    )
