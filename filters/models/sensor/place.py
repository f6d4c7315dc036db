"""Where a sensor is: fixed, on the move, on a stated path, or at one of several sites in turn."""

from __future__ import annotations

from typing import Annotated, Self

import numpy as np
from pydantic import Field, model_validator

from filters.models.record import BadValue, PerAxis, Real, Record, Ways


class Waypoint(Record):
    """A place on a path."""

    time_s: Real
    """When the sensor is there, on the clock of the scans, s."""
    position_m: Annotated[PerAxis, Field(min_length=1, max_length=3)]
    """Where it is, along each axis, m."""


class Place(Record):
    """Where a sensor is at each scan; by default at the origin."""

    position_m: Annotated[PerAxis, Field(min_length=1, max_length=3)] | None = None
    """Where the sensor stands, or is at the first scan if it moves, m; by default the origin."""
    velocity_m_per_s: Annotated[PerAxis, Field(min_length=1, max_length=3)] | None = None
    """Constant velocity of the sensor, m/s; by default it stands still."""
    path: Annotated[tuple[Waypoint, ...], Field(min_length=2)] | None = None
    """Path of the sensor in place of position and velocity: waypoints, joined by straight lines."""
    sites_m: (
        Annotated[
            tuple[Annotated[PerAxis, Field(min_length=1, max_length=3)], ...], Field(min_length=1)
        ]
        | None
    ) = None
    """Several sites that take turns, in place of one position: each scan uses the next, m."""

    @classmethod
    def alternatives(cls) -> tuple[Ways, ...]:
        """A place is stated in one of three ways."""
        ways = (("position_m", "velocity_m_per_s"), ("path",), ("sites_m",))
        return (*super().alternatives(), ways)

    def stated_places(self) -> dict[str, PerAxis]:
        """Every place and velocity that is stated, by its key."""
        stated = {key: getattr(self, key) for key in ("position_m", "velocity_m_per_s")}
        stated |= {
            f"path[{i}].position_m": point.position_m for i, point in enumerate(self.path or ())
        }
        stated |= {f"sites_m[{i}]": site for i, site in enumerate(self.sites_m or ())}
        return {key: place for key, place in stated.items() if place is not None}

    def axes_of_place(self) -> int:
        """Number of axes of the first place that is stated; 2 if none is."""
        return len(next(iter(self.stated_places().values()), (0.0, 0.0)))

    def sites(self, axes: int, times: np.ndarray) -> np.ndarray:
        """Position and velocity at each scan, (scans, 2 axes) SI; (1, 2 axes) if it stays.

        times   (scans,) s
        """
        if self.path is not None:
            return self._along_path(times)
        if self.sites_m is not None:
            turns = np.arange(len(times) if len(self.sites_m) > 1 else 1) % len(self.sites_m)
            places = np.array(self.sites_m, float)[turns]
            return np.hstack([places, np.zeros_like(places)])
        start = np.zeros(axes) if self.position_m is None else np.array(self.position_m, float)
        if self.velocity_m_per_s is None:
            return np.concatenate([start, np.zeros(axes)])[np.newaxis]
        velocity = np.array(self.velocity_m_per_s, float)
        since_start = (times - times[0])[:, np.newaxis]
        return np.hstack([start + since_start * velocity, np.tile(velocity, (len(times), 1))])

    def check_times(self, times: np.ndarray) -> None:
        """Check that the path covers all scans.

        raises      BadValue
        """
        if self.path is None:
            return
        if self.path[0].time_s > times[0] or self.path[-1].time_s < times[-1]:
            raise BadValue(
                "path",
                f"must reach from the first scan, at {times[0]:g} s, to the last, "
                f"at {times[-1]:g} s",
                "add a waypoint, or move the first or the last",
            )

    def _along_path(self, times: np.ndarray) -> np.ndarray:
        assert self.path is not None
        when = np.array([point.time_s for point in self.path])
        where = np.array([point.position_m for point in self.path], float)
        velocity = np.diff(where, axis=0) / np.diff(when)[:, np.newaxis]
        # At a waypoint the velocity is that of the leg that begins there.
        leg = np.clip(np.searchsorted(when, times, side="right") - 1, 0, len(velocity) - 1)
        return np.hstack([where[leg] + (times - when[leg])[:, np.newaxis] * velocity[leg],
                          velocity[leg]])  # fmt: skip

    @model_validator(mode="after")
    def _path_goes_forward_in_time(self) -> Self:
        path = self.path or ()
        for place in range(1, len(path)):
            if not path[place - 1].time_s < path[place].time_s:
                raise BadValue(
                    f"path[{place}].time_s",
                    "must be later than that of the waypoint before",
                    "order the path by time",
                )
        return self
