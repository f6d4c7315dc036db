"""Strategies that start from detections, through tasks and studies."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from filters.random_numbers import numbers_of
from filters.strategies import ProbabilisticDataAssociation
from harness.scene.simulate import draw_scenes
from harness.study.schema import Calibration, PosteriorGap, Scene
from harness.trials.task import TaskCase, assumptions_of, run_task

START = {"kind": "two-point", "fastest_m_per_s": 12.0}
SEED = 11


@pytest.fixture
def late_starts(make_task):
    """A task of 200 trials of PDA from two points, all scans scored, with truth and tracks."""
    task = make_task(200, ["pda"], seed=SEED)
    said = task.scene.model_dump()
    said["sensor"] |= {"detection_probability": 0.5, "clutter_density_per_m2": 2e-5}
    scene = Scene.model_validate(said)
    case = TaskCase("late", ProbabilisticDataAssociation(kind="pda", start=START), scene)
    rules = replace(task.rules, first_scan=0)
    task = replace(task, scene=scene, cases=(case,), rules=rules)
    numbers = numbers_of(SEED)
    batch = draw_scenes(scene, numbers, 0, 200)
    assumptions = assumptions_of(scene, scene, batch, numbers)
    tracks = case.strategy.run(assumptions, batch.scans_without_origins, numbers, 0)
    return task, batch.truth, tracks


def column(results, name):
    return np.concatenate([getattr(result.scores, name) for result in results])


def test_scans_before_the_start_cost_the_missed_target_and_no_false_track(late_starts):
    """c^p / 2 each with c = 40 m and p = 2; 'missed' and 'false' are equal in all other scans."""
    task, _, tracks = late_starts
    results = run_task(task)
    np.testing.assert_array_equal(column(results, "estimates"), tracks.present.sum(axis=1))
    missing = np.mean(~tracks.present, axis=1)
    extra = column(results, "gospa_missed") - column(results, "gospa_false")
    np.testing.assert_allclose(extra, missing * 40.0**2 / 2, rtol=1e-12, atol=1e-12)


def test_a_track_that_starts_too_late_is_lost_from_the_first_scan(late_starts):
    """No track counts as an error above the limit: 60 m for 3 scans in a row."""
    task, truth, tracks = late_starts
    lost_at = column(run_task(task), "lost_at")
    absent = ~tracks.present[:, :3]
    far = np.linalg.norm(tracks.means[:, :3, :2] - truth.position[:, :3], axis=-1) > 60.0
    assert 30 < np.sum(absent.all(axis=1)) < 170
    np.testing.assert_array_equal(lost_at == 0, (absent | far).all(axis=1))


def test_what_whole_posteriors_say_begins_with_the_start(late_starts):
    """Also where the reference has a posterior before the strategy has."""
    task, _, tracks = late_starts
    reference = TaskCase("told", ProbabilisticDataAssociation(kind="pda"), task.scene)
    rules = replace(
        task.rules,
        calibration=Calibration(),
        posterior_gap=PosteriorGap(reference="told", samples=20),
    )
    spans = task.spans[:1]
    results = run_task(replace(task, rules=rules, gap_reference=reference, spans=spans))
    here = tracks.present[:100].sum(axis=1)
    posterior = results[0].scores.posterior
    np.testing.assert_array_equal(posterior.posteriors, here)
    np.testing.assert_array_equal(posterior.gaps, here)
    has = here > 0
    assert np.isfinite(posterior.log_score[has]).all()
    assert np.isfinite(posterior.gap_ise[has]).all()
