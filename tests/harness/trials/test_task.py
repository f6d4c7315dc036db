from __future__ import annotations

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from filters.strategies import KnownAssociation, ParticleFilter, ProbabilisticDataAssociation
from harness.study.schema import Scene, TrackLoss
from harness.trials.score import SCAN_COLUMNS, TRIAL_COLUMNS
from harness.trials.task import (
    Span,
    TaskCase,
    TaskFailure,
    run_task,
    run_task_safely,
    spans_of,
)


def assert_same_bits(first, second):
    assert first.key == second.key
    assert first.span == second.span
    for name in (*TRIAL_COLUMNS, *SCAN_COLUMNS):
        ours, theirs = getattr(first.scores, name), getattr(second.scores, name)
        assert ours.tobytes() == theirs.tobytes(), name


def test_trials_come_in_spans_of_a_hundred():
    assert spans_of(250) == [Span(0, 100), Span(1, 100), Span(2, 50)]
    assert [span.first_trial for span in spans_of(250)] == [0, 100, 200]


def test_results_do_not_depend_on_how_spans_are_cut_into_tasks(make_task):
    task = make_task(250)
    parts = [one for span in task.spans for one in run_task(replace(task, spans=(span,)))]
    apart = {(one.key, one.span): one for one in parts}
    whole = run_task(task)
    assert len(whole) == len(apart) == 9
    for together in whole:
        assert_same_bits(together, apart[together.key, together.span])


def test_a_strategy_alone_gives_what_it_gives_among_others(make_task):
    among = {result.key: result for result in run_task(make_task(100))}
    for name in ("nearest", "pda", "known"):
        (alone,) = run_task(make_task(100, [name]))
        assert_same_bits(alone, among[name])


def test_the_first_trials_of_a_longer_span_are_those_of_a_shorter_one(make_task):
    (longer,) = run_task(make_task(100, ["pda"]))
    (shorter,) = run_task(make_task(40, ["pda"]))
    np.testing.assert_array_equal(
        longer.scores.position_square[:40], shorter.scores.position_square
    )


def test_another_seed_gives_other_trials(make_task):
    (first,), (second,) = (
        run_task(make_task(50, ["pda"])),
        run_task(make_task(50, ["pda"], seed=12)),
    )
    assert not np.any(first.scores.position_square == second.scores.position_square)


def test_loss_relative_to_known_association_runs_it_though_the_study_does_not_list_it(make_task):
    rules = replace(make_task().rules, track_loss=TrackLoss(error_above_sigma=1e-6, for_scans=2))
    (result,) = run_task(make_task(30, ["pda"], rules=rules))
    assert np.all(result.scores.lost_at == 0)


def test_what_goes_wrong_in_a_task_is_a_record_not_an_exception(make_task):
    task = replace(make_task(10), scene=None)
    outcome = run_task_safely(task)
    assert isinstance(outcome, TaskFailure)
    assert "AttributeError" in outcome.error
    assert "run_task" in outcome.traceback


def test_no_strategy_reads_the_scene_except_through_what_it_assumes(make_task):
    """Only the drawing of scenes may touch the scene's record: it is poisoned afterwards."""
    task = make_task(20, ["nearest", "pda"])

    class Poisoned:
        def __init__(self, scene):
            self.scene, self.used = scene, 0

        def __getattr__(self, name):
            return getattr(self.scene, name)

    from harness.scene import simulate
    from harness.trials import task as task_module

    drawn = []

    def draw(scene, numbers, first, trials):
        batch = simulate.draw_scenes(scene.scene, numbers, first, trials)
        drawn.append(batch)
        scene.scene = SimpleNamespace(legs=None)  # any other later use raises
        return batch

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(task_module, "draw_scenes", draw)
        poisoned = run_task(replace(task, scene=Poisoned(task.scene)))
    for ours, theirs in zip(poisoned, run_task(task), strict=True):
        assert_same_bits(ours, theirs)
    assert len(drawn) == 1


def test_along_legs_every_strategy_starts_from_a_mean_drawn_around_the_truth(make_task):
    """Without detections the first estimate is the prior: its NEES averages the 4 dimensions.

    400 trials: standard error sqrt(8 / 400) = 0.14; fails beyond 5 of them, never by chance.
    """
    scene = {
        **make_task().scene.model_dump(exclude_none=True),
        "legs": [{"kind": "straight", "duration_s": 20.0}],
    }
    scene["sensor"] = {**scene["sensor"], "detection_probability": 0.0}
    scene = Scene.model_validate(scene)
    strategies = (
        ProbabilisticDataAssociation(kind="pda"),
        KnownAssociation(kind="known-association"),
        ParticleFilter(kind="particle-filter", particles=2000),
    )
    cases = tuple(TaskCase(one.kind, one, scene) for one in strategies)
    spans = tuple(spans_of(400))
    task = replace(make_task(), scene=scene, cases=cases, spans=spans)
    totals = dict.fromkeys((case.key for case in cases), 0.0)
    for result in run_task(task):
        totals[result.key] += result.scores.scan_nees[0] / result.scores.scan_estimates[0] / 4
    for key, nees in totals.items():
        assert abs(nees - 4.0) < 5 * np.sqrt(8 / 400), key
