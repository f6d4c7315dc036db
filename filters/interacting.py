"""Targets that change their motion: modes, and how components pass from one to another.

The mode is a Markov chain over the scans; every component carries the mode that it moves by. Either
every component goes on in every mode (exact; the reduction keeps the number down), or components
are first mixed into one for each mode: the interacting multiple model estimator.

Source: Blom and Bar-Shalom (1988), IEEE Transactions on Automatic Control 33(8), The interacting
multiple model algorithm for systems with Markovian switching coefficients; around PDA: Houles and
Bar-Shalom (1989), IEEE Transactions on Aerospace and Electronic Systems 25(2).
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from filters.compiled import chosen_by_type, helper
from filters.mixture import (
    Mixture,
    add_to_covariance,
    add_to_mean,
    clear_moments,
    copy_component,
    copy_gaussian,
    forget_history,
    mirror,
    room_for_mixture,
)
from filters.models.contract import MotionModel
from filters.track import Start


class OneMode(NamedTuple):
    """A target that always moves alike."""

    motion: MotionModel


class SeveralModes(NamedTuple):
    """The motions that a target may be in, and how it changes between them."""

    motions: tuple[MotionModel, ...]
    transition: np.ndarray  # (modes, modes) probability of the column's mode after the row's
    start: np.ndarray  # (modes,) probability of each at the first scan
    mixes: bool  # into one component for each mode, before every scan but the first


Modes = OneMode | SeveralModes


def mode_count(modes: Modes) -> int:
    """How many motions there are."""
    return len(modes.motions) if isinstance(modes, SeveralModes) else 1


def most_predicted(modes: Modes, components: int) -> int:
    """Components predicted at most, of so many."""
    branches = isinstance(modes, SeveralModes) and not modes.mixes
    return components * mode_count(modes) if branches else components


def room_for_mixing(n: int, modes: Modes) -> Mixture | None:
    """Room to mix components in, where there are several modes."""
    return room_for_mixture(n, mode_count(modes), 0) if isinstance(modes, SeveralModes) else None


@helper
def _start_in_one(n: int, modes: OneMode, start: Start, out: Mixture) -> int:
    """Write the start as one component."""
    out.weights[0] = 1.0
    out.modes[0] = 0
    forget_history(out.histories[0])
    copy_gaussian(n, start.mean, start.covariance, out.means[0], out.covariances[0])
    return 1


@helper
def _start_in_several(n: int, modes: SeveralModes, start: Start, out: Mixture) -> int:
    """Write the start as one component for each mode; return their number."""
    count = modes.start.shape[0]
    for mode in range(count):
        out.weights[mode] = modes.start[mode]
        out.modes[mode] = mode
        forget_history(out.histories[mode])
        copy_gaussian(n, start.mean, start.covariance, out.means[mode], out.covariances[mode])
    return count


@helper
def _stay_apart(n: int, modes: OneMode, mixture: Mixture, count: int, room: Any) -> int:
    """Leave the components as they are."""
    return count


@helper
def _interact(n: int, modes: SeveralModes, mixture: Mixture, count: int, room: Any) -> int:
    """Mix the components if the modes do."""
    if modes.mixes:
        return _mix(n, modes.transition, mixture, count, room)
    return count


@helper
def _one_branch(modes: OneMode, is_first: bool) -> int:
    """How many ways a component goes on."""
    return 1


@helper
def _branches(modes: SeveralModes, is_first: bool) -> int:
    """How many ways a component goes on: in its own mode, or in every one."""
    return 1 if modes.mixes or is_first else modes.start.shape[0]


@helper
def _unbranched(modes: OneMode, mixture: Mixture, parent: int, branch: int, branches: int) -> Any:
    """Weight and mode of a component that goes on."""
    return mixture.weights[parent], 0


@helper
def _branched(
    modes: SeveralModes, mixture: Mixture, parent: int, branch: int, branches: int
) -> Any:
    """Weight and mode of a component that goes on."""
    mode = mixture.modes[parent]
    if branches == 1:
        return mixture.weights[parent], mode
    return mixture.weights[parent] * modes.transition[mode, branch], branch


@helper
def _only_motion(modes: OneMode, mode: int) -> MotionModel:
    return modes.motion


@helper
def _motion_of(modes: SeveralModes, mode: int) -> MotionModel:
    return modes.motions[mode]


@helper
def _mix(n: int, transition: Any, mixture: Mixture, count: int, room: Mixture) -> int:
    """Mix components into one for each mode that has a probability, in place; return their number.

    The new component of mode j has the moments of all, weighed by w_i transition[mode_i, j].
    """
    written = 0
    for mode in range(transition.shape[0]):
        total = 0.0
        for i in range(count):
            total += mixture.weights[i] * transition[mixture.modes[i], mode]
        if not total > 0.0:
            continue
        mean, covariance = room.means[written], room.covariances[written]
        clear_moments(n, mean, covariance)
        for i in range(count):
            share = mixture.weights[i] * transition[mixture.modes[i], mode] / total
            add_to_mean(n, share, mixture.means[i], mean)
        for i in range(count):
            share = mixture.weights[i] * transition[mixture.modes[i], mode] / total
            spread = mixture.covariances[i]
            add_to_covariance(n, share, mixture.means[i], spread, mean, covariance)
        mirror(n, covariance)
        room.weights[written] = total
        room.modes[written] = mode
        written += 1
    for j in range(written):
        copy_component(n, room, j, mixture, j)
    return written


start_in_modes = chosen_by_type("modes", {OneMode: _start_in_one, SeveralModes: _start_in_several})
interact = chosen_by_type("modes", {OneMode: _stay_apart, SeveralModes: _interact})
branches_of = chosen_by_type("modes", {OneMode: _one_branch, SeveralModes: _branches})
branch_of = chosen_by_type("modes", {OneMode: _unbranched, SeveralModes: _branched})
motion_of = chosen_by_type("modes", {OneMode: _only_motion, SeveralModes: _motion_of})
