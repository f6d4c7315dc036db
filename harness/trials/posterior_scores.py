"""Scores of whole posteriors on a span of trials: a row a trial, and sums over trials a scan."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harness.trials.posterior_values import PosteriorValues
from metrics.calibration import central_level
from metrics.present import mean_where_present

BINS = 20  # of the histograms of transforms and region levels


@dataclass(frozen=True)
class PosteriorScores:
    """What is kept of a strategy's posteriors over a span.

    Trials: over the scans of the scoring window with a posterior, NaN where there is none; NaN and
    no scans for failed trials.
    """

    # (trials,)
    posteriors: np.ndarray  # scans of the window with a posterior
    log_score: np.ndarray  # nats, mean
    region_level: np.ndarray  # mean
    central_level: np.ndarray  # mean over scans and position coordinates
    gaps: np.ndarray  # scans of the window where the reference has a posterior too
    gap_ise: np.ndarray  # mean
    gap_kl: np.ndarray  # nats, mean
    # (trials, ...) scans of the window
    transform_bins: np.ndarray  # (trials, BINS) over position coordinates together
    region_bins: np.ndarray  # (trials, BINS)
    inside: np.ndarray  # (trials, levels) with the truth inside the region of each level asked for
    # (scans,) over held trials, gap_ise over all that did not fail
    scan_posteriors: np.ndarray
    scan_log_score: np.ndarray
    scan_gaps: np.ndarray
    scan_gap_ise: np.ndarray
    scan_gaps_held: np.ndarray
    scan_gap_kl: np.ndarray


POSTERIOR_TRIAL_COLUMNS = tuple(PosteriorScores.__dataclass_fields__)[:7]
POSTERIOR_TABLE_COLUMNS = tuple(PosteriorScores.__dataclass_fields__)[7:10]
POSTERIOR_SCAN_COLUMNS = tuple(PosteriorScores.__dataclass_fields__)[10:]


def posterior_scores(
    values: PosteriorValues,
    failed: np.ndarray,
    held: np.ndarray,
    window: slice,
    levels: tuple[float, ...],
) -> PosteriorScores:
    """Sum up the values of a span.

    failed, held    (trials,) bool
    levels          for which coverage is asked
    """
    sound = ~failed[:, np.newaxis]
    score, level = values.log_score, values.region_level
    known = ~np.isnan(score) & sound
    gap_known = ~np.isnan(values.gap_ise) & sound

    seen = known[:, window]
    level_seen = np.where(seen, level[:, window], np.nan)
    transform = np.where(seen[..., np.newaxis], values.transform[:, window], np.nan)
    trials = len(failed)
    central = central_level(transform).reshape(trials, -1)
    gap_seen = gap_known[:, window]

    def mean(scans: np.ndarray, present: np.ndarray) -> np.ndarray:
        return np.asarray(mean_where_present(scans, present, axis=1))

    def scan_sum(scans: np.ndarray, present: np.ndarray) -> np.ndarray:
        return np.sum(scans, axis=0, where=present)

    on_held = held[:, np.newaxis]
    return PosteriorScores(
        posteriors=seen.sum(axis=1),
        log_score=mean(score[:, window], seen),
        region_level=mean(level_seen, seen),
        central_level=mean(central, ~np.isnan(central)),
        gaps=gap_seen.sum(axis=1),
        gap_ise=mean(values.gap_ise[:, window], gap_seen),
        gap_kl=mean(values.gap_kl[:, window], gap_seen),
        transform_bins=_in_bins(transform.reshape(trials, -1)),
        region_bins=_in_bins(level_seen),
        inside=np.stack([np.sum(level_seen <= at, axis=1) for at in levels], axis=1)
        if levels
        else np.zeros((trials, 0), np.int64),
        scan_posteriors=np.sum(known & on_held, axis=0),
        scan_log_score=scan_sum(score, known & on_held),
        scan_gaps=gap_known.sum(axis=0),
        scan_gap_ise=scan_sum(values.gap_ise, gap_known),
        scan_gaps_held=np.sum(gap_known & on_held, axis=0),
        scan_gap_kl=scan_sum(values.gap_kl, gap_known & on_held),
    )


def _in_bins(values: np.ndarray) -> np.ndarray:
    """How many values of each trial lie in each of equal bins of [0, 1], (trials, BINS)."""
    place = np.minimum(np.floor(np.nan_to_num(values) * BINS), BINS - 1)
    there = ~np.isnan(values)
    return np.stack([np.sum((place == b) & there, axis=1) for b in range(BINS)], axis=1)
