"""Summaries: one row a case, and one row a case and scan."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from harness.evidence.case_scores import CaseScores
from harness.trials.posterior_scores import BINS
from harness.trials.score import ScoringRules
from metrics.consistency import chi_square_mean_bounds, nees_inside
from metrics.gospa import mean_gospa
from metrics.intervals import (
    Interval,
    effective_sample_size,
    mean_influence,
    mean_interval,
    root_mean_interval,
    wilson_interval,
)
from metrics.scan_rates import rate_of_counts

Row = dict[str, Any]


def summary_row(case: CaseScores, measurement_size: int, counts_hypotheses: bool) -> Row:
    """Metrics of a case, in the columns of summary.csv behind the swept keys and `strategy`.

    Errors and NEES are over the trials that held track, in the scoring window; SI units.
    """
    scores, held, counted = case.scores, case.held, case.counted
    dimension = 2 * case.axes
    lost, judged = int(case.lost.sum()), int(counted.sum())
    window_scans = len(scores.scan_estimates[case.window])
    row: Row = {
        "trials": case.trials,
        "lost": lost,
        "failed": int(scores.failed.sum()),
        **_with_interval("track_loss_rate", _ratio(lost, judged), wilson_interval(lost, judged)),
        **_root_mean("rmse_position", scores.position_square[held], scores.estimates[held]),
        **_root_mean("rmse_velocity", scores.velocity_square[held], scores.estimates[held]),
        **_anees(case, dimension),
        **_gospa(case),
        "nees_inside": _share_inside(case, dimension),
        "rmse_position_all": _root_mean(
            "all", scores.position_square[counted], scores.estimates[counted]
        )["all"],
        "effective_trials": effective_sample_size(
            scores.position_square[held], scores.estimates[held]
        ),
        "no_estimate": 1.0 - _ratio(int(scores.estimates[counted].sum()), judged * window_scans),
        "anis": _mean(scores.nis[counted]) / measurement_size,
        "hypotheses_per_scan": _mean(scores.hypotheses[counted]) if counts_hypotheses else np.nan,
        "us_per_scan": case.us_per_scan,
        "outside": _ratio(int(scores.outside.sum()), case.trials * len(scores.scan_estimates)),
        "impossible_scans": int(scores.impossible[counted].sum()),
    }
    return row


def existence_row(case: CaseScores) -> Row:
    """Metrics of a case's probability of existence, where it follows that.

    Over the scans of the window with an estimate, of trials that did not fail: on target where the
    error is within the limit of track loss.
    """
    scores, counted = case.scores, case.counted
    if np.isnan(scores.existence_error).all():
        return {}
    scans, on = scores.estimates[counted], scores.on_target[counted]
    return {
        **_mean_with_interval("existence_error", scores.existence_error[counted], scans),
        **_mean_with_interval("existence_on", scores.existence_on[counted], on),
        **_mean_with_interval("existence_off", scores.existence_off[counted], scans - on),
    }


def posterior_row(case: CaseScores, rules: ScoringRules) -> Row:
    """Metrics of a case's whole posteriors, where they are asked for; the last columns.

    Over the scoring window of held trials, but for `posterior_gap_ise`, which is at most 1 and so
    is over every trial that did not fail. Intervals are over trials; that of
    `posterior_gap_kl` holds the error of its draws too, as each trial has its own.
    """
    scores = case.scores.posterior
    row: Row = {}
    if scores is None:
        return row
    held, counted = case.held, case.counted
    if rules.calibration is not None:
        scans = scores.posteriors[held]
        row |= _mean_with_interval("log_score", scores.log_score[held], scans)
        row |= _mean_with_interval("region_level", scores.region_level[held], scans)
        row |= _mean_with_interval("central_level", scores.central_level[held], scans)
        for level, inside in zip(rules.calibration.levels, scores.inside.T, strict=True):
            name = f"coverage_{100 * level:.10g}"
            row |= _with_interval(name, *rate_of_counts(inside[held], scans))
    if rules.posterior_gap is not None:
        gaps = scores.gaps
        row |= _mean_with_interval("posterior_gap_ise", scores.gap_ise[counted], gaps[counted])
        row["posterior_gap_ise_low"] = float(np.maximum(0.0, row["posterior_gap_ise_low"]))
        row |= _mean_with_interval("posterior_gap_kl", scores.gap_kl[held], gaps[held])
    return row


def calibration_rows(case: CaseScores) -> Mapping[str, np.ndarray]:
    """Histogram of transforms and coverage of regions; columns as `Results.calibration`."""
    scores, held = case.scores.posterior, case.held
    assert scores is not None
    transforms, regions = scores.transform_bins[held], scores.region_bins[held]
    within = np.cumsum(regions, axis=1)
    shares = [rate_of_counts(column, transforms.sum(axis=1)) for column in transforms.T]
    covered = [rate_of_counts(column, regions.sum(axis=1)) for column in within.T]
    return {
        "level": np.arange(1, BINS + 1) / BINS,
        **_columns("transform_share", shares),
        **_columns("coverage", covered),
    }


def _columns(name: str, rates: Sequence[tuple[float, Interval]]) -> Mapping[str, np.ndarray]:
    return {
        name: np.array([rate for rate, _ in rates]),
        f"{name}_low": np.array([float(interval.low) for _, interval in rates]),
        f"{name}_high": np.array([float(interval.high) for _, interval in rates]),
    }


def _mean_with_interval(name: str, values: np.ndarray, weights: np.ndarray) -> Row:
    mean, _ = mean_influence(values, weights)
    return _with_interval(name, mean, mean_interval(values, weights=weights))


def posterior_scan_rows(case: CaseScores, rules: ScoringRules) -> Mapping[str, np.ndarray]:
    """Metrics of whole posteriors scan by scan, where they are asked for."""
    scores = case.scores.posterior
    rows: dict[str, np.ndarray] = {}
    if scores is None:
        return rows
    if rules.calibration is not None:
        rows["log_score"] = _per_count(scores.scan_log_score, scores.scan_posteriors)
    if rules.posterior_gap is not None:
        rows["posterior_gap_ise"] = _per_count(scores.scan_gap_ise, scores.scan_gaps)
        rows["posterior_gap_kl"] = _per_count(scores.scan_gap_kl, scores.scan_gaps_held)
    return rows


def scan_rows(case: CaseScores, times: np.ndarray) -> Mapping[str, np.ndarray]:
    """Metrics of a case scan by scan, over held trials; columns as `Results.scans` names them.

    times   (scans,) s since the first scan
    """
    scores = case.scores
    dimension = 2 * case.axes
    count = scores.scan_estimates
    low, high = chi_square_mean_bounds(dimension, count)
    scans = np.arange(1, len(count) + 1)
    lost = np.array([np.sum(case.lost & (scores.lost_at < scan)) for scan in scans])
    judged = int(case.counted.sum())
    return {
        "scan": scans,
        "time_s": times,
        "held": count,
        "rmse_position": np.sqrt(_per_count(scores.scan_position_square, count)),
        "rmse_velocity": np.sqrt(_per_count(scores.scan_velocity_square, count)),
        "nees": _per_count(scores.scan_nees, count),
        "nees_low": low,
        "nees_high": high,
        "dimension": np.full(len(count), dimension),
        "lost": lost / judged if judged else np.full(len(count), np.nan),
    }


def _with_interval(name: str, value: float, interval: tuple[Any, Any]) -> Row:
    return {name: value, f"{name}_low": float(interval[0]), f"{name}_high": float(interval[1])}


def _root_mean(name: str, squares: np.ndarray, weights: np.ndarray) -> Row:
    mean, _ = mean_influence(squares, weights)
    return _with_interval(
        name, float(np.sqrt(mean)), root_mean_interval(squares, 2, weights=weights)
    )


def _anees(case: CaseScores, dimension: int) -> Row:
    values, weights = case.scores.nees[case.held], case.scores.estimates[case.held]
    mean, _ = mean_influence(values, weights)
    low, high = mean_interval(values, weights=weights)
    return _with_interval("anees", mean / dimension, (low / dimension, high / dimension))


def _gospa(case: CaseScores) -> Row:
    counted, scores, order = case.counted, case.scores, case.order
    mean = mean_gospa(
        scores.gospa_localisation[counted],
        scores.gospa_missed[counted],
        scores.gospa_false[counted],
        order,
    )
    return {
        **_with_interval(
            "gospa", mean.distance, root_mean_interval(case.gospa_power[counted], order)
        ),
        "gospa_localisation": mean.localisation,
        "gospa_missed": mean.missed,
        "gospa_false": mean.false,
    }


def _share_inside(case: CaseScores, dimension: int) -> float:
    count = case.scores.scan_estimates[case.window]
    mean = _per_count(case.scores.scan_nees[case.window], count)
    return nees_inside(mean, count, dimension)


def _per_count(sums: np.ndarray, count: np.ndarray) -> np.ndarray:
    mean = np.full(len(count), np.nan)
    np.divide(sums, count, out=mean, where=count > 0)
    return mean


def _ratio(part: int, whole: int) -> float:
    return part / whole if whole else float("nan")


def _mean(values: np.ndarray) -> float:
    return mean_influence(values)[0]
