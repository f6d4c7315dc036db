"""Probabilities of existence against what is really followed."""

import numpy as np
import pytest

from metrics.existence import existence_scores


def test_scores_are_the_means_of_the_scans_they_speak_of():
    probability = np.array([[0.9, 0.6, 0.2, np.nan], [0.5, np.nan, np.nan, np.nan]])
    on = np.array([[True, True, False, False], [False, False, False, False]])
    present = ~np.isnan(probability)
    error, on_target, off_target = existence_scores(probability, on, present)
    np.testing.assert_allclose(error, [(0.01 + 0.16 + 0.04) / 3, 0.25])
    np.testing.assert_allclose(on_target, [0.75, np.nan])
    np.testing.assert_allclose(off_target, [0.2, 0.5])


def test_an_honest_probability_has_the_least_expected_error():
    """The quadratic score is proper: on average p (1 - p), and more by the square of any bias.

    40,000 scans, 4 standard errors; by chance once in 16,000 for each of the two.
    """
    rng = np.random.default_rng(12)
    probability = rng.uniform(size=(1, 40_000))
    on = rng.uniform(size=probability.shape) < probability
    present = np.ones_like(on)
    for bias in (0.0, 0.2):
        stated = (1 - bias) * probability
        error = existence_scores(stated, on, present).error[0]
        expected = np.mean(probability * (1 - probability) + (bias * probability) ** 2)
        assert abs(error - expected) < 4 * np.std((stated - on) ** 2) / np.sqrt(on.size)


def test_a_probability_is_needed_wherever_there_is_an_estimate():
    with pytest.raises(ValueError, match="NaN"):
        existence_scores([[np.nan]], [[True]], [[True]])
