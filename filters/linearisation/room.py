"""Working memory for moving one component on and for what it predicts of a scan's measurement."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from filters.records import zeroed_records


class PointRoom(NamedTuple):
    """Working memory for a rule of so many points."""

    states: Any  # (count, n)
    measured: Any  # (count, m)
    moved: Any  # (count, n)
    values: Any  # (count,)
    root: Any  # (n, n) L
    spread: Any  # (2, n, n)
    middle: Any  # (n,)


class UpdateRoom(NamedTuple):
    """Working memory of the update."""

    prediction: Any  # (2,) see _room_for_prediction; shared by a scan's detections, or one's own
    points: Any  # PointRoom where a rule is used, else None


def room_for_update(n: int, m: int, points: int) -> UpdateRoom:
    """Room for states of n and measurements of m numbers, and rules of so many points."""
    if points == 0:
        return UpdateRoom(_room_for_prediction(n, m), None)
    return UpdateRoom(
        _room_for_prediction(n, m),
        PointRoom(
            np.empty((points, n)),
            np.empty((points, m)),
            np.empty((points, n)),
            np.empty(points),
            np.empty((n, n)),
            np.empty((2, n, n)),
            np.empty(n),
        ),
    )


def _room_for_prediction(n: int, m: int) -> np.ndarray:
    return zeroed_records(
        2,
        [
            ("measurement", float, (m,)),  # expected
            ("jacobian", float, (m, n)),
            ("noise", float, (m, m)),
            ("filled", bool),  # these two hold values, good for as long as they are constant
            ("cross", float, (n, m)),  # covariance of state and measurement
            ("spread", float, (m, m)),  # covariance of the innovation
            ("factor", float, (m, m)),  # its Cholesky factor, see cholesky
            ("log_peak", float),  # log density of a detection of no distance, less -m/2 log 2 pi
            ("gain", float, (n, m)),
            ("innovation", float, (m,)),
            ("solved", float, (m,)),
            ("work", float, (2, n, n)),
            ("state", float, (n,)),  # where it is linearised, if not at the mean
            ("converted", float, (m + 1, m)),  # a detection as a position, and its covariance
            ("reference", float, (m,)),  # among points: the mean's measurement,
            ("middle", float, (m,)),  # the average of the points' offsets from it,
            ("point_noise", float, (m, m)),  # and the noise at one
        ],
    )


def room_for_steps(n: int, modes: int) -> np.ndarray:
    """Room for moving a component on, a record for each mode."""
    room = zeroed_records(
        modes,
        [
            ("expected", float, (n,)),  # mean after the interval
            ("transition", float, (n, n)),  # Jacobian of the motion
            ("disturbance", float, (n, n)),  # process noise
            ("filled_for", float),  # s, the interval of these two; kept while the motion is linear
            ("square", float, (n, n)),
        ],
    )
    room["filled_for"] = np.nan
    return room
