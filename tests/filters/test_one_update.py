"""One update against brute-force integration of Bayes' rule, hypothesis by hypothesis.

Source of the weights: prior times 1 - PD, and prior times PD g(z | x) / lambda, integrated over the
state (Bar-Shalom, Daum and Huang 2009, IEEE Control Systems 29(6), for Poisson clutter).
"""

import numpy as np
import pytest
from plain_filters import hypotheses_of
from scipy.stats import chi2, multivariate_normal, norm
from small_worlds import as_scans, constant_velocity_world, look_inside

from filters.hypotheses import NOT_DETECTED

MODELS = [(0.9, 0.05), (0.5, 2.0), (0.99, 1e-6), (0.0, 0.1), (1.0, 0.3)]
DETECTIONS_1D = np.array([[0.7], [-2.5], [3.2]])
PRIOR_1D = np.array([[3.0, 0.8], [0.8, 0.5]])
DETECTIONS_2D = np.array([[0.7, -1.0], [-2.5, 2.0]])
PRIOR_2D = np.array(
    [[3.0, 0.5, 0.8, 0.1], [0.5, 2.0, -0.2, 0.6], [0.8, -0.2, 0.9, 0.1], [0.1, 0.6, 0.1, 0.7]]
)


def grid(limits, points=401):
    """All points of a grid over +-limits, (points^2, 2), and the area of a cell.

    The sum over a grid (the trapezoidal rule) is exact to rounding for Gaussians that vanish at its
    ends: Trefethen and Weideman (2014), SIAM Review 56.
    """
    lines = [np.linspace(-limit, limit, points) for limit in limits]
    area = np.prod([line[1] - line[0] for line in lines])
    return np.stack(np.meshgrid(*lines, indexing="ij"), axis=-1).reshape(-1, 2), area


def integrate_1d(detection, prior, noise_sd):
    """Evidence, mean and covariance of prior times likelihood, over position and velocity."""
    states, area = grid(9 * np.sqrt(np.diag(prior)))
    weights = multivariate_normal(np.zeros(2), prior).pdf(states) * area
    weights *= norm.pdf(detection[0], states[:, 0], noise_sd)
    evidence, mean = weights.sum(), weights @ states / weights.sum()
    offsets = states - mean
    return evidence, mean, (offsets.T * weights) @ offsets / evidence


def integrate_2d(detection, prior, noise_sd):
    """The same over positions in the plane; given those, the velocity is Gaussian as it was."""
    regression = prior[2:, :2] @ np.linalg.inv(prior[:2, :2])
    left = prior[2:, 2:] - regression @ prior[:2, 2:]
    places, area = grid(9 * np.sqrt(np.diag(prior)[:2]))
    weights = multivariate_normal(np.zeros(2), prior[:2, :2]).pdf(places) * area
    weights *= np.prod(norm.pdf(detection, places, noise_sd), axis=1)
    states = np.column_stack([places, places @ regression.T])
    evidence, mean = weights.sum(), weights @ states / weights.sum()
    offsets = states - mean
    covariance = (offsets.T * weights) @ offsets / evidence
    covariance[2:, 2:] += left
    return evidence, mean, covariance


@pytest.fixture(scope="module")
def by_quadrature():
    """For each case: prior, noise, detections, and what each detection makes of the prior."""
    cases = {}
    for name, prior, noise_sd, detections, integrate in (
        ("1-D", PRIOR_1D, 1.2, DETECTIONS_1D, integrate_1d),
        ("2-D", PRIOR_2D, 0.9, DETECTIONS_2D, integrate_2d),
    ):
        posteriors = [integrate(detection, prior, noise_sd) for detection in detections]
        cases[name] = (prior, noise_sd, detections, posteriors)
    return cases


@pytest.mark.parametrize(("detection_probability", "clutter"), MODELS)
@pytest.mark.parametrize("case", ["1-D", "2-D"])
def test_weight_mean_and_covariance_of_every_hypothesis_are_bayes_rule(
    by_quadrature, case, detection_probability, clutter
):
    prior, noise_sd, detections, posteriors = by_quadrature[case]
    m = detections.shape[1]
    world = constant_velocity_world(
        m,
        noise_sd=noise_sd,
        detection_probability=detection_probability,
        clutter=clutter,
        covariance=prior,
    )
    found = look_inside(world, as_scans([[detections]], m))

    weights = np.array(
        [1 - detection_probability]
        + [detection_probability * evidence / clutter for evidence, _, _ in posteriors]
    )
    np.testing.assert_array_equal(found.table["detection"], [NOT_DETECTED, *range(len(detections))])
    np.testing.assert_allclose(found.table["weight"], weights / weights.sum(), rtol=1e-9)
    np.testing.assert_array_equal(found.means[0], 0.0)
    np.testing.assert_array_equal(found.covariances[0], prior)
    for row, (_, mean, covariance) in enumerate(posteriors, start=1):
        np.testing.assert_allclose(found.means[row], mean, rtol=1e-9, atol=1e-12)
        np.testing.assert_allclose(found.covariances[row], covariance, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("axes", [1, 2])
def test_a_gate_leaves_out_what_lies_beyond_its_chi_square_quantile(axes):
    """The gate holds squared distances below the quantile; 'not detected' then weighs 1 - PD PG."""
    probability = 0.95
    world = constant_velocity_world(axes)
    S = world.plain.H @ world.plain.covariance @ world.plain.H.T + world.plain.R
    edge = np.sqrt(chi2.ppf(probability, axes) * S[0, 0])
    detections = np.zeros((4, axes))
    detections[:, 0] = [0.0, edge * (1 - 1e-9), edge * (1 + 1e-9), -3 * edge]
    found = look_inside(world, as_scans([[detections]], axes), probability)
    np.testing.assert_array_equal(found.table["detection"], [NOT_DETECTED, 0, 1])
    expected = hypotheses_of(
        world.plain,
        [(1.0, world.plain.mean, world.plain.covariance)],
        detections,
        probability,
    )
    np.testing.assert_allclose(found.table["weight"], [row.weight for row in expected], rtol=1e-12)
    np.testing.assert_allclose(
        found.table["distance"], [row.distance for row in expected], rtol=1e-12
    )


def test_without_clutter_all_weight_goes_to_the_gated_detections_by_their_density():
    """The limit of vanishing clutter: compared with a density of 1e-300, and with the formula."""
    detections = [[0.5], [-1.0], [2.0]]
    none = look_inside(constant_velocity_world(clutter=0.0), as_scans([[detections]], 1), 0.99)
    least = look_inside(constant_velocity_world(clutter=1e-300), as_scans([[detections]], 1), 0.99)
    density = norm.pdf(np.ravel(detections), 0.0, np.sqrt(5.0))
    expected = [0.0, *(density / density.sum())]
    np.testing.assert_allclose(none.table["weight"], expected, rtol=1e-12)
    np.testing.assert_allclose(least.table["weight"], expected, rtol=1e-12, atol=1e-250)


def test_without_clutter_and_without_a_detection_the_prediction_is_all_there_is():
    found = look_inside(constant_velocity_world(clutter=0.0), as_scans([[[[500.0]]]], 1), 0.99)
    np.testing.assert_array_equal(found.table["weight"], [1.0])
