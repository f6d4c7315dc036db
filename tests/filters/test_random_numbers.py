"""The generator bit for bit against NumPy's, and the distributions of what is drawn from it."""

import numpy as np
import pytest
from scipy.stats import binomtest, chi2, kstest, norm

from filters.compiled import kernel
from filters.random_numbers import (
    CLUTTER,
    DETECTION,
    MOTION,
    NOISE,
    POSTERIOR_GAP,
    REGION_LEVEL,
    START,
    STRATEGY,
    exponential,
    fill_normals,
    generator_at,
    numbers_of,
    open_at,
    uniform,
)

PURPOSES = (START, MOTION, DETECTION, NOISE, CLUTTER, STRATEGY)


@kernel
def draw_uniforms(numbers, trial, purpose, part, out):
    open_at(numbers, trial, purpose, part)
    for i in range(out.shape[0]):
        out[i] = uniform(numbers)


@kernel
def draw_exponentials(numbers, trial, purpose, part, out):
    open_at(numbers, trial, purpose, part)
    for i in range(out.shape[0]):
        out[i] = exponential(numbers)


@kernel
def draw_normals(numbers, trial, purpose, part, count, out):
    open_at(numbers, trial, purpose, part)
    for i in range(out.shape[0]):
        fill_normals(numbers, count, out[i])


def uniforms(numbers, trial, purpose, part, count):
    out = np.empty(count)
    draw_uniforms(numbers, trial, purpose, part, out)
    return out


@pytest.mark.parametrize(
    ("seed", "stream", "trial", "purpose", "part"),
    [
        (4107, 0, 0, START, 0),
        (4107, 0, 17, CLUTTER, 59),
        (0, 0, 0, START, 0),
        (2**63 - 1, 2**63, 10**8, STRATEGY, 99_999),
        (1, 12345678901234567890, 3, NOISE, 2**31 - 1),
    ],
)
def test_uniform_numbers_are_numpys_bit_for_bit(seed, stream, trial, purpose, part):
    """numpy.random.Philox adds one to its counter before the first block, as ours does."""
    counter = np.array([part << 32, purpose, trial, stream], np.uint64)
    generator = np.random.Generator(
        np.random.Philox(key=np.array([seed, 0], np.uint64), counter=counter)
    )
    found = uniforms(numbers_of(seed, stream), trial, purpose, part, 1001)
    np.testing.assert_array_equal(found, generator.random(1001))


def test_numbers_are_the_same_whatever_was_drawn_before():
    numbers = numbers_of(5)
    first = uniforms(numbers, 3, NOISE, 8, 10)
    for trial, purpose, part, count in ((4, CLUTTER, 2, 7), (0, START, 0, 1), (3, NOISE, 7, 999)):
        uniforms(numbers, trial, purpose, part, count)
    np.testing.assert_array_equal(uniforms(numbers, 3, NOISE, 8, 10), first)
    np.testing.assert_array_equal(uniforms(numbers_of(5), 3, NOISE, 8, 4), first[:4])


def test_places_of_different_names_share_no_numbers():
    """Streams, trials, purposes, parts and seeds: 3 values each, 1,000 numbers, no two alike.

    243,000 numbers of 53 bits coincide by chance once in 300,000 times.
    """
    drawn = [
        uniforms(numbers_of(seed, stream), trial, purpose, part, 1000)
        for seed in (1, 2, 3)
        for stream in (0, 1, 2)
        for trial in (0, 1, 2)
        for purpose in (0, 1, 2)
        for part in (0, 1, 2)
    ]
    assert len(np.unique(drawn)) == 243 * 1000


def test_a_part_runs_on_into_the_next_block_of_its_own_counter_only():
    """The scan stands above bit 32 of a counter word whose lower half counts blocks of four."""
    of_scan_0 = uniforms(numbers_of(9), 0, CLUTTER, 0, 40_000)
    of_scan_1 = uniforms(numbers_of(9), 0, CLUTTER, 1, 40_000)
    assert len(np.intersect1d(of_scan_0, of_scan_1)) == 0


@pytest.mark.parametrize("purpose", PURPOSES)
def test_uniform_numbers_are_uniform_within_a_place_and_over_places(purpose):
    """Kolmogorov-Smirnov at level 1e-5, along one place and over 4,000 trials' first numbers."""
    numbers = numbers_of(31)
    along = uniforms(numbers, 1, purpose, 1, 4000)
    over = [uniforms(numbers, trial, purpose, 0, 1)[0] for trial in range(4000)]
    for sample in (along, over):
        assert kstest(sample, "uniform").pvalue > 1e-5
        assert 0.0 <= min(sample) <= max(sample) < 1.0
    first_two = np.corrcoef(
        [uniforms(numbers, t, purpose, 0, 2) for t in range(4000)], rowvar=False
    )
    assert abs(first_two[0, 1]) < 4.5 / np.sqrt(4000)


def test_exponential_numbers_are_exponential():
    """Kolmogorov-Smirnov on 20,000 at level 1e-5."""
    out = np.empty(20_000)
    draw_exponentials(numbers_of(2), 0, CLUTTER, 0, out)
    assert kstest(out, "expon").pvalue > 1e-5
    assert out.min() >= 0.0


@pytest.mark.parametrize("count", [1, 2, 3, 4, 5])
def test_normal_numbers_are_standard_normal_and_independent(count):
    """Kolmogorov-Smirnov on each place of 10,000 vectors, correlations within 4.5 / sqrt(N).

    Correlations of squares are compared too. By chance once in 5,000 for all.
    """
    out = np.empty((10_000, count))
    draw_normals(numbers_of(77), 0, NOISE, 0, count, out)
    for column in out.T:
        assert kstest(column, "norm").pvalue > 1e-5
    for values in (out, out**2):
        correlation = np.atleast_2d(np.corrcoef(values, rowvar=False)) - np.eye(count)
        assert np.abs(correlation).max() < 4.5 / np.sqrt(len(out))


def test_two_million_normal_numbers_fill_every_part_of_the_bell():
    """400 equally likely bins and, beyond 3, 3.65, 4 and 4.5, both tails; level 1e-5 each.

    Signs, sizes and neighbours are uncorrelated within 4.5 / sqrt(N).
    """
    out = np.empty((2_000_000, 1))
    draw_normals(numbers_of(7), 3, MOTION, 2, 1, out)
    values = out[:, 0]
    observed, _ = np.histogram(norm.cdf(values), np.linspace(0, 1, 401))
    expected = len(values) / 400
    assert chi2.sf(np.sum((observed - expected) ** 2) / expected, 399) > 1e-5
    for limit in (3.0, 3.65, 4.0, 4.5):
        for tail in (values > limit, values < -limit):
            assert binomtest(int(tail.sum()), len(values), norm.sf(limit)).pvalue > 1e-5
    beyond = np.abs(values[np.abs(values) > 3.65])
    assert kstest(norm.sf(beyond) / norm.sf(3.65), "uniform").pvalue > 1e-5
    limit = 4.5 / np.sqrt(len(values))
    assert abs(np.corrcoef(np.sign(values), np.abs(values))[0, 1]) < limit
    assert abs(np.corrcoef(values[1:], values[:-1])[0, 1]) < limit
    assert abs(np.corrcoef(np.abs(values[1:]), np.abs(values[:-1]))[0, 1]) < limit


def test_normal_numbers_leave_what_lies_behind_their_count_alone():
    out = np.full((1, 4), 7.0)
    draw_normals(numbers_of(1), 0, NOISE, 0, 3, out)
    assert out[0, 3] == 7.0


@pytest.mark.parametrize("purpose", [REGION_LEVEL, POSTERIOR_GAP])
def test_numpys_generator_at_a_place_draws_the_numbers_of_that_place(purpose):
    ours = uniforms(numbers_of(77), 12, purpose, 0, 50)
    assert np.array_equal(generator_at(numbers_of(77), 12, purpose).random(50), ours)
