import numpy as np
import pytest

from metrics.calibration import coverage, region_level
from metrics.gaussian_mixtures import log_density
from metrics.kernel_density import kernel_mixtures


def moments(weights, samples):
    mean = weights @ samples
    offsets = samples - mean
    return mean, (offsets.T * weights) @ offsets


def mixture_moments(mixture):
    mean, between = moments(mixture.weights, mixture.means)
    return mean, between + np.einsum("c,cij->ij", mixture.weights, mixture.covariances)


@pytest.mark.parametrize("n", [1, 2, 4])
def test_the_mixture_has_the_moments_of_the_cloud(n):
    rng = np.random.default_rng(n)
    weights = rng.random((3, 50))
    weights /= weights.sum(axis=1, keepdims=True)
    samples = rng.normal(size=(3, 50, n)) @ rng.normal(size=(n, n)) + 10.0
    mixtures = kernel_mixtures(weights, samples)
    for k in range(3):
        found, expected = mixture_moments(mixtures.at(k)), moments(weights[k], samples[k])
        np.testing.assert_allclose(found[0], expected[0], rtol=1e-10)
        np.testing.assert_allclose(found[1], expected[1], rtol=1e-9, atol=1e-12)


def test_the_kernels_width_is_silvermans():
    """Equal weights in the plane: h = N^(-1/6); on a line (4 / 3 N)^(1/5) = 1.06 N^(-1/5)."""
    rng = np.random.default_rng(1)
    for n, width in ((2, 64 ** (-1 / 6)), (1, (4 / 3 / 64) ** 0.2)):
        samples = rng.normal(size=(64, n))
        mixture = kernel_mixtures(np.full(64, 1 / 64), samples)
        spread = moments(np.full(64, 1 / 64), samples)[1]
        np.testing.assert_allclose(mixture.covariances[5], width**2 * spread, rtol=1e-10)
    # Weights on a quarter of the samples: they count as a quarter.
    weights = np.repeat([4 / 64, 0.0], [16, 48])
    few = kernel_mixtures(weights, samples)
    spread = moments(weights, samples)[1]
    np.testing.assert_allclose(few.covariances[0], (4 / 3 / 16) ** 0.4 * spread, rtol=1e-10)


def bimodal(rng, size):
    modes = np.where(rng.random(size) < 0.6, 3.0, -3.0)
    return rng.normal(size=(*size, 2)) + modes[..., None] * [1.0, 0.0]


@pytest.mark.parametrize(
    ("draw", "stated"),
    [
        (lambda rng, size: rng.normal(size=(*size, 2)), {0.5: 0.51, 0.9: 0.90}),
        (bimodal, {0.5: 0.59, 0.9: 0.94}),
    ],
    ids=["Gaussian", "two modes"],
)
def test_regions_of_a_cloud_cover_as_stated(draw, stated):
    """500 clouds of 1,000 samples and a truth beside each; 4.5 binomial standard errors and 0.01
    for the stated numbers, which were simulated themselves."""
    rng = np.random.default_rng(2)
    samples, truths = draw(rng, (500, 1000)), draw(rng, (500,))
    levels = region_level(kernel_mixtures(np.full((500, 1000), 1e-3), samples), truths, 49, rng)
    for of, share in stated.items():
        error = np.sqrt(share * (1 - share) / 500)
        assert abs(coverage(levels[:, None], of).estimate - share) < 4.5 * error + 0.01


def test_a_density_of_many_samples_comes_close_to_theirs():
    """10,000 of N(0, 1): within 3 % of the peak, as bias of order h² and noise of order 1 % say."""
    rng = np.random.default_rng(3)
    mixture = kernel_mixtures(np.full(10_000, 1e-4), rng.normal(size=(10_000, 1)))
    x = np.linspace(-3, 3, 13)[:, None]
    expected = np.exp(-(x[:, 0] ** 2) / 2) / np.sqrt(2 * np.pi)
    np.testing.assert_allclose(np.exp(log_density(mixture, x)), expected, atol=0.03 * 0.4)


def test_absent_clouds_stay_absent_and_weightless_samples_are_not_read():
    weights = np.array([[0.5, 0.3, 0.2, 0.0], [0.0, 0.0, 0.0, 0.0]])
    samples = np.array([[[0.0], [1.0], [3.0], [np.nan]], np.full((4, 1), np.nan)])
    mixtures = kernel_mixtures(weights, samples)
    found = log_density(mixtures, np.zeros((2, 1, 1)))
    alone = kernel_mixtures(weights[0, :3], samples[0, :3])
    assert found[0, 0] == pytest.approx(log_density(alone, np.zeros((1, 1)))[0])
    assert np.isnan(found[1, 0])


def test_a_collapsed_cloud_is_refused_with_its_place():
    weights = np.full((2, 4), 0.25)
    samples = np.array([[[0.0], [1.0], [2.0], [3.0]], np.ones((4, 1))])
    with pytest.raises(ValueError, match=r"covariance of the cloud at \(1,\) is not positive"):
        kernel_mixtures(weights, samples)
    with pytest.raises(ValueError, match=r"weights must be \(\.\.\., P\)"):
        kernel_mixtures(weights, samples[..., 0])
    with pytest.raises(ValueError, match="sum to one"):
        kernel_mixtures(2 * weights, samples)
