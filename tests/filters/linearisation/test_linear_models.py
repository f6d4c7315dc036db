"""On linear models every linearisation is the Kalman filter itself."""

import numpy as np
import pytest
from plain_filters import match_moments, run
from small_worlds import as_scans, constant_velocity_world, draw_scenes_of, pda, run_on

KINDS = {
    "iterated": {"kind": "iterated"},
    "unscented": {"kind": "unscented"},
    "unscented, scaled": {"kind": "unscented", "alpha": 0.3, "beta": 1.0, "kappa": 1.5},
    "cubature": {"kind": "cubature"},
    "gauss-hermite": {"kind": "gauss-hermite", "points_per_axis": 4},
    "converted": {"kind": "converted-measurements"},
}


@pytest.mark.parametrize("kind", KINDS)
def test_a_linear_world_is_followed_as_by_the_kalman_filter(kind):
    """Four false detections a scan, three trials of 15 scans; against plain matrices."""
    world = constant_velocity_world(2, clutter=0.04, mean=[300.0, -800.0, 3.0, 1.0])
    drawn = draw_scenes_of(world, np.random.default_rng(5), 3, 15, clutter_half_width=5.0)
    strategy = pda(gate_probability=0.99, linearisation=KINDS[kind])
    tracks = run_on(world, strategy, as_scans(drawn.trials, 2))
    for trial, detections in enumerate(drawn.trials):
        means, covariances = run(world.plain, detections, match_moments, 0.99)
        np.testing.assert_allclose(tracks.means[trial], means, rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(tracks.covariances[trial], covariances, rtol=1e-8, atol=1e-9)
