from __future__ import annotations

import ast
from pathlib import Path

import trackassay
from harness.evidence.outlook import look_ahead
from harness.evidence.plans import FixedCount, keyed_conditions
from harness.trials import keys

SMOKE = trackassay.load_study(Path(__file__).parents[3] / "studies" / "smoke.toml")


def tasks_of(study, settled=lambda key, span: False, workers=2):
    return FixedCount(keyed_conditions(study), study.seed, study.trials, workers).next_tasks(
        settled
    )


def keys_of(study):
    return [[case.key for case in condition.cases] for condition in keyed_conditions(study)]


def test_every_case_and_trial_is_asked_for_once():
    tasks = tasks_of(SMOKE.with_changes({"trials": 250}))
    asked = [(case.key, span) for task in tasks for case in task.cases for span in task.spans]
    assert len(asked) == len(set(asked)) == 2 * 4 * 3


def test_what_is_settled_is_not_asked_for_again():
    wanted = tasks_of(SMOKE)
    pda = keyed_conditions(SMOKE)[0].cases[1].key
    tasks = tasks_of(SMOKE, settled=lambda key, span: key != pda)
    assert [[case.key for case in task.cases] for task in tasks] == [[pda]]
    assert tasks_of(SMOKE, settled=lambda key, span: True) == []
    assert len(wanted) == 2


def test_conditions_that_share_a_case_run_it_once():
    """Sweeping a setting of the mixture leaves the other strategies as they are."""
    study = SMOKE.with_changes({"sweep": {"strategies.mixture.max_components": [5, 10, 20]}})
    tasks = tasks_of(study)
    counted = [case.key for task in tasks for case in task.cases]
    assert len(counted) == len(set(counted)) == 3 + 3


def test_keys_cover_what_results_depend_on_and_nothing_else():
    base = keys_of(SMOKE)
    same = {"title": "another title", "question": "", "trials": 7}
    assert keys_of(SMOKE.with_changes(same)) == base
    for change in (
        {"seed": 5},
        {"scene.sensor.noise_sd_m": 11.0},
        {"track_loss.error_above_m": 61.0},
        {"gospa.cutoff_m": 61.0},
        {"scoring.from_scan": 2},
    ):
        changed = keys_of(SMOKE.with_changes(change))
        assert not set(changed[0]) & set(base[0]), change
    gate = keys_of(SMOKE.with_changes({"strategies.pda.gate_probability": 0.99}))
    assert [ours == theirs for ours, theirs in zip(gate[0], base[0], strict=True)] == [
        True, False, True, True,
    ]  # fmt: skip


def test_the_key_of_scenes_covers_every_source_that_draws_them():
    """What the drawing of scenes imports from the harness must make stored scores stale."""
    root = Path(__file__).parents[3]
    covered = {
        path
        for source in keys._SCENE_SOURCES
        for path in ([root / source] if source.endswith(".py") else (root / source).rglob("*.py"))
    }
    drawing = [*(root / "harness" / "scene").glob("*.py"), root / "harness" / "study" / "schema.py"]
    imported = {
        root / (node.module.replace(".", "/") + ".py")
        for path in drawing
        for node in ast.walk(ast.parse(path.read_text()))
        if isinstance(node, ast.ImportFrom) and node.module.startswith("harness.")
    }
    assert imported <= covered


def test_assuming_what_is_true_anyway_changes_no_key():
    told = SMOKE.with_changes({"strategies.pda.assumes.sensor.noise_sd_m": 10.0})
    assert keys_of(told) == keys_of(SMOKE)


def test_keys_do_not_see_rounding():
    third = SMOKE.with_changes({"scene.sensor.noise_sd_m": 0.1 + 0.2})
    assert keys_of(third) == keys_of(SMOKE.with_changes({"scene.sensor.noise_sd_m": 0.3}))


def test_targets_that_leave_the_region_are_warned_of():
    fast = SMOKE.with_changes({"scene.target.start_velocity_m_per_s": [60.0, 0.0]})
    warning = look_ahead(fast).warnings[0]
    assert "outside the sensor's region" in warning


def test_a_limit_that_known_association_breaks_is_warned_of():
    strict = SMOKE.with_changes({"track_loss.error_above_m": 4.0})
    (warning,) = look_ahead(strict).warnings
    assert "known association itself is lost" in warning


def test_false_detections_in_a_gate_follow_the_closed_form():
    """Known steady innovation covariance S: lambda pi gamma |S|^(1/2) in a plane.

    With no process noise to speak of and a sure start, S is R: 100 m2 on each axis.
    """
    sure = SMOKE.with_changes(
        {
            "scene.target.acceleration_psd_m2_per_s3": 0.0,
            "scene.target.start_position_sd_m": [1e-3, 1e-3],
            "scene.target.start_velocity_sd_m_per_s": [1e-4, 1e-4],
        }
    )
    for one, density in zip(look_ahead(sure).conditions, (5e-5, 2e-4), strict=True):
        gamma = 9.210340  # chi-square quantile of 0.99, 2 degrees of freedom
        expected = density * 3.14159265 * gamma * 100.0
        assert abs(one.false_detections_in_gate(0.99) / expected - 1) < 1e-4
