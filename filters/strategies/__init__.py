"""Strategies: ways to follow one target through clutter, one file a family."""

from filters.strategies.gaussian import (
    GaussianMixture,
    KnownAssociation,
    MostProbableHypothesis,
    NearestNeighbour,
    ProbabilisticDataAssociation,
)
from filters.strategies.particles import ParticleFilter

STRATEGIES = (
    NearestNeighbour,
    MostProbableHypothesis,
    ProbabilisticDataAssociation,
    GaussianMixture,
    ParticleFilter,
    KnownAssociation,
)
