"""Roughening: jitter after resampling, so that copies of one particle do not stay the same.

It trades exactness for variety, and with little process noise there may be no other source of it.

Source: Gordon, Salmond and Smith (1993), IEE Proceedings F 140, section on roughening: in a state
of n numbers each gets Gaussian jitter of standard deviation K E N^(-1/n), E being the range of that
number over the N particles.
"""

from __future__ import annotations

from filters.compiled import helper
from filters.particles.cloud import Cloud
from filters.random_numbers import Numbers, normal


@helper
def roughen(n: int, factor: float, numbers: Numbers, cloud: Cloud) -> None:
    """Jitter all particles by the factor K, one number of the state after the other."""
    states = cloud.states
    particles = states.shape[0]
    for column in range(n):
        least, most = states[0, column], states[0, column]
        for i in range(1, particles):
            least = min(least, states[i, column])
            most = max(most, states[i, column])
        deviation = factor * (most - least) * particles ** (-1.0 / n)
        for i in range(particles):
            states[i, column] += deviation * normal(numbers)
