"""Strategies: ways to follow one target through clutter, one file a family."""

from filters.strategies.gaussian import (
    GaussianMixture,
    KnownAssociation,
    MostProbableHypothesis,
    NearestNeighbour,
    ProbabilisticDataAssociation,
)
from filters.strategies.particles import ParticleFilter
from filters.strategies.unreduced import UnreducedMixture

STRATEGIES = (
    NearestNeighbour,
    MostProbableHypothesis,
    ProbabilisticDataAssociation,
    GaussianMixture,
    UnreducedMixture,
    ParticleFilter,
    KnownAssociation,
)
