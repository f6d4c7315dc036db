import re

import numpy as np
import pytest
from scipy.optimize import minimize

from harness.report.figures.curve_names import spread
from harness.report.figures.lettering import broken, text_width


def test_names_that_are_apart_stay_where_they_are():
    assert spread([0.1, 0.5, 0.9], [0.1, 0.1, 0.1]) == pytest.approx([0.1, 0.5, 0.9])


def test_names_at_one_height_are_stacked_around_it():
    assert spread([0.5, 0.5], [0.1, 0.1]) == pytest.approx([0.45, 0.55])


def test_names_stay_within_the_panel():
    assert spread([0.0, 0.0, 1.0], [0.2, 0.2, 0.2]) == pytest.approx([0.1, 0.3, 0.9])


def test_names_move_as_little_as_a_general_optimiser_would_move_them():
    """Twenty random cases against sequential quadratic programming."""
    rng = np.random.default_rng(5)
    for _ in range(20):
        wanted = np.sort(rng.uniform(0, 1, 6))
        heights = rng.uniform(0.05, 0.15, 6)
        least = (heights[:-1] + heights[1:]) / 2
        found = minimize(
            lambda y, wanted=wanted: np.sum((y - wanted) ** 2),
            np.linspace(0.2, 0.8, 6),
            constraints={"type": "ineq", "fun": lambda y, least=least: np.diff(y) - least},
            bounds=[(height / 2, 1 - height / 2) for height in heights],
            tol=1e-12,
        )
        assert spread(list(wanted), list(heights)) == pytest.approx(found.x, abs=1e-5)


def test_text_is_broken_to_its_width_and_loses_no_letter():
    text = "a sentence of some length that_has-a.very+long_word_in_it and 95 % of it"
    lines = broken(text, 7.5, 1.0)
    assert max(text_width(line, 7.5) for line in lines) <= 1.0
    assert re.sub(r"\s", "", "".join(lines)) == text.replace(" ", "")


def test_a_number_stays_with_its_percent_sign():
    for width in np.linspace(0.3, 2.0, 30):
        assert not any(line.startswith("%") for line in broken("holds 95 % of tracks", 7.5, width))
