import math
import re

import numpy as np
import pytest

from harness.report.numerals import (
    distinct_labels,
    typeset_number,
    typeset_sentence,
    typeset_unit,
    with_interval,
    written,
)


# Worked examples of the rounding rule in the introduction of the Review of Particle Physics
# (Particle Data Group), from memory; the third follows its sentence on 950 to 999.
@pytest.mark.parametrize(
    ("value", "half_width", "text"),
    [(0.827, 0.119, "0.83"), (0.827, 0.367, "0.8"), (0.827, 0.0957, "0.83")],
)
def test_an_interval_decides_the_digits_as_the_published_rule_has_it(value, half_width, text):
    assert written(value, value - half_width, value + half_width)[0] == text


@pytest.mark.parametrize(
    ("value", "low", "high", "texts"),
    [
        (4.2312, 3.0871, 5.6429, ("4.2", "3.1–5.6")),
        (7.2341, 7.1891, 7.2802, ("7.23", "7.19–7.28")),
        (83.0, 79.0, 86.4, ("83", "79–86")),
        (1234.0, 1200.0, 1270.0, ("1230", "1200–1270")),
        (9.996, 9.994, 9.998, ("10.0", "10.0–10.0")),
        (2.5e-5, 2.1e-5, 2.9e-5, ("2.5e-5", "2.1e-5–2.9e-5")),
    ],
)
def test_value_and_interval_are_written_to_one_decimal_place(value, low, high, texts):
    places = {len(number.partition(".")[2]) for number in (texts[0], *texts[1].split("–"))}
    assert len(places) == 1
    assert written(value, low, high) == texts


def test_no_number_has_more_than_three_significant_figures():
    """Five hundred intervals over eight decades."""
    rng = np.random.default_rng(1)
    for _ in range(500):
        value = 10.0 ** rng.uniform(-4, 4)
        low, high = value * rng.uniform(0.2, 1.0), value * rng.uniform(1.0, 3.0)
        value_text, interval = written(value, low, high)
        for number in (value_text, *interval.split("–")):
            digits = re.sub(r"e.*|\.", "", number).lstrip("0")
            if "." not in number:
                digits = digits.rstrip("0")
            assert len(digits) <= 3, (value, low, high, number)


def test_a_value_is_never_rounded_away_by_a_wide_interval():
    assert written(5.2, 0.1, 4000.0)[0] == "5"


def test_zero_is_written_as_zero_with_its_upper_bound():
    assert written(0.0, 0.0, 0.3689) == ("0", "0–0.37")


def test_what_is_no_number_is_a_dash_and_an_infinite_end_says_so():
    assert written(math.nan) == ("–", "")
    assert written(5.0, 1.0, math.inf) == ("5.00", "1.00–∞")


def test_a_value_without_an_interval_has_three_figures():
    assert [written(x)[0] for x in (0.33912, 17.24, 215.9, 48213.0)] == [
        "0.339",
        "17.2",
        "216",
        "48200",
    ]


def test_a_sentence_puts_the_unit_before_the_bracket():
    assert with_interval(4.23, 3.09, 5.64, "%") == "4.2 % (3.1–5.6)"
    assert with_interval(1e-5, math.nan, math.nan, "1/m2") == "1.00e-5 per m2"


@pytest.mark.parametrize(
    ("values", "labels"),
    [
        ([0.6, 0.8, 0.95], ("0.6", "0.8", "0.95")),
        ([1e-5, 5.47722557505e-5, 3e-4], ("1e-5", "5.48e-5", "3e-4")),
        ([1e-4, 1e-3], ("1e-4", "1e-3")),
        ([100.01, 100.02], ("100.01", "100.02")),
        ([123456, 5], ("123456", "5")),
        ([0.0, 1e-4], ("0", "1e-4")),
        ([], ()),
    ],
)
def test_labels_are_short_and_tell_the_values_apart(values, labels):
    assert distinct_labels(values) == labels


def test_figures_show_powers_of_ten_and_units_raised():
    assert typeset_number("5.48e-5") == "5.48×10⁻⁵"
    assert typeset_number("1e-5") == "10⁻⁵"
    assert typeset_number("0.95") == "0.95"
    assert typeset_unit("1/m2") == "1/m²"
    assert typeset_unit("us") == "µs"
    assert typeset_sentence("holds up to 3e-4 per m2, pda2e-4 to 10") == (
        "holds up to 3×10⁻⁴ per m², pda2e-4 to 10"
    )
