"""When a track is lost: the error stays above a limit for a number of scans in a row."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from metrics.present import values_and_presence


def loss_scan(
    position_error: ArrayLike,
    present: ArrayLike,
    error_above: ArrayLike,
    for_scans: int,
    forced_from: ArrayLike | None = None,
) -> NDArray[np.int64]:
    """First scan of the first run of `for_scans` scans above the limit; -1 for a track held.

    'No track' counts as above. A run cut short by the end of the trial is no loss. All scans of
    the trial count, not only a scoring window.

    position_error  (trials, scans) m
    present         (trials, scans) bool
    error_above     m, a number or an array that broadcasts to (trials, scans)
    forced_from     (trials,) scan from which a trial is lost whatever its errors (its gate left
                    the clutter window), -1 for none
    returns         (trials,) index of a scan, counted from 0
    raises          ValueError: as `values_and_presence`; a limit is NaN; for_scans below 1;
                    forced_from outside the trial
    """
    position_error, present = values_and_presence(position_error, present)
    error_above = np.asarray(error_above, float)
    trials, scans = position_error.shape
    if np.isnan(error_above).any():
        raise ValueError("error_above must not be NaN: no error is above that, so none is lost")
    if for_scans < 1:
        raise ValueError(f"for_scans must be at least 1, got {for_scans}")

    above = ~present | (position_error > error_above)
    above_before = np.zeros((trials, scans + 1), int)
    above_before[:, 1:] = np.cumsum(above, axis=1)
    starts_run = above_before[:, for_scans:] - above_before[:, :-for_scans] == for_scans
    lost_from = _first_true(starts_run)
    if forced_from is None:
        return lost_from

    forced_from = np.asarray(forced_from)
    if forced_from.shape != (trials,) or np.any((forced_from < -1) | (forced_from >= scans)):
        raise ValueError(
            f"forced_from must hold one scan index from -1 to {scans - 1} for each of the "
            f"{trials} trials, got {forced_from}"
        )
    return _earlier(lost_from, forced_from)


def _first_true(flags: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Index of the first True of each row, -1 where there is none."""
    if flags.shape[1] == 0:
        return np.full(len(flags), -1)
    return np.where(flags.any(axis=1), flags.argmax(axis=1), -1)


def _earlier(first: NDArray[np.int64], second: NDArray[np.int64]) -> NDArray[np.int64]:
    """The smaller of two scan indices, where -1 stands for never."""
    return np.where(
        (first < 0) | (second < 0), np.maximum(first, second), np.minimum(first, second)
    )
