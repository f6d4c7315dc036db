from dataclasses import replace

import pandas as pd
import pytest

from harness.evidence.results import Results
from harness.report.findings import finding, finding_along
from harness.report.swept import swept_keys
from metrics.intervals import wilson_interval

KEY = "scene.sensor.clutter_density_per_m2"


def with_losses(lost, best, trials=200, densities=(1e-5, 1e-4)):
    """Results of which the losses and the marks are given: {strategy: one a density}."""
    rows = []
    for name, counts in lost.items():
        for density, count, mark in zip(densities, counts, best[name], strict=True):
            low, high = wilson_interval(count, trials)
            rows.append(
                {
                    KEY: density,
                    "strategy": name,
                    "trials": trials,
                    "lost": count,
                    "failed": 0,
                    "track_loss_rate": count / trials,
                    "track_loss_rate_low": low,
                    "track_loss_rate_high": high,
                    "best_in": "track_loss_rate rmse_position" if mark else "",
                }
            )
    document = {"title": "t", "strategies": {name: {"kind": "pda"} for name in lost}}
    return Results(pd.DataFrame(rows), pd.DataFrame(), document, {})


def test_the_leader_is_who_is_best_in_most_conditions_with_the_pooled_losses():
    results = with_losses({"a": (2, 30), "b": (2, 60)}, {"a": (1, 1), "b": (1, 0)})
    assert finding(results, "track_loss_rate") == (
        "a is best or not told apart from the best in 2 of 2 conditions; "
        "a loses 8.0 % of all tracks against 15.5 % with b"
    )


def test_leaders_that_tie_are_all_named():
    results = with_losses(
        {"a": (2, 30), "b": (2, 29), "c": (9, 90)}, {"a": (1, 1), "b": (1, 1), "c": (0, 0)}
    )
    assert finding(results, "track_loss_rate").startswith(
        "a and b are each best or not told apart from the best in 2 of 2 conditions; b loses"
    )


def test_nothing_is_called_best_where_nothing_is_told_apart():
    results = with_losses({"a": (2, 3), "b": (2, 4)}, {"a": (1, 1), "b": (1, 1)})
    assert finding(results, "track_loss_rate") == (
        "No two strategies are told apart yet in track loss in any of the 2 conditions"
    )


def test_no_loss_at_all_is_said():
    results = with_losses({"a": (0, 0), "b": (0, 0)}, {"a": (1, 1), "b": (1, 1)})
    assert finding(results, "track_loss_rate") == (
        "No strategy lost a track in any of the 2 conditions"
    )


def test_one_strategy_has_a_range_and_no_rank():
    results = with_losses({"a": (2, 30)}, {"a": (1, 1)})
    assert finding(results, "track_loss_rate") == "Track loss runs from 1.0 % to 15 % (a)"


def test_one_condition_names_the_best_with_its_interval():
    results = with_losses(
        {"a": (15,), "b": (60,)}, {"a": (1,), "b": (0,)}, trials=148, densities=(1e-5,)
    )
    # 15 of 148: Newcombe, Statistics in Medicine 17 (1998) 857, Table I, prints 0.0624 to 0.1605
    assert finding(results, "track_loss_rate") == "a is best in track loss: 10 % (6–16)"


def test_calibration_counts_intervals_above_one(study):
    above = study.summary[study.summary["anees_low"] > 1]
    counts = above.groupby("strategy").size()
    assert finding(study, "anees") == (
        "Over-confident: nearest in 27 of 27 conditions, probable in 27, pda in 27, "
        f"particles in {counts['particles']}, mixture in {counts['mixture']}"
    )
    assert 0 < counts["mixture"] < counts["particles"] < 27


def test_errors_that_no_trial_has_are_said_to_be_missing(all_lost):
    assert finding(all_lost, "rmse_position") == "No trial held track: there is no position RMSE"


@pytest.mark.parametrize(
    ("lost", "sentence"),
    [
        (
            {"a": (0, 4, 10, 40), "b": (0, 20, 30, 90)},
            "a holds 95 % of tracks up to clutter density 1e-3 per m2, b up to 1e-5",
        ),
        (
            {"a": (40, 10, 4, 0), "b": (90, 30, 20, 0)},
            "a holds 95 % of tracks from clutter density 1e-4 per m2, b from 1e-2",
        ),
        (
            {"a": (0, 20, 0, 40), "b": (30, 40, 50, 90)},
            "a holds 95 % of tracks up to clutter density 1e-5 per m2, b nowhere",
        ),
        (
            {"a": (0, 1, 2, 3), "b": (0, 1, 2, 4)},
            "Every strategy holds 95 % of tracks at every clutter density swept",
        ),
        (
            {"a": (30, 31, 32, 33), "b": (40, 41, 42, 43)},
            "No strategy holds 95 % of tracks at any clutter density swept",
        ),
        (
            {"a": (0, 1, 2, 30), "b": (0, 1, 2, 31), "c": (50, 60, 70, 80)},
            "a and b hold 95 % of tracks up to clutter density 1e-3 per m2, c nowhere",
        ),
    ],
)
def test_how_far_tracks_are_held_ends_at_the_first_value_that_loses_too_many(lost, sentence):
    results = with_losses(lost, dict.fromkeys(lost, (0,) * 4), densities=(1e-5, 1e-4, 1e-3, 1e-2))
    assert finding_along(results, swept_keys(results)[KEY]) == sentence


def test_a_column_of_gaps_as_text_files_leave_them_marks_nothing(study):
    summary = study.summary.copy()
    summary["best_in"] = float("nan")
    text = finding(replace(study, summary=summary), "track_loss_rate")
    assert text.startswith("Track loss runs from 0 % ")
