"""Other sizes of state and measurement than those of most tests: acceleration along three axes."""

import numpy as np
import pytest
from plain_filters import keep_nearest, match_moments, run
from small_worlds import (
    as_scans,
    constant_acceleration_world,
    draw_scenes_of,
    gaussian_mixture,
    known_association,
    nearest_neighbour,
    pda,
    run_on,
)

CASES = {1: (0.1, 5.0), 3: (2e-3, 5.0)}  # axes: clutter, half width of its box


@pytest.mark.parametrize("axes", CASES)
@pytest.mark.parametrize(
    ("strategy", "reduce"), [(pda, match_moments), (nearest_neighbour, keep_nearest)]
)
def test_strategies_equal_their_plain_twins_at_any_size(axes, strategy, reduce):
    """Three and nine states."""
    clutter, half_width = CASES[axes]
    world = constant_acceleration_world(axes, clutter=clutter, interval=0.8)
    drawn = draw_scenes_of(world, np.random.default_rng(axes), 4, 15, half_width)
    scans = as_scans(drawn.trials, axes, interval=0.8)
    tracks = run_on(world, strategy(gate_probability=0.999), scans)
    for trial, detections in enumerate(drawn.trials):
        means, covariances = run(world.plain, detections, reduce, 0.999)
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-8, atol=1e-8)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-7, atol=1e-9)


def test_along_independent_axes_a_filter_in_space_is_three_on_a_line():
    """Without clutter the axes do not meet: each equals the filter of its own."""
    keys = {"detection_probability": 1.0, "clutter": 0.0}
    space, line = constant_acceleration_world(3, **keys), constant_acceleration_world(1, **keys)
    drawn = draw_scenes_of(space, np.random.default_rng(33), 2, 20)
    tracks = run_on(space, gaussian_mixture(), as_scans(drawn.trials, 3))
    for axis in range(3):
        own = [[scan[:, axis : axis + 1] for scan in scans] for scans in drawn.trials]
        alone = run_on(line, known_association(), as_scans(own, 1, origins=drawn.origins))
        np.testing.assert_allclose(tracks.means[..., axis::3], alone.means, rtol=1e-10, atol=1e-10)
        block = tracks.covariances[..., axis::3, axis::3]
        np.testing.assert_allclose(block, alone.covariances, rtol=1e-9, atol=1e-12)
