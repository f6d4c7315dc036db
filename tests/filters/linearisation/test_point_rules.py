"""Rules over the standard normal integrate what they promise."""

import itertools
import math

import numpy as np
import pytest

from filters.linearisation.rules import cubature_rule, gauss_hermite_rule, unscented_rule


def moment(power):
    """E xi^power of a standard normal: (power - 1)!!, or 0 for odd ones."""
    return 0.0 if power % 2 else float(math.prod(range(power - 1, 0, -2)))


def monomials(n, degree):
    powers = itertools.product(range(degree + 1), repeat=n)
    return [each for each in powers if sum(each) <= degree]


def assert_integrates(rule, powers):
    """To rounding, that is in units of what the absolute values come to."""
    for each in powers:
        values = np.prod(rule.points ** np.array(each), axis=1)
        scale = np.abs(rule.mean_weights) @ np.abs(values)
        found = rule.mean_weights @ values
        assert abs(found - math.prod(map(moment, each))) < 1e-12 * max(scale, 1.0), each


RULES_OF_THIRD_DEGREE = {
    "cubature": cubature_rule,
    "unscented": lambda n: unscented_rule(n, 1.0, 2.0, 3.0 - n),
    "unscented, scaled": lambda n: unscented_rule(n, 0.5, 2.0, 1.0),
}


@pytest.mark.parametrize("n", [1, 2, 5])
@pytest.mark.parametrize("rule", RULES_OF_THIRD_DEGREE)
def test_a_rule_of_third_degree_integrates_all_cubics(rule, n):
    assert_integrates(RULES_OF_THIRD_DEGREE[rule](n), monomials(n, 3))


@pytest.mark.parametrize(("n", "order"), [(1, 2), (1, 9), (2, 4), (3, 3)])
def test_gauss_hermite_integrates_each_axis_to_twice_its_order_less_one(n, order):
    """And no further: the next even power along an axis comes out wrong."""
    rule = gauss_hermite_rule(n, order)
    assert len(rule.points) == order**n
    assert_integrates(rule, itertools.product(range(2 * order), repeat=n))
    beyond = rule.weights @ rule.points[:, 0] ** (2 * order)
    assert abs(beyond / moment(2 * order) - 1.0) > 1e-3


def test_kappa_of_three_less_n_matches_fourth_moments_along_each_axis():
    """Source: Julier and Uhlmann (2004), Proceedings of the IEEE 92(3): n + kappa = 3."""
    rule = unscented_rule(4, 1.0, 2.0, -1.0)
    np.testing.assert_allclose(rule.mean_weights @ rule.points**4, 3.0, rtol=1e-12)


def test_beta_of_two_gives_the_variance_of_a_square():
    """Var(x^2) = 2 in one dimension, whatever the scale to second order in alpha.

    Source: Julier (2002), The scaled unscented transformation: beta = 2 for a Gaussian.
    """
    rule = unscented_rule(1, 1e-2, 2.0, 0.0)
    squares = rule.points[:, 0] ** 2
    offsets = squares - rule.mean_weights @ squares
    np.testing.assert_allclose(rule.weights @ offsets**2, 2.0, rtol=1e-3)


def test_weights_of_covariances_differ_at_the_centre_alone():
    rule = unscented_rule(3, 0.5, 2.0, 1.0)
    np.testing.assert_array_equal(rule.weights[1:], rule.mean_weights[1:])
    assert rule.weights[0] - rule.mean_weights[0] == 1.0 - 0.25 + 2.0


def test_too_many_points_are_refused():
    with pytest.raises(ValueError, match="12 points along each of 4 axes are more than 20000"):
        gauss_hermite_rule(4, 12)
    assert len(gauss_hermite_rule(4, 11).points) == 11**4
