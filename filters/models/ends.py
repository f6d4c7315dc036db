"""Checks of intervals."""

from __future__ import annotations

from filters.models.record import BadValue


def check_ends(name: str, ends: tuple[float, float], unit: str) -> None:
    """Check that an interval has positive length.

    raises      BadValue naming the interval
    """
    if not ends[0] < ends[1]:
        raise BadValue(name, f"must run from a lower to a higher value in {unit}", "swap its ends")


def check_angles(name: str, ends: tuple[float, float]) -> None:
    """Check that an interval of directions in degrees has positive length, at most a full turn.

    raises      BadValue naming the interval
    """
    check_ends(name, ends, "degrees")
    if ends[1] - ends[0] > 360.0:
        raise BadValue(name, "must not span more than 360 degrees", "bring its ends closer")
