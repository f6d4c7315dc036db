from itertools import combinations, permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from stonesoup.measures import Euclidean
from stonesoup.metricgenerator.ospametric import GOSPAMetric
from stonesoup.types.state import State

from metrics.gospa import gospa, mean_gospa, single_target_gospa


def on_a_line(*positions: float) -> np.ndarray:
    return np.array(positions, float).reshape(-1, 1)


def parts(record) -> tuple[float, float, float]:
    return record.localisation, record.missed, record.false


# Worked by hand from the definition of Rahmathullah, García-Fernández & Svensson (2017,
# arXiv 1601.05585) with alpha = 2: a missed or false point costs c^p / 2.
EXACT_CASES = [
    ([0], [0], 10, 2, 0, (0, 0, 0)),
    ([0], [3], 10, 2, 3, (9, 0, 0)),
    ([0], [3], 10, 1, 3, (3, 0, 0)),
    ([0], [12], 10, 2, 10, (0, 50, 50)),
    ([0], [10], 10, 2, 10, (0, 50, 50)),
    ([0], [], 10, 2, 10 / np.sqrt(2), (0, 50, 0)),
    ([0], [], 10, 1, 5, (0, 5, 0)),
    ([], [0], 10, 2, 10 / np.sqrt(2), (0, 0, 50)),
    ([0], [3, 500], 10, 2, np.sqrt(59), (9, 0, 50)),
    ([0, 100], [1, 102], 10, 2, np.sqrt(5), (5, 0, 0)),
    ([0, 100], [3], 10, 2, np.sqrt(59), (9, 50, 0)),
    ([0, 100, 200], [3, 104], 10, 2, np.sqrt(75), (25, 50, 0)),
    ([0, 4], [3, 5], 10, 2, np.sqrt(10), (10, 0, 0)),
    ([0, 4], [3, 5], 10, 1, 4, (4, 0, 0)),
    ([0], [1, 50, 60], 5, 2, np.sqrt(26), (1, 0, 25)),
    ([0], [25], 20, 1, 20, (0, 10, 10)),
    ([], [], 10, 2, 0, (0, 0, 0)),
]


@pytest.mark.parametrize(
    ("truths", "estimates", "cutoff", "order", "distance", "split"), EXACT_CASES
)
def test_gospa_of_sets_on_a_line_is_as_worked_by_hand(
    truths, estimates, cutoff, order, distance, split
):
    result = gospa(on_a_line(*truths), on_a_line(*estimates), cutoff, order)
    assert result.distance == pytest.approx(distance, rel=1e-12)
    assert parts(result) == pytest.approx(split, rel=1e-12)


def test_gospa_in_the_plane_is_as_worked_by_hand():
    """Two pairs at 3 and 4 m and one false estimate: 9 + 16 + 50."""
    result = gospa([(0, 0), (50, 0)], [(3, 0), (50, 4), (200, 0)], cutoff=10, order=2)
    assert result.distance == pytest.approx(np.sqrt(75), rel=1e-12)
    assert parts(result) == pytest.approx((25, 0, 50), rel=1e-12)


def cheapest_partial_assignment(truths, estimates, cutoff, order) -> float:
    """The p-th power by the definition: every one-to-one partial assignment is tried."""
    distance = np.linalg.norm(truths[:, None] - estimates[None], axis=-1)
    unassigned_cost = cutoff**order / 2
    return min(
        sum(distance[i, j] ** order for i, j in zip(rows, columns, strict=True))
        + unassigned_cost * (len(truths) + len(estimates) - 2 * pairs)
        for pairs in range(min(len(truths), len(estimates)) + 1)
        for rows in combinations(range(len(truths)), pairs)
        for columns in permutations(range(len(estimates)), pairs)
    )


@pytest.mark.parametrize("order", [1, 1.5, 2, 3.7])
def test_gospa_is_the_cheapest_of_all_partial_assignments(order):
    rng = np.random.default_rng(21)
    for _ in range(60):
        truths = rng.uniform(0, 30, size=(rng.integers(0, 5), 2))
        estimates = rng.uniform(0, 30, size=(rng.integers(0, 5), 2))
        cutoff = rng.uniform(2, 30)
        result = gospa(truths, estimates, cutoff, order)
        expected = cheapest_partial_assignment(truths, estimates, cutoff, order)
        assert sum(parts(result)) == pytest.approx(expected, rel=1e-12)
        assert result.distance**order == pytest.approx(expected, rel=1e-12)


def reference_gospa(truths, estimates, cutoff, order) -> dict[str, float]:
    """By stonesoup 1.9: estimates come first; its parts are p-th powers, its distance is rooted."""
    metric = GOSPAMetric(c=cutoff, p=order, measure=Euclidean())
    states = [[State(point[:, None]) for point in points] for points in (estimates, truths)]
    return metric.compute_gospa_metric(*states)[0].value


@pytest.mark.parametrize("order", [1, 2])
def test_gospa_and_its_parts_agree_with_the_reference_library(order):
    """Orders 1 and 2 alone: for others the library compares c^p from two power routines for
    equality and books some cut-offs under localisation. Two empty sets raise there."""
    rng = np.random.default_rng(22)
    for _ in range(100):
        truths = rng.uniform(0, 60, size=(rng.integers(1, 7), 2))
        estimates = rng.uniform(0, 60, size=(rng.integers(0, 7), 2))
        cutoff = rng.uniform(5, 40)
        ours = gospa(truths, estimates, cutoff, order)
        theirs = reference_gospa(truths, estimates, cutoff, order)
        assert ours.distance == pytest.approx(theirs["distance"], rel=1e-12)
        expected = [theirs[name] for name in ("localisation", "missed", "false")]
        assert parts(ours) == pytest.approx(expected, rel=1e-10, abs=1e-10)


# A grid of 0.5 m keeps squares of distances away from underflow.
point_sets = st.lists(st.tuples(*[st.integers(-40, 40).map(lambda i: i / 2)] * 2), max_size=4)
cutoffs, orders = st.floats(1, 40), st.sampled_from([1, 1.5, 2, 4])
property_test = settings(deadline=None, derandomize=True, max_examples=60)


@property_test
@given(point_sets, point_sets, cutoffs, orders)
def test_gospa_is_zero_between_equal_sets_alone(a, b, cutoff, order):
    assert gospa(a, a[::-1], cutoff, order).distance == 0
    assert (gospa(a, b, cutoff, order).distance == 0) == (sorted(a) == sorted(b))


@property_test
@given(point_sets, point_sets, cutoffs, orders)
def test_gospa_is_symmetric_and_turns_missed_into_false(a, b, cutoff, order):
    there, back = gospa(a, b, cutoff, order), gospa(b, a, cutoff, order)
    assert there.distance == pytest.approx(back.distance, rel=1e-12)
    assert there.missed - there.false == pytest.approx(back.false - back.missed, rel=1e-12)


@property_test
@given(point_sets, point_sets, point_sets, cutoffs, orders)
def test_gospa_obeys_the_triangle_inequality(a, b, c, cutoff, order):
    direct = gospa(a, c, cutoff, order).distance
    detour = gospa(a, b, cutoff, order).distance + gospa(b, c, cutoff, order).distance
    assert direct <= detour * (1 + 1e-12)


@property_test
@given(point_sets, point_sets, cutoffs, orders, st.floats(0.01, 100))
def test_gospa_scales_with_lengths(a, b, cutoff, order, factor):
    scaled = gospa(np.array(a) * factor, np.array(b) * factor, cutoff * factor, order)
    expected = factor * gospa(a, b, cutoff, order).distance
    # Where a distance equals the cut-off, both ways of booking the pair cost the same.
    assert scaled.distance == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("order", [1, 2, 2.5])
def test_one_target_gives_the_same_parts_as_sets_of_one_point(order):
    rng = np.random.default_rng(23)
    cutoff = 7.0
    errors = rng.uniform(0, 14, size=(6, 10))
    errors[0, :3] = 0.0, cutoff, np.nextafter(cutoff, 0)
    present = rng.random(errors.shape) < 0.8
    present[0, :3] = True
    single = single_target_gospa(np.where(present, errors, np.nan), present, cutoff, order)
    for index in np.ndindex(errors.shape):
        estimates = [[0.0, errors[index]]] if present[index] else []
        expected = gospa([[0.0, 0.0]], estimates, cutoff, order)
        assert [part[index] for part in single] == pytest.approx(parts(expected), rel=1e-12)


def test_averages_take_one_root_at_the_end():
    """Runs at 3 and 10/sqrt(2): root of (9 + 50) / 2, where the mean of roots would be 5.0355."""
    split = single_target_gospa([[3.0], [np.nan]], [[True], [False]], cutoff=10, order=2)
    mean = mean_gospa(*split, order=2)
    assert mean.distance == pytest.approx(5.431390, abs=5e-7)
    assert parts(mean) == (4.5, 25.0, 0.0)


def test_the_average_over_nothing_is_nan():
    split = single_target_gospa(np.zeros((0, 5)), np.zeros((0, 5), bool), cutoff=10, order=2)
    mean = mean_gospa(*split, order=2)
    assert np.isnan([mean.distance, *parts(mean)]).all()


@pytest.mark.parametrize(
    ("sigma", "cutoff", "share_present"),
    [(0.6, 1, 1.0), (0.6, 2, 1.0), (1, 1, 1.0), (10, 30, 1.0), (0.6, 2, 0.9)],
)
def test_gospa_of_circular_gaussian_errors_has_its_closed_form(sigma, cutoff, share_present):
    """Squared Rayleigh errors are exponential with mean 2 sigma², so with q = exp(-c²/2 sigma²)
    the parts are 2 sigma² (1 - q) - c² q, c² q / 2 and c² q / 2, times the share present; an
    absent estimate adds c² / 2 to missed. 4.5 standard errors for each part: 1e-4 by chance."""
    rng = np.random.default_rng(24)
    error = rng.rayleigh(sigma, size=(200, 100))
    present = rng.random(error.shape) < share_present
    split = single_target_gospa(np.where(present, error, np.nan), present, cutoff, order=2)

    beyond = np.exp(-(cutoff**2) / (2 * sigma**2))
    half = cutoff**2 / 2
    localisation = share_present * (2 * sigma**2 * (1 - beyond) - cutoff**2 * beyond)
    missed = share_present * half * beyond + (1 - share_present) * half
    false = share_present * half * beyond
    for part, expected in zip(split, (localisation, missed, false), strict=True):
        assert abs(part.mean() - expected) < 4.5 * part.std() / np.sqrt(part.size)

    power = sum(split)
    mean = mean_gospa(*split, order=2)
    tolerance = 4.5 * power.std() / np.sqrt(power.size)
    assert abs(mean.distance**2 - (localisation + missed + false)) < tolerance


def test_unfit_arguments_are_refused():
    with pytest.raises(ValueError, match="cutoff must be positive and finite, got 0"):
        gospa([[0.0]], [[1.0]], cutoff=0, order=2)
    with pytest.raises(ValueError, match=r"order must be at least 1 and finite, got 0\.5"):
        single_target_gospa([[1.0]], [[True]], cutoff=1, order=0.5)
    with pytest.raises(ValueError, match=r"truths must have the shape \(points, axes\)"):
        gospa([1.0, 2.0], [[1.0]], cutoff=1, order=1)
    with pytest.raises(ValueError, match=r"estimates must have .* be finite"):
        gospa([[1.0]], [[np.nan]], cutoff=1, order=1)
    with pytest.raises(ValueError, match=r"same axes, got shapes \(1, 1\) and \(1, 2\)"):
        gospa([[1.0]], [[1.0, 2.0]], cutoff=1, order=1)
