"""Calibration of whole filters: honest where they are exact, and found out where they are not.

A target on a line is seen in two false detections a scan, with a detection probability of 0.7.
"""

import numpy as np
import pytest
from plain_filters import keep_all, keep_nearest, run
from scipy.stats import kstest
from small_worlds import constant_velocity_world, draw_scenes_of

from metrics.calibration import (
    coordinate_transform,
    coverage,
    gaussian_region_level,
    log_score,
    log_score_difference,
    mean_level,
    region_level,
    shares_in_bins,
)
from metrics.gaussian_mixtures import gaussian_mixtures

TRIALS, SCANS, WIDTH = 300, 3, 10.0
SURE = 0.9999  # level of intervals that are to hold the honest value


def world_with(clutter=0.1):
    return constant_velocity_world(detection_probability=0.7, clutter=clutter)


@pytest.fixture(scope="module")
def scenes():
    """Clutter reaches ten noise deviations from the truth; what is further off explains nothing."""
    return draw_scenes_of(
        world_with(), np.random.default_rng(1), TRIALS, SCANS, clutter_half_width=WIDTH
    )


def mixtures_of(plain, trials):
    """The unreduced mixture of each trial and scan, padded to one size."""
    posteriors = []

    def keep(rows):
        posteriors.append(keep_all(rows))
        return posteriors[-1]

    for scans in trials:
        run(plain, scans, keep)
    most = max(map(len, posteriors))
    n = len(plain.F)
    weights = np.zeros((len(posteriors), most))
    means, covariances = np.zeros((*weights.shape, n)), np.zeros((*weights.shape, n, n))
    for place, parts in enumerate(posteriors):
        for column, part in enumerate(parts):
            weights[place, column], means[place, column], covariances[place, column] = part
    batch = (len(trials), -1, most)
    return gaussian_mixtures(
        weights.reshape(batch),
        means.reshape(*batch, n),
        covariances.reshape(*batch, n, n),
    )


@pytest.fixture(scope="module")
def exact(scenes):
    return mixtures_of(world_with().plain, scenes.trials)


def test_the_exact_posterior_is_calibrated_in_every_respect(scenes, exact):
    """15 intervals at 99.99 % and three Kolmogorov-Smirnov tests of the last scans' values at 1e-4:
    by chance once in 500 seeds."""
    levels = region_level(exact, scenes.states, 99, np.random.default_rng(2))
    transform = coordinate_transform(exact, scenes.states)
    checks = [
        mean_level(levels, SURE),
        *(mean_level(transform[..., axis], SURE) for axis in range(2)),
        *(coverage(levels, of, SURE) for of in (0.5, 0.9)),
        *shares_in_bins(levels, level=SURE),
    ]
    assert not any(check.rejected for check in checks)
    for values in (levels, transform[..., 0], transform[..., 1]):
        assert kstest(values[:, -1], "uniform").pvalue > 1 - SURE


def score_difference(posterior, exact, states):
    return log_score_difference(log_score(posterior, states), log_score(exact, states))


def test_assuming_hardly_any_clutter_is_too_sure_and_scores_worse(scenes, exact):
    """A fiftieth of the density: false detections are trusted."""
    wrong = mixtures_of(world_with(clutter=0.002).plain, scenes.trials)
    levels = region_level(wrong, scenes.states, 99, np.random.default_rng(3))
    assert mean_level(levels, SURE).interval.low > 0.5
    assert coverage(levels, 0.9, SURE).interval.high < 0.9
    assert score_difference(wrong, exact, scenes.states).interval.low > 0


def test_assuming_far_too_much_clutter_shows_in_the_log_score_alone(scenes, exact):
    """Fifty times the density: detections count for little, and what is left, close to the prior,
    is honest. At 95 %; the difference is some ten standard errors."""
    wrong = mixtures_of(world_with(clutter=5.0).plain, scenes.trials)
    levels = region_level(wrong, scenes.states, 99, np.random.default_rng(3))
    assert not mean_level(levels, SURE).rejected
    assert score_difference(wrong, exact, scenes.states).interval.low > 0


def test_one_gaussian_for_the_exact_posterior_scores_worse_and_nearest_neighbour_is_too_sure(
    scenes, exact
):
    plain = world_with().plain
    nearest = [run(plain, scans, keep_nearest) for scans in scenes.trials]
    means, covariances = (np.array([track[part] for track in nearest]) for part in (0, 1))
    levels = gaussian_region_level(means - scenes.states, covariances)
    assert mean_level(levels, SURE).interval.low > 0.5
    assert coverage(levels, 0.9, SURE).interval.high < 0.9

    matched = [run(plain, scans, keep_all) for scans in scenes.trials]
    means, covariances = (np.array([track[part] for track in matched]) for part in (0, 1))
    one = gaussian_mixtures(np.ones((TRIALS, SCANS, 1)), means[:, :, None], covariances[:, :, None])
    assert score_difference(one, exact, scenes.states).interval.low > 0
