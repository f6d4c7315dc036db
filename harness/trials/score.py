"""Scores of a strategy on a span of trials: a row a trial, and sums over trials for each scan."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from filters.track import Tracks
from harness.scene.batch import Truth
from harness.study.schema import Calibration, Gospa, PosteriorGap, TrackLoss
from harness.trials.posterior_scores import PosteriorScores, posterior_scores
from harness.trials.posterior_values import PosteriorValues
from metrics.consistency import nees, squared_mahalanobis
from metrics.existence import ExistenceScores, existence_scores
from metrics.gospa import single_target_gospa
from metrics.position_error import mean_squared_error, squared_error
from metrics.present import mean_where_present
from metrics.track_loss import loss_scan


@dataclass(frozen=True)
class ScoringRules:
    """How trials are scored."""

    track_loss: TrackLoss
    gospa: Gospa
    first_scan: int  # index of the first scan that counts
    calibration: Calibration | None = None
    posterior_gap: PosteriorGap | None = None

    @property
    def need_posteriors(self) -> bool:
        """Whether whole posteriors are scored."""
        return self.calibration is not None or self.posterior_gap is not None


@dataclass(frozen=True)
class SpanScores:
    """What is kept of a strategy's run over a span: trials are rows, scans are sums over them.

    Means are over the scans of the scoring window with an estimate, and NaN where a trial has none;
    NaN throughout for failed trials.
    """

    # (trials,)
    lost_at: np.ndarray  # index of the scan at which the track was lost, -1 for held or failed
    failed: np.ndarray  # bool
    estimates: np.ndarray  # scans of the window with an estimate
    position_square: np.ndarray  # m2, mean squared position error
    velocity_square: np.ndarray  # m2/s2
    nees: np.ndarray  # mean, not divided by the dimension
    nis: np.ndarray  # mean over all scans where the true origin is known, NaN if it never is
    gospa_localisation: np.ndarray  # m^p, mean over the window's scans
    gospa_missed: np.ndarray
    gospa_false: np.ndarray
    hypotheses: np.ndarray  # mean number formed a scan while the track lasted
    impossible: np.ndarray  # scans impossible under the model assumed
    outside: np.ndarray  # scans with the target outside the sensor's region
    on_target: np.ndarray  # scans of the window with an estimate whose error is within the limit
    # of strategies that follow existence, else NaN; see metrics.existence
    existence_error: np.ndarray
    existence_on: np.ndarray
    existence_off: np.ndarray
    # (scans,), over held trials with an estimate there
    scan_estimates: np.ndarray
    scan_position_square: np.ndarray
    scan_velocity_square: np.ndarray
    scan_nees: np.ndarray
    # where they are asked for
    posterior: PosteriorScores | None = None


TRIAL_COLUMNS = tuple(SpanScores.__dataclass_fields__)[:17]
SCAN_COLUMNS = tuple(SpanScores.__dataclass_fields__)[17:-1]


def failed_trials(tracks: Tracks) -> np.ndarray:
    """Trials with an estimate not finite or a covariance not positive definite, (trials,) bool."""
    try:
        distance = squared_mahalanobis(tracks.means, tracks.covariances)
        # An infinite variance leaves the distance finite.
        sound = np.isfinite(distance + np.trace(tracks.covariances, axis1=-2, axis2=-1))
    except ValueError:  # some covariance is not positive definite: look for it one by one
        sound = _are_sound(tracks.means, tracks.covariances)
    return np.any(~sound & tracks.present, axis=1)


def _are_sound(means: np.ndarray, covariances: np.ndarray) -> np.ndarray:
    finite = np.isfinite(means).all(axis=-1) & np.isfinite(covariances).all(axis=(-2, -1))
    checked = np.where(finite[..., None, None], covariances, np.eye(means.shape[-1]))
    return finite & (np.linalg.eigvalsh(checked)[..., 0] > 0.0)


def loss_limit(rules: TrackLoss, reference: Tracks | None, axes: int) -> np.ndarray:
    """Position error above which a scan counts as bad, m: a number, or (trials, scans).

    reference   known association's tracks, for a limit in its standard deviations
    """
    if rules.error_above_m is not None:
        return np.asarray(rules.error_above_m)
    assert reference is not None
    assert rules.error_above_sigma is not None
    variances = np.diagonal(reference.covariances[..., :axes, :axes], axis1=-2, axis2=-1)
    limit = rules.error_above_sigma * np.sqrt(variances.sum(axis=-1))
    return np.where(reference.present, limit, np.inf)


def _existence_scores(
    tracks: Tracks, on_target: np.ndarray, seen: np.ndarray, window: slice
) -> ExistenceScores:
    """Scores of the probability of existence, NaN for strategies that don't follow it."""
    trials, followed = tracks.existence.shape
    if followed == 0:
        return ExistenceScores(*np.full((3, trials), np.nan))
    return existence_scores(tracks.existence[:, window], on_target, seen)


def score_span(
    truth: Truth,
    tracks: Tracks,
    reference: Tracks | None,
    rules: ScoringRules,
    posteriors: PosteriorValues | None = None,
) -> SpanScores:
    """Compare a strategy's tracks with the truth.

    reference   known association's tracks of the same scenes, where the rules need them
    posteriors  what is said of its posteriors, where the rules ask for it
    """
    axes = truth.axes
    failed = failed_trials(tracks)
    present = tracks.present & ~failed[:, None]
    estimate = tracks.means[..., : 2 * axes]  # NaN where there is none
    spread = tracks.covariances[..., : 2 * axes, : 2 * axes]
    if failed.any():
        estimate = np.where(failed[:, None, None], np.nan, estimate)
        spread = np.where(failed[:, None, None, None], np.nan, spread)
    position, velocity = estimate[..., :axes], estimate[..., axes:]

    position_square = squared_error(truth.position, position, present)
    velocity_square = squared_error(truth.velocity, velocity, present)
    position_error = np.sqrt(position_square)
    limit = loss_limit(rules.track_loss, reference, axes)
    lost_at = loss_scan(position_error, present, limit, rules.track_loss.for_scans)
    lost_at[failed] = -1

    consistency = nees(estimate - truth.kinematics, spread)

    window = slice(rules.first_scan, None)
    seen = present[:, window]
    parts = single_target_gospa(
        position_error[:, window], seen, rules.gospa.cutoff_m, rules.gospa.order
    )
    localisation, missed, false = (np.where(failed, np.nan, part.mean(axis=1)) for part in parts)

    on_target = (present & (position_error <= limit))[:, window]
    existence = _existence_scores(tracks, on_target, seen, window)

    held = present & (lost_at < 0)[:, None]
    known = np.isfinite(tracks.own_distance)

    def held_sum(values: np.ndarray) -> np.ndarray:
        return np.sum(values, axis=0, where=held)

    posterior = None
    if posteriors is not None:
        levels = () if rules.calibration is None else rules.calibration.levels
        posterior = posterior_scores(posteriors, failed, ~failed & (lost_at < 0), window, levels)

    return SpanScores(
        lost_at=lost_at,
        failed=failed,
        estimates=seen.sum(axis=1),
        position_square=mean_squared_error(position_square[:, window], seen),
        velocity_square=mean_squared_error(velocity_square[:, window], seen),
        nees=np.asarray(mean_where_present(consistency[:, window], seen, axis=1)),
        nis=np.asarray(mean_where_present(tracks.own_distance, known, axis=1)),
        gospa_localisation=localisation,
        gospa_missed=missed,
        gospa_false=false,
        hypotheses=tracks.hypotheses / np.maximum(tracks.scans_run, 1),
        impossible=tracks.impossible,
        outside=truth.outside.sum(axis=1),
        on_target=on_target.sum(axis=1),
        existence_error=existence.error,
        existence_on=existence.on,
        existence_off=existence.off,
        scan_estimates=held.sum(axis=0),
        scan_position_square=held_sum(position_square),
        scan_velocity_square=held_sum(velocity_square),
        scan_nees=held_sum(consistency),
        posterior=posterior,
    )
