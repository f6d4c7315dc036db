"""Detection laws: published values, independent sums, and where a sensor is blind."""

import math

import numpy as np
import pytest
from compiled_models import values_at
from scipy.optimize import brentq
from scipy.stats import ncx2

from filters.models.detection import (
    ConstantDetection,
    FluctuatingTargetDetection,
    RangeTableDetection,
    SteadyTargetDetection,
)

SITE = np.zeros(4)


def swerling(case, pfa, snr_db, **keys):
    record = SteadyTargetDetection if case == 0 else FluctuatingTargetDetection
    given = {"reference_range_m": 1000.0, "resolution_cell": (10.0, 20.0)}
    return record(
        kind=f"swerling-{case}",
        snr_db=snr_db,
        false_alarm_probability=pfa,
        **given | keys,
    )


def probabilities(law, states, site=SITE):
    """By compiled code; plain Python must agree."""
    model = law.model()
    states = np.array(states, float)
    found = values_at(model, site, states)
    plain = [model.probability(model.parameters, np.asarray(site, float), s) for s in states]
    np.testing.assert_allclose(plain, found, rtol=1e-13)
    return found


def over_range(law, distances):
    return probabilities(law, [[d, 0.0, 0.0, 0.0] for d in distances])


def at_snr(case, pfa, snr_db):
    (found,) = over_range(swerling(case, pfa, snr_db), [1000.0])
    return found


# Swerling


@pytest.mark.parametrize(
    ("pfa", "snr_db", "expected"),
    [
        (1e-6, 10, 0.284804),
        (1e-6, 13, 0.517178),
        (1e-6, 15, 0.654756),
        (1e-6, 20, 0.872156),
        (1e-4, 10, 0.432876),
        (1e-4, 15, 0.754026),
        (1e-4, 20, 0.912843),
    ],
)
def test_swerling_1_is_the_false_alarm_probability_to_the_power_of_1_over_1_plus_snr(
    pfa, snr_db, expected
):
    """Source of the formula: Mahafza, Radar systems analysis and design, eq. 2.75 with 2.19."""
    assert math.isclose(at_snr(1, pfa, snr_db), expected, abs_tol=1e-6)


@pytest.mark.parametrize(
    ("pfa", "snr_db", "expected"),
    [
        (1e-6, 10, 0.248049),
        (1e-6, 12, 0.679388),
        (1e-6, 13, 0.874441),
        (1e-6, 14, 0.972147),
        (1e-4, 8, 0.270827),
        (1e-4, 10, 0.616136),
        (1e-4, 12, 0.925108),
    ],
)
def test_swerling_0_has_the_values_of_marcums_function(pfa, snr_db, expected):
    """Computed on their own, and confirmed by simulating pulses in noise."""
    assert math.isclose(at_snr(0, pfa, snr_db), expected, abs_tol=1e-6)


@pytest.mark.parametrize(
    ("case", "pfa", "detected", "snr_db"),
    [
        (0, 1e-6, 0.9, 13.1835),
        (1, 1e-6, 0.9, 21.1436),
        (0, 1e-6, 0.5, 11.2426),
        (1, 1e-6, 0.5, 12.7719),
        (0, 1e-3, 0.9, 10.759),
        (0, 1e-9, 0.9, 14.661),
        (0, 1e-9, 0.5, 13.058),
    ],
)
def test_a_detection_probability_needs_the_ratio_that_texts_give(case, pfa, detected, snr_db):
    """Texts round the first two to 13.2 and 21.1 dB (from memory)."""
    found = brentq(lambda ratio: at_snr(case, pfa, ratio) - detected, 0.0, 30.0, xtol=1e-6)
    assert abs(found - snr_db) < 1e-3


@pytest.mark.parametrize("pfa", [0.5, 1e-2, 1e-6, 1e-13])
def test_swerling_0_is_the_survival_function_of_a_noncentral_chi_square(pfa):
    """Source: scipy.stats.ncx2, at ranges between the nodes of the table; within 1e-10."""
    law = swerling(0, pfa, 13.0)
    distances = np.concatenate([[1.0, 1e-3], np.geomspace(150.0, 3e4, 3001)])
    ratio = 10**1.3 * (1000.0 / distances) ** 4
    expected = np.ones_like(distances)  # ncx2 itself fails at ratios beyond 1e9
    usual = ratio < 1e4
    expected[usual] = ncx2.sf(-2.0 * math.log(pfa), 2, 2.0 * ratio[usual])
    found = over_range(law, distances)
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-10)
    assert np.all(np.diff(found[2:]) <= 1e-15)


def marcum_by_counting(ratio, threshold):
    """P(N <= M) for Poisson numbers N and M of means threshold and ratio: positive terms alone.

    Source: the power series of the modified Bessel function in Marcum's integral.
    """
    term_m, term_n, cumulated, total = math.exp(-ratio), math.exp(-threshold), 0.0, 0.0
    for k in range(2000):
        cumulated += term_n
        total += term_m * cumulated
        term_m *= ratio / (k + 1)
        term_n *= threshold / (k + 1)
    return total


@pytest.mark.parametrize("pfa", [1e-2, 1e-6, 1e-12])
def test_swerling_0_is_a_sum_of_poisson_probabilities(pfa):
    for snr_db in np.arange(-20.0, 24.0, 1.7):
        expected = marcum_by_counting(10 ** (snr_db / 10), -math.log(pfa))
        assert abs(at_snr(0, pfa, snr_db) - expected) < 1e-10


@pytest.mark.parametrize("case", [0, 1])
def test_the_ratio_falls_with_the_fourth_power_of_range(case):
    """At twice the range it is 12.0412 dB lower."""
    law = swerling(case, 1e-5, 18.0)
    halved = 18.0 - 40.0 * math.log10(2.0)
    np.testing.assert_allclose(over_range(law, [2000.0]), at_snr(case, 1e-5, halved), atol=1e-10)


@pytest.mark.parametrize("case", [0, 1])
def test_a_target_out_of_reach_is_seen_as_often_as_noise_and_one_at_the_site_always(case):
    law = swerling(case, 1e-3, 15.0)
    np.testing.assert_allclose(over_range(law, [1e9, 0.0]), [1e-3, 1.0], rtol=1e-9)


def test_detection_by_the_threshold_is_that_of_pulses_in_noise():
    """20,000 pulses a case of complex Gaussian noise; five standard errors."""
    rng = np.random.default_rng(11)
    pfa, ratio = 1e-2, 4.0
    noise = (rng.normal(size=20_000) + 1j * rng.normal(size=20_000)) / math.sqrt(2)
    steady = np.abs(math.sqrt(ratio) + noise) ** 2
    fading = np.abs(math.sqrt(1 + ratio) * noise) ** 2
    for case, power in ((0, steady), (1, fading)):
        expected = at_snr(case, pfa, 10 * math.log10(ratio))
        share = np.mean(power > -math.log(pfa))
        assert abs(share - expected) < 5 * math.sqrt(expected * (1 - expected) / 20_000)


def test_the_false_alarms_of_a_cell_are_a_density():
    """PFA 1e-4 in a cell of 10 m by 20 m is 5e-7 per m2; in 10 m by 2 degrees, per m and rad."""
    law = swerling(1, 1e-4, 10.0)
    assert math.isclose(law.clutter_intensity(np.ones(2)), 5e-7)
    polar = swerling(1, 1e-4, 10.0, resolution_cell=(10.0, 2.0))
    expected = 1e-4 / (10.0 * math.radians(2.0))
    assert math.isclose(polar.clutter_intensity(np.array([1.0, math.radians(1.0)])), expected)


# Tables and blindness


def test_a_table_is_linear_between_its_points_and_held_beyond():
    """Source: numpy.interp."""
    rows = ((0.0, 0.95), (500.0, 0.9), (2000.0, 0.3), (2500.0, 0.0))
    law = RangeTableDetection(kind="range-table", probability_over_range=rows)
    distances = np.concatenate([[0.0, 500.0, 2000.0, 9999.0], np.linspace(1.0, 3000.0, 77)])
    expected = np.interp(distances, *np.transpose(rows))
    np.testing.assert_allclose(over_range(law, distances), expected, rtol=1e-13)


def test_a_table_of_one_row_is_the_same_everywhere():
    law = RangeTableDetection(kind="range-table", probability_over_range=((100.0, 0.4),))
    np.testing.assert_array_equal(over_range(law, [0.0, 100.0, 1e6]), 0.4)


def test_range_is_that_from_the_site():
    law = RangeTableDetection(kind="range-table", probability_over_range=((0.0, 1.0), (10.0, 0.0)))
    found = probabilities(law, [[103.0, 204.0, 0.0, 0.0]], [100.0, 200.0, 9.0, 9.0])
    np.testing.assert_allclose(found, 0.5)
    in_space = law.model()
    state, site = np.array([[1.0, 2.0, 2.0, 0, 0, 0]]), np.zeros(6)
    np.testing.assert_allclose(values_at(in_space, site, state), 0.7)


def circle(degrees, radius=100.0, **velocity):
    angle = np.radians(degrees)
    zeros = np.zeros_like(angle)
    return np.column_stack([radius * np.cos(angle), radius * np.sin(angle), zeros, zeros])


BLIND = [
    ("constant", lambda **keys: ConstantDetection(kind="constant", probability=0.8, **keys)),
    (
        "range-table",
        lambda **keys: RangeTableDetection(
            kind="range-table", probability_over_range=((0.0, 0.8),), **keys
        ),
    ),
    ("swerling-0", lambda **keys: swerling(0, 1e-3, 10.0, **keys)),
    ("swerling-1", lambda **keys: swerling(1, 1e-3, 10.0, **keys)),
]


@pytest.mark.parametrize(("name", "make"), BLIND)
def test_in_a_blind_sector_nothing_is_detected(name, make):
    """Sectors from 30 to 60 degrees and over the cut from 170 to 200; elsewhere as without."""
    degrees = np.arange(-179.5, 180.0, 1.0)
    found = probabilities(make(blind_sectors_deg=((30.0, 60.0), (170.0, 200.0))), circle(degrees))
    is_blind = ((degrees > 30) & (degrees < 60)) | (degrees > 170) | (degrees < -160)
    expected = np.where(is_blind, 0.0, probabilities(make(), circle(degrees)))
    np.testing.assert_array_equal(found, expected)


def test_a_sector_of_a_full_turn_is_blind_everywhere():
    law = ConstantDetection(kind="constant", probability=1.0, blind_sectors_deg=((-90.0, 270.0),))
    np.testing.assert_array_equal(probabilities(law, circle(np.arange(0, 360, 7.0))), 0.0)


@pytest.mark.parametrize(("name", "make"), BLIND)
def test_a_target_that_flies_tangentially_vanishes(name, make):
    """Speed 50 m/s at an angle a to the line of sight: range rate 50 cos(a), blind below 10."""
    angles = np.radians(np.arange(0.5, 360.0, 1.0))
    distance, speed = 700.0, 50.0
    states = [[distance, 0.0, speed * math.cos(a), speed * math.sin(a)] for a in angles]
    found = probabilities(make(blind_range_rate_m_per_s=10.0), states)
    is_blind = np.abs(speed * np.cos(angles)) < 10.0
    assert 0 < is_blind.sum() < len(angles)
    np.testing.assert_array_equal(found, np.where(is_blind, 0.0, over_range(make(), [distance])))


def test_the_range_rate_is_relative_to_the_sensors_own_motion():
    """A target that keeps at the sensor's side has none, however fast both are."""
    law = ConstantDetection(kind="constant", probability=0.9, blind_range_rate_m_per_s=1.0)
    states = [[100.0, 0.0, 30.0, 5.0], [100.0, 0.0, 0.0, 5.0]]
    found = probabilities(law, states, [0.0, 0.0, 30.0, 5.0])
    np.testing.assert_array_equal(found, [0.0, 0.9])


def test_without_blindness_the_constant_law_is_the_plain_constant():
    model = ConstantDetection(kind="constant", probability=0.7).model()
    np.testing.assert_array_equal(model.parameters, [0.7])
