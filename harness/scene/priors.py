"""What a strategy is told of the target at the first scan, trial by trial."""

from __future__ import annotations

import numpy as np

from filters.random_numbers import Numbers
from filters.track import Prior
from harness.scene.truth import draw_starts, prior_of
from harness.study.schema import Scene


def prior_means(
    scene: Scene, assumed: Scene, states: np.ndarray, numbers: Numbers, first_trial: int
) -> np.ndarray:
    """Means of the prior that a strategy is told, (trials, n of the assumed target) SI.

    Where the truth is drawn from the prior they are the assumed mean. Where the truth is stated
    they are drawn around it instead: with the scene's own spread, by the numbers that would have
    drawn the truth, and moved by what the strategy assumes of the mean beyond the scene. What the
    assumed target's state holds and the scene's does not is as the strategy states it.

    states      (trials, scans, 3 axes) true position, velocity and acceleration
    """
    trials = len(states)
    own, told = scene.target, assumed.target
    mean = told.start_mean()
    if scene.legs is None:
        return np.tile(mean, (trials, 1))
    start = states[0, 0]
    true_start = own.state_of(*np.split(start, 3))
    offsets = draw_starts(
        scene, Prior(true_start, prior_of(scene).covariance), numbers, first_trial, trials
    )
    shared = len(true_start) if type(own) is type(told) else 2 * own.axes
    means = np.tile(mean, (trials, 1))
    means[:, :shared] += offsets[:, :shared] - own.start_mean()[:shared]
    return means
