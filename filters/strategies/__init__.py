"""Strategies: ways to follow one target through clutter, one file a family."""

from filters.strategies.gaussian import (
    KnownAssociation,
    MostProbableHypothesis,
    NearestNeighbour,
)
from filters.strategies.mixtures import (
    GaussianMixture,
    NScanMixture,
    PrunedMixture,
    RunnallsMixture,
)
from filters.strategies.particles import ParticleFilter
from filters.strategies.pda import ProbabilisticDataAssociation
from filters.strategies.point_mass import PointMassGrid
from filters.strategies.rao_blackwellised import RaoBlackwellisedParticleFilter
from filters.strategies.unreduced import UnreducedMixture

STRATEGIES = (
    NearestNeighbour,
    MostProbableHypothesis,
    ProbabilisticDataAssociation,
    GaussianMixture,
    PrunedMixture,
    RunnallsMixture,
    NScanMixture,
    UnreducedMixture,
    PointMassGrid,
    ParticleFilter,
    RaoBlackwellisedParticleFilter,
    KnownAssociation,
)
