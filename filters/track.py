"""What goes into a strategy and what comes out: prior, scans, when to give up, and tracks."""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np

from filters.compiled import helper
from filters.posteriors import NOT_ASKED, Posteriors

ORIGIN_UNKNOWN = -2


class Prior(NamedTuple):
    """What a strategy knows of the target at the start: what it is told, or takes from detections.

    What each trial has of its own, where that is not empty, stands in place of what all share.
    """

    mean: np.ndarray  # (n,)
    covariance: np.ndarray  # (n, n)
    means: np.ndarray = np.empty((0, 0))  # (trials, n)
    covariances: np.ndarray = np.empty((0, 0, 0))  # (trials, n, n)
    # (trials,) scan that the start is taken from, the number of scans if there is no start
    scans: np.ndarray = np.empty(0, np.int64)


class Start(NamedTuple):
    """Where one trial starts."""

    mean: Any  # (n,)
    covariance: Any  # (n, n)
    scan: int  # the first to update with
    has_estimate: bool  # at the scan before: the start, taken from it


class Scans(NamedTuple):
    """The detections of a batch of trials; which of them are the target's is not told.

    Only known association is given origins; everyone else finds ORIGIN_UNKNOWN there.
    """

    intervals: np.ndarray  # (scans,) s since the scan before; the first is not used
    detections: np.ndarray  # (total, m) all trials and scans in a row, at random within a scan
    offsets: np.ndarray  # (trials, scans + 1) scan k of a trial is offsets[k] : offsets[k + 1]
    origins: np.ndarray  # (trials, scans) index within the scan, NOT_DETECTED or ORIGIN_UNKNOWN
    most_detections: int  # in any one scan


class Scan(NamedTuple):
    """One scan as a strategy sees it."""

    interval: float  # s since the scan before
    site: Any  # (2 * axes,) the sensor's position and velocity
    detections: Any  # (M, m)
    origin: int  # the target's detection, NOT_DETECTED or ORIGIN_UNKNOWN


class Ending(NamedTuple):
    """When a strategy gives up a track; from then on it has no estimate."""

    empty_scans: int  # in a row with nothing in the gate; 0 for never
    position_sd: float  # m, of any axis; infinite for never
    axes: int


class Tracks(NamedTuple):
    """Room for what a strategy says of a batch of trials, filled by its kernel."""

    means: np.ndarray  # (trials, scans, n)
    covariances: np.ndarray  # (trials, scans, n, n)
    present: np.ndarray  # (trials, scans) bool: there is an estimate
    own_distance: np.ndarray  # (trials, scans) squared distance of the true origin, where known
    hypotheses: np.ndarray  # (trials,) formed before reduction, summed over scans
    scans_run: np.ndarray  # (trials,) scans until the track was ended
    impossible: np.ndarray  # (trials,) scans impossible under the model assumed
    existence: np.ndarray  # (trials, scans) probability that there is a target; (trials, 0) if sure
    posteriors: Posteriors  # where they are asked for


def room_for_tracks(
    scans: Scans, n: int, posteriors: Posteriors = NOT_ASKED, with_existence: bool = False
) -> Tracks:
    """Empty room for states of n numbers: no estimate anywhere, NaN where nothing is written."""
    trials, length = scans.origins.shape
    return Tracks(
        np.full((trials, length, n), np.nan),
        np.full((trials, length, n, n), np.nan),
        np.zeros((trials, length), np.bool_),
        np.full((trials, length), np.nan),
        np.zeros(trials, np.int64),
        np.zeros(trials, np.int64),
        np.zeros(trials, np.int64),
        np.full((trials, length if with_existence else 0), np.nan),
        posteriors,
    )


def tracks_of(tracks: Tracks, rows: slice) -> Tracks:
    """The tracks of some of the trials, without copying and without their posteriors."""
    columns = tracks._asdict()
    del columns["posteriors"]
    rows_of = {name: column[rows] for name, column in columns.items()}
    return Tracks(**rows_of, posteriors=NOT_ASKED)


@helper
def start_of(prior: Prior, scans: Scans, trial: int) -> Start:
    """Where a trial starts; behind its last scan if nowhere."""
    mean = prior.means[trial] if prior.means.shape[0] > 0 else prior.mean
    covariance = prior.covariances[trial] if prior.covariances.shape[0] > 0 else prior.covariance
    if prior.scans.shape[0] > 0:
        scan = prior.scans[trial]
        return Start(mean, covariance, scan + 1, scan < scans.intervals.shape[0])
    return Start(mean, covariance, 0, False)


@helper
def scan_of(scans: Scans, sites: Any, trial: int, k: int) -> Scan:
    """Scan k of a trial; sites (scans, 2 * axes), or (1, 2 * axes) for a sensor that stays."""
    site = sites[k] if sites.shape[0] > 1 else sites[0]
    first, end = scans.offsets[trial, k], scans.offsets[trial, k + 1]
    return Scan(scans.intervals[k], site, scans.detections[first:end], scans.origins[trial, k])


@helper
def clear_estimate(n: int, mean: Any, covariance: Any) -> None:
    """Write NaN: no estimate."""
    for row in range(n):
        mean[row] = math.nan
        for column in range(n):
            covariance[row, column] = math.nan


@helper
def past_limit(ending: Ending, empty_scans: int, covariance: Any) -> bool:
    """Whether the track is to be given up after a scan; covariance (n, n), position first."""
    if ending.empty_scans > 0 and empty_scans >= ending.empty_scans:
        return True
    for axis in range(ending.axes):
        if covariance[axis, axis] > ending.position_sd * ending.position_sd:
            return True
    return False
