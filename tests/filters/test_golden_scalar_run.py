"""A scalar random walk over four scans of stated detections: F = Q = R = 1, PD = 0.9, lambda = 0.1.

The prior is N(0, 2) at the first scan and there is no gate. Source of the values: computed once
with other programs, the mixture with a point-mass grid over the position (8 digits) and the PDA
with the reference library, stonesoup 1.9.1 (10 digits).
"""

import numpy as np
import pytest
from plain_filters import hypotheses_of, keep_all, keep_nearest, match_moments, run
from small_worlds import (
    as_scans,
    exact_mixture,
    look_inside,
    nearest_neighbour,
    pda,
    random_walk_world,
    run_on,
)

from filters.reductions.match_moments import match_moments as matching

DETECTIONS = [[0.5, 2.0], [1.5], [-3.0, 2.5], []]
PDA_MEANS = [0.6603466374, 1.1863754444, 1.7988318155, 1.7988318155]
PDA_VARIANCES = [0.9431320103, 0.7406957619, 1.2981165696, 2.2981165696]
RUNS = {
    "mixture": (
        exact_mixture(),
        keep_all,
        [0.6603466374, 1.1848935480, 1.7884433623, 1.7884433623],
        [0.9431320103, 0.7416136046, 1.3287915840, 2.3287915840],
    ),
    "pda": (pda(gate_probability=1.0), match_moments, PDA_MEANS, PDA_VARIANCES),
    "nearest neighbour": (
        nearest_neighbour(gate_probability=1.0),
        keep_nearest,
        [1 / 3, 1.0625, 1.9523809524, 1.9523809524],
        [2 / 3, 0.625, 0.6190476190, 1.6190476190],
    ),
}
PDA_WEIGHTS = [
    [0.03171923, 0.63069439, 0.33758638],
    [0.05110768, 0.94889232],
    [0.05644245, 0.05003241, 0.89352514],
    [1.0],
]


@pytest.mark.parametrize("name", RUNS)
def test_the_run_has_the_means_and_variances_of_other_programs(name):
    strategy, plain_reduction, means, variances = RUNS[name]
    world = random_walk_world()
    tracks = run_on(world, strategy, as_scans([DETECTIONS], 1))
    np.testing.assert_allclose(tracks.means[0, :, 0], means, rtol=0, atol=1e-9)
    np.testing.assert_allclose(tracks.covariances[0, :, 0, 0], variances, rtol=0, atol=1e-9)

    plain = run(world.plain, [np.reshape(scan, (-1, 1)) for scan in DETECTIONS], plain_reduction)
    np.testing.assert_allclose(tracks.means[0], plain[0], atol=1e-12)
    np.testing.assert_allclose(tracks.covariances[0], plain[1], atol=1e-12)


def test_the_unreduced_mixture_has_a_component_for_every_history():
    """(1 + M) of them multiply scan by scan; those of the last are counted before reduction."""
    tracks = run_on(random_walk_world(), exact_mixture(), as_scans([DETECTIONS], 1))
    assert tracks.hypotheses[0] == 3 + 3 * 2 + 6 * 3 + 18
    pruned_by_cap = run_on(random_walk_world(), exact_mixture(6), as_scans([DETECTIONS], 1))
    assert pruned_by_cap.hypotheses[0] == 3 + 3 * 2 + 6 * 3 + 6


@pytest.mark.parametrize("k", range(4))
def test_the_association_weights_are_those_of_the_reference_library(k):
    """Each scan on its own, from the prediction of the scan before."""
    mean, variance = (PDA_MEANS[k - 1], PDA_VARIANCES[k - 1] + 1.0) if k else (0.0, 2.0)
    world = random_walk_world(prior_mean=mean, prior_variance=variance)
    scan = np.reshape(DETECTIONS[k], (-1, 1))
    found = look_inside(world, as_scans([[scan]], 1), reduction=matching())
    np.testing.assert_allclose(found.table["weight"], PDA_WEIGHTS[k], rtol=0, atol=1e-8)
    start = [(1.0, world.plain.mean, world.plain.covariance)]
    plain = [row.weight for row in hypotheses_of(world.plain, start, scan)]
    np.testing.assert_allclose(found.table["weight"], plain, rtol=1e-12)
