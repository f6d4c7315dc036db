"""Scaling lengths and times together changes nothing but the units.

Multiply lengths by k and times by s: noise k, interval s, accelerations k / s^2, velocities k / s,
densities in the plane 1 / k^2, region k. The same random numbers then give the same scenes and the
same tracks in the new units. Source: dimensional analysis, as by Salmond (1990), SPIE 1305.
"""

import numpy as np
import pytest

from filters.random_numbers import numbers_of
from filters.strategies import (
    GaussianMixture,
    KnownAssociation,
    MostProbableHypothesis,
    NearestNeighbour,
    ParticleFilter,
    ProbabilisticDataAssociation,
)
from filters.strategies.strategy import Assumptions
from harness.scene.models import models_of
from harness.scene.simulate import draw_scenes
from harness.scene.truth import prior_of
from harness.study.schema import Scene
from metrics.consistency import nees
from metrics.track_loss import loss_scan

STRATEGIES = [
    NearestNeighbour(kind="nearest-neighbour"),
    MostProbableHypothesis(kind="most-probable-hypothesis"),
    ProbabilisticDataAssociation(kind="pda"),
    GaussianMixture(kind="gaussian-mixture", max_components=8),
    ParticleFilter(kind="particle-filter", particles=200),
    KnownAssociation(kind="known-association"),
]
SCALES = [(250.0, 1.0), (1.0, 4.0), (250.0, 4.0), (0.01, 0.1)]
TRIALS = 30


def scaled_scene(k, s):
    """A scene hard enough that strategies choose wrong detections and lose some tracks."""
    return Scene(
        scans=25,
        scan_interval_s=1.0 * s,
        target={
            "motion": "nearly-constant-velocity",
            "acceleration_psd_m2_per_s3": 0.5 * k**2 / s**3,
            "start_position_m": (20.0 * k, -30.0 * k),
            "start_velocity_m_per_s": (4.0 * k / s, 1.0 * k / s),
            "start_position_sd_m": (6.0 * k, 6.0 * k),
            "start_velocity_sd_m_per_s": (1.0 * k / s, 1.0 * k / s),
        },
        sensor={
            "kind": "position",
            "noise_sd_m": 5.0 * k,
            "detection_probability": 0.8,
            "clutter_density_per_m2": 6e-4 / k**2,
            "region_m": ((-200.0 * k, 250.0 * k), (-220.0 * k, 200.0 * k)),
        },
    )


def follow(k, s, strategy):
    """Scenes and tracks in the units of the scene before scaling."""
    scene, numbers = scaled_scene(k, s), numbers_of(11)
    batch = draw_scenes(scene, numbers, 0, TRIALS)
    scans = batch.scans if strategy.is_told_origins else batch.scans_without_origins
    assumptions = Assumptions(models_of(scene), prior_of(scene), 2)
    tracks = strategy.run(assumptions, scans, numbers, 0)
    units = np.array([k, k, k / s, k / s])
    return batch, tracks, units


@pytest.fixture(scope="module")
def unscaled():
    return {strategy.kind: follow(1.0, 1.0, strategy) for strategy in STRATEGIES}


@pytest.mark.parametrize("strategy", STRATEGIES, ids=lambda strategy: strategy.kind)
@pytest.mark.parametrize(("k", "s"), SCALES)
def test_errors_losses_and_consistency_do_not_depend_on_the_units(unscaled, strategy, k, s):
    batch, tracks, _ = unscaled[strategy.kind]
    scaled_batch, scaled_tracks, units = follow(k, s, strategy)
    np.testing.assert_array_equal(scaled_batch.scans.offsets, batch.scans.offsets)
    np.testing.assert_array_equal(scaled_batch.scans.origins, batch.scans.origins)
    np.testing.assert_allclose(
        scaled_batch.scans.detections / k, batch.scans.detections, rtol=1e-11, atol=1e-9
    )
    np.testing.assert_allclose(
        scaled_batch.truth.states / units, batch.truth.states, rtol=1e-11, atol=1e-9
    )
    np.testing.assert_array_equal(scaled_tracks.hypotheses, tracks.hypotheses)
    np.testing.assert_allclose(scaled_tracks.means / units, tracks.means, rtol=1e-8, atol=1e-7)
    np.testing.assert_allclose(
        scaled_tracks.covariances / np.outer(units, units), tracks.covariances, rtol=1e-7, atol=1e-7
    )
    found, expected = (
        nees(t.means - b.truth.states, t.covariances)
        for b, t in ((scaled_batch, scaled_tracks), (batch, tracks))
    )
    np.testing.assert_allclose(found, expected, rtol=1e-5)
    losses = [
        loss_scan(np.linalg.norm(t.means[..., :2] - b.truth.position, axis=2), t.present, limit, 3)
        for b, t, limit in ((scaled_batch, scaled_tracks, 25.0 * k), (batch, tracks, 25.0))
    ]
    np.testing.assert_array_equal(losses[0], losses[1])


def test_the_scene_is_hard_enough_to_lose_tracks(unscaled):
    """So that agreement covers trials that go wrong as well; known association loses none."""
    lost = {
        kind: np.mean(
            loss_scan(
                np.linalg.norm(tracks.means[..., :2] - batch.truth.position, axis=2),
                tracks.present,
                25.0,
                3,
            )
            >= 0
        )
        for kind, (batch, tracks, _) in unscaled.items()
    }
    assert lost["nearest-neighbour"] > 0.05
    assert lost["known-association"] == 0.0


def test_scaling_by_powers_of_two_scales_truth_and_scans_to_the_bit(unscaled):
    """Doubling is exact in binary, so truth and detections agree without any tolerance."""
    batch, _, _ = unscaled["pda"]
    scaled_batch, _, units = follow(8.0, 4.0, STRATEGIES[0])
    np.testing.assert_array_equal(scaled_batch.truth.states / units, batch.truth.states)
    np.testing.assert_array_equal(scaled_batch.scans.detections / 8.0, batch.scans.detections)
