"""How large an unreduced mixture grows, and what is said before memory runs out."""

import numpy as np
import pytest
from small_worlds import as_scans, exact_mixture, random_walk_world, run_on

from filters.random_numbers import numbers_of
from filters.strategies.unreduced import UnreducedMixture
from filters.unreduced import capacity_unreduced, components_unreduced

TRIALS = [[[0.5, 2.0], [1.5], [-3.0, 2.5], []], [[], [], [0.1], []]]


def test_a_component_for_every_history_of_associations():
    scans = as_scans(TRIALS, 1)
    np.testing.assert_array_equal(components_unreduced(scans), [18, 2])
    assert capacity_unreduced(scans, 2) == 18


def test_the_capacity_is_all_that_the_exact_mixture_needs():
    """Hypotheses formed are 3 + 3 x 2 + 6 x 3 + 18 with that capacity, and fewer with one less."""
    scans, world = as_scans(TRIALS[:1], 1), random_walk_world()
    capacity = capacity_unreduced(scans, 2)
    assert run_on(world, exact_mixture(capacity), scans).hypotheses[0] == 3 + 6 + 18 + 18
    assert run_on(world, exact_mixture(capacity - 1), scans).hypotheses[0] == 3 + 6 + 18 + 17


def test_a_scene_beyond_memory_is_refused_before_any_is_taken():
    with pytest.raises(ValueError, match=r"trial 0 .* fit into 2 GB"):
        capacity_unreduced(as_scans([[[0.0] * 9] * 9], 1), 4)
    crowded = as_scans([[[0.0] * 9] * 400], 1)
    with pytest.raises(ValueError, match=r"would need inf components .* 3600 detections in 400"):
        capacity_unreduced(crowded, 4)


def test_the_strategy_keeps_all_that_the_exact_mixture_keeps():
    """Mixture without pruning, merging or a cap in reach: the same components, in another order."""
    scans, world = as_scans(TRIALS, 1), random_walk_world()
    exact = UnreducedMixture(kind="unreduced-mixture")
    ours = exact.run(world.assumptions, scans, numbers_of(1), 0, record=True)
    theirs = exact_mixture(18).run(world.assumptions, scans, numbers_of(1), 0, record=True)
    np.testing.assert_allclose(ours.means, theirs.means, rtol=1e-12)
    np.testing.assert_allclose(ours.covariances, theirs.covariances, rtol=1e-12)
    np.testing.assert_array_equal(ours.posteriors.counts, [[3, 6, 18, 18], [1, 1, 2, 2]])
    np.testing.assert_array_equal(ours.posteriors.counts, theirs.posteriors.counts)
    for first, end in ((0, 3), (3, 9), (9, 27), (27, 45), (47, 49)):
        mine, its = (
            np.column_stack([kept.weights[first:end], kept.means[first:end]])
            for kept in (ours.posteriors, theirs.posteriors)
        )
        np.testing.assert_allclose(mine[mine[:, 1].argsort()], its[its[:, 1].argsort()], rtol=1e-9)


def test_the_trial_that_does_not_fit_goes_by_its_number_in_the_study():
    with pytest.raises(ValueError, match=r"trial 200 would need"):
        capacity_unreduced(as_scans([[[0.0] * 9] * 9], 1), 4, first_trial=200)
