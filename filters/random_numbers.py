"""Counter-based random numbers inside kernels: every number is a function of key and counter.

Numbers are named by three counter words (stream, trial, purpose) and a part, the scan, in the upper
half of the fourth; its lower half counts blocks of four numbers. So any trial can be drawn anew,
alone, in any order and on any worker, to the same bits, and what one purpose draws moves no other.

Source: Salmon, Moraes, Dror and Shaw (2011), Parallel random numbers: as easy as 1, 2, 3, SC11
(Philox 4x64 with 10 rounds); equal to numpy.random.Philox bit for bit.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from filters.compiled import helper

_MULTIPLIER_0 = np.uint64(0xD2E7470EE14C6C93)
_MULTIPLIER_1 = np.uint64(0xCA5A826395121157)
_WEYL_0 = np.uint64(0x9E3779B97F4A7C15)
_WEYL_1 = np.uint64(0xBB67AE8584CAA73B)
_LOW_HALF = np.uint64(0xFFFFFFFF)
_32 = np.uint64(32)
_11 = np.uint64(11)
_ONE = np.uint64(1)
_BYTE = np.uint64(0xFF)
_LAYERS = 256
_TAIL = 3.6541528853610088  # where the lowest layer's tail begins, so that the highest ends at 1
_ROUNDS = 10
_TO_UNIT = 2.0**-53

# Purposes. Numbers of one purpose are split further by adding a multiple of SPLIT.
START, MOTION, DETECTION, NOISE, CLUTTER, STRATEGY, CLUTTER_LEVEL, PERSISTENT_CLUTTER = range(8)
REGION_LEVEL, POSTERIOR_GAP = 8, 9  # of metrics
SPLIT = 16


class Numbers(NamedTuple):
    """A source of random numbers, opened at one place at a time; drawing overwrites its arrays."""

    key: np.ndarray  # (2,) uint64
    stream: np.ndarray  # (1,) uint64
    counter: np.ndarray  # (4,) uint64
    block: np.ndarray  # (4,) uint64
    used: np.ndarray  # (1,) int64: how many of the block are used


def numbers_of(seed: int, stream: int = 0) -> Numbers:
    """Return the source of a seed in 0 ... 2^63 - 1; stream 0 is shared by all conditions."""
    return Numbers(
        np.array([seed, 0], np.uint64),
        np.array([stream], np.uint64),
        np.zeros(4, np.uint64),
        np.zeros(4, np.uint64),
        np.full(1, 4, np.int64),
    )


def generator_at(numbers: Numbers, trial: int, purpose: int) -> np.random.Generator:
    """NumPy's generator with the very numbers of a trial and purpose, for metrics that sample."""
    counter = np.array([0, purpose, trial, numbers.stream[0]], np.uint64)
    return np.random.Generator(np.random.Philox(key=numbers.key, counter=counter))


@helper
def open_at(numbers: Numbers, trial: int, purpose: int, part: int) -> None:
    """Go to the start of the numbers for a purpose and part of a trial; none is negative."""
    numbers.counter[0] = np.uint64(part) << _32
    numbers.counter[1] = np.uint64(purpose)
    numbers.counter[2] = np.uint64(trial)
    numbers.counter[3] = numbers.stream[0]
    numbers.used[0] = 4


@helper
def _high_word(a: Any, b: Any) -> Any:
    """Upper 64 bits of the 128-bit product."""
    a_low, a_high = a & _LOW_HALF, a >> _32
    b_low, b_high = b & _LOW_HALF, b >> _32
    middle = a_high * b_low + ((a_low * b_low) >> _32)
    other = a_low * b_high + (middle & _LOW_HALF)
    return a_high * b_high + (middle >> _32) + (other >> _32)


@helper
def _next_block(numbers: Numbers) -> None:
    numbers.counter[0] += _ONE
    c0, c1, c2, c3 = (
        numbers.counter[0],
        numbers.counter[1],
        numbers.counter[2],
        numbers.counter[3],
    )
    k0, k1 = numbers.key[0], numbers.key[1]
    for _ in range(_ROUNDS):
        high_0, low_0 = _high_word(_MULTIPLIER_0, c0), _MULTIPLIER_0 * c0
        high_1, low_1 = _high_word(_MULTIPLIER_1, c2), _MULTIPLIER_1 * c2
        c0, c1, c2, c3 = high_1 ^ c1 ^ k0, low_1, high_0 ^ c3 ^ k1, low_0
        k0 += _WEYL_0
        k1 += _WEYL_1
    numbers.block[0], numbers.block[1], numbers.block[2], numbers.block[3] = c0, c1, c2, c3
    numbers.used[0] = 0


@helper
def _next_word(numbers: Numbers) -> Any:
    """Next 64 random bits."""
    if numbers.used[0] == 4:
        _next_block(numbers)
    word = numbers.block[numbers.used[0]]
    numbers.used[0] += 1
    return word


@helper
def uniform(numbers: Numbers) -> float:
    """Next number, uniform on [0, 1)."""
    return float(_next_word(numbers) >> _11) * _TO_UNIT


@helper
def exponential(numbers: Numbers) -> float:
    """Next number, exponential with mean 1."""
    return -math.log(1.0 - uniform(numbers))


def _ziggurat() -> tuple[np.ndarray, np.ndarray]:
    """Cover exp(-x^2 / 2), x > 0, by layers of equal area, from the bottom up.

    returns     right edge of each layer, that of the lowest as wide as its area without a tail, and
                a last one of 0 (257,); height of the curve there (257,)
    source      Marsaglia and Tsang (2000), Journal of Statistical Software 5(8), The ziggurat
                method for generating random variables
    """
    area = _TAIL * math.exp(-0.5 * _TAIL**2)
    area += math.sqrt(math.pi / 2) * math.erfc(_TAIL / math.sqrt(2))
    edges = np.zeros(_LAYERS + 1)
    edges[0] = area * math.exp(0.5 * _TAIL**2)
    edges[1] = _TAIL
    for i in range(2, _LAYERS):
        height = math.exp(-0.5 * edges[i - 1] ** 2) + area / edges[i - 1]
        edges[i] = math.sqrt(-2.0 * math.log(height))
    return edges, np.exp(-0.5 * edges**2)


_EDGES, _HEIGHTS = _ziggurat()


@helper
def _beyond(numbers: Numbers) -> float:
    """A normal number, given that it lies beyond the lowest layer's edge.

    source      Marsaglia (1964), Technometrics 6, Generating a variable from the tail
    """
    while True:
        excess = exponential(numbers) / _TAIL
        if 2.0 * exponential(numbers) > excess * excess:
            return _TAIL + excess


@helper
def normal(numbers: Numbers) -> float:
    """Next number, standard normal; layer and place in it come from different bits of a word."""
    while True:
        word = _next_word(numbers)
        layer = int(word & _BYTE)
        value = (2.0 * float(word >> _11) * _TO_UNIT - 1.0) * _EDGES[layer]
        if abs(value) < _EDGES[layer + 1]:  # under the curve whatever the height, 99 times in 100
            return value
        if layer == 0:
            return math.copysign(_beyond(numbers), value)
        low, high = _HEIGHTS[layer], _HEIGHTS[layer + 1]
        if low + uniform(numbers) * (high - low) < math.exp(-0.5 * value * value):
            return value


@helper
def fill_normals(numbers: Numbers, count: int, out: Any) -> None:
    """Write independent standard normal numbers into out[:count]."""
    for i in range(count):
        out[i] = normal(numbers)
