"""What whole posteriors say of the truth, and how far they are from a reference: scan by scan.

Over position and velocity, whatever else a state holds, as NEES is. Trials go one by one, with
random numbers of their own, so that no value depends on what else is run.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from filters.posteriors import Posteriors
from filters.random_numbers import POSTERIOR_GAP, REGION_LEVEL, Numbers, generator_at
from harness.scene.batch import Truth
from harness.study.schema import Calibration, PosteriorGap
from metrics.calibration import coordinate_transform, log_score, region_level
from metrics.gaussian_mixtures import GaussianMixtures, gaussian_mixtures
from metrics.kernel_density import kernel_mixtures
from metrics.posterior_gap import (
    ReferenceDraws,
    divergence_at,
    gap_of_overlaps,
    log_overlap,
    reference_draws,
)

# Components that together have less weight are left out: unreduced mixtures have very many.
_LEFT_OUT = 1e-9


@dataclass(frozen=True)
class PosteriorValues:
    """Values of every scan of some trials, NaN where there is no posterior or it is not asked."""

    log_score: np.ndarray  # (trials, scans) nats
    region_level: np.ndarray  # (trials, scans)
    transform: np.ndarray  # (trials, scans, axes)
    gap_ise: np.ndarray  # (trials, scans) in [0, 1]
    gap_kl: np.ndarray  # (trials, scans) nats


@dataclass(frozen=True)
class ReferenceTrial:
    """The reference's posteriors in one trial, and what is worked out once for all strategies."""

    mixtures: GaussianMixtures
    own_overlap: np.ndarray  # (scans,)
    drawn: ReferenceDraws


def mixtures_of(recorded: Posteriors, axes: int) -> list[GaussianMixtures | None]:
    """Posteriors in position and velocity, (scans, C) of each trial; None for one without any."""
    kinematics = slice(2 * axes)
    recorded = recorded._replace(
        means=recorded.means[:, kinematics],
        covariances=recorded.covariances[:, kinematics, kinematics],
    )
    ends = np.cumsum(recorded.counts.ravel()).reshape(recorded.counts.shape)
    found: list[GaussianMixtures | None] = []
    for counts, last in zip(recorded.counts, ends, strict=True):
        parts = [_components(recorded, end - n, end) for n, end in zip(counts, last, strict=True)]
        found.append(_padded(parts, recorded) if counts.any() else None)
    return found


def _components(recorded: Posteriors, first: int, end: int) -> np.ndarray:
    """Which components stand for a scan's posterior: all but the lightest."""
    places = np.arange(first, end)
    if not len(recorded.covariances) or end - first < 2:
        return places
    order = np.argsort(recorded.weights[first:end], kind="stable")
    light = np.cumsum(recorded.weights[first:end][order]) < _LEFT_OUT
    return np.sort(places[order[~light]])


def _padded(parts: Sequence[np.ndarray], recorded: Posteriors) -> GaussianMixtures | None:
    n = recorded.means.shape[1]
    most = max(len(part) for part in parts)
    weights = np.zeros((len(parts), most))
    means = np.zeros((len(parts), most, n))
    covariances = (
        np.tile(np.eye(n), (len(parts), most, 1, 1)) if len(recorded.covariances) else None
    )
    for k, part in enumerate(parts):
        if not len(part) or not _are_sound(recorded, part):
            continue
        weights[k, : len(part)] = recorded.weights[part] / recorded.weights[part].sum()
        means[k, : len(part)] = recorded.means[part]
        if covariances is not None:
            covariances[k, : len(part)] = recorded.covariances[part]
    if not weights.any():
        return None
    if covariances is None:
        return kernel_mixtures(weights, means)
    return gaussian_mixtures(weights, means, covariances)


def _are_sound(recorded: Posteriors, part: np.ndarray) -> bool:
    """Whether a posterior is one: finite, and no component nor the whole cloud has collapsed."""
    weights, means = recorded.weights[part], recorded.means[part]
    if not (np.isfinite(weights).all() and np.isfinite(means).all()):
        return False
    if len(recorded.covariances):
        covariances = recorded.covariances[part]
    else:
        offsets = means - weights @ means
        covariances = (weights * offsets.T) @ offsets
    try:
        return bool(np.isfinite(np.linalg.cholesky(covariances)).all())
    except np.linalg.LinAlgError:
        return False


def reference_trials(
    recorded: Posteriors, gap: PosteriorGap, axes: int, numbers: Numbers, first_trial: int
) -> list[ReferenceTrial | None]:
    """Prepare the reference's posteriors, trial by trial."""
    found: list[ReferenceTrial | None] = []
    for trial, mixtures in enumerate(mixtures_of(recorded, axes), start=first_trial):
        if mixtures is None:
            found.append(None)
            continue
        rng = generator_at(numbers, trial, POSTERIOR_GAP)
        drawn = reference_draws(mixtures, gap.samples, rng)
        found.append(ReferenceTrial(mixtures, log_overlap(mixtures, mixtures), drawn))
    return found


def posterior_values(
    recorded: Posteriors,
    truth: Truth,
    calibration: Calibration | None,
    references: Sequence[ReferenceTrial | None] | None,
    numbers: Numbers,
    first_trial: int,
) -> PosteriorValues:
    """Values of a strategy's posteriors; a strategy that has none gets NaN.

    references  of the same trials, where the gap is asked for
    """
    shape = truth.states.shape[:2]
    log_scores, levels, ise, kl = np.full((4, *shape), np.nan)
    transforms = np.full((*shape, truth.axes), np.nan)
    values = PosteriorValues(log_scores, levels, transforms, ise, kl)
    if not recorded.counts.size:
        return values
    for i, mixtures in enumerate(mixtures_of(recorded, truth.axes)):
        if mixtures is None:
            continue
        if calibration is not None:
            rng = generator_at(numbers, first_trial + i, REGION_LEVEL)
            states = truth.kinematics[i]
            log_scores[i] = log_score(mixtures, states)
            levels[i] = region_level(mixtures, states, calibration.samples, rng)
            transforms[i] = coordinate_transform(mixtures, states)[..., : truth.axes]
        reference = None if references is None else references[i]
        if reference is not None:
            ise[i] = gap_of_overlaps(
                reference.own_overlap,
                log_overlap(mixtures, mixtures),
                log_overlap(reference.mixtures, mixtures),
            )
            kl[i] = divergence_at(reference.drawn, mixtures).estimate
    return values


def joined(parts: Sequence[PosteriorValues]) -> PosteriorValues:
    """The values of consecutive trials together."""
    names = PosteriorValues.__dataclass_fields__
    return PosteriorValues(
        **{name: np.concatenate([getattr(part, name) for part in parts]) for name in names}
    )
