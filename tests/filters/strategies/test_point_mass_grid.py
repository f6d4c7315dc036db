"""The point-mass grid as a strategy: the estimates of its filter, or one clear mistake."""

import numpy as np
import pytest
from small_worlds import as_scans, constant_velocity_world, draw_scenes_of, exact_mixture, run_on

from filters.strategies import PointMassGrid


def test_its_estimates_are_those_of_the_unreduced_mixture():
    """Exact both, where the sensor is linear; moments are good to 1e-6 of a deviation here."""
    world = constant_velocity_world(1, detection_probability=0.8, clutter=0.1)
    drawn = draw_scenes_of(world, np.random.default_rng(8), 2, 3, clutter_half_width=5.0)
    scans = as_scans(drawn.trials, 1)
    grid = run_on(world, PointMassGrid(kind="point-mass-grid"), scans)
    exact = run_on(world, exact_mixture(), scans)
    np.testing.assert_allclose(grid.means, exact.means, rtol=1e-6, atol=1e-6)
    np.testing.assert_allclose(grid.covariances, exact.covariances, rtol=1e-6, atol=1e-6)
    assert grid.present.all()


def test_the_track_ends_by_the_spread_of_its_position():
    world = constant_velocity_world(1, detection_probability=0.8, clutter=0.1)
    strategy = PointMassGrid(kind="point-mass-grid", ends={"position_sd_above_m": 3.0})
    tracks = run_on(world, strategy, as_scans([[np.empty((0, 1))] * 3], 1))
    spreads = [4.0, 4.0 + 1.0 + 0.1 / 3, 4.0 + 4.0 + 0.1 / 3 * 8]
    np.testing.assert_array_equal(tracks.present[0], [spread <= 9.0 for spread in spreads])


@pytest.mark.parametrize("axes", [1, 2])
def test_states_beyond_two_numbers_are_a_misfit(axes):
    class Target:
        state_size = 2 * axes

    wrong = list(PointMassGrid(kind="point-mass-grid").misfits(Target(), None))
    assert len(wrong) == axes - 1
    assert all("one or two numbers" in str(one) for one in wrong)
