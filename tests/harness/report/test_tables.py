import csv
import io
import re
from dataclasses import replace

import numpy as np
import pytest

from harness.report.tables import as_csv, as_text, comparison_table, overall_table
from harness.report.tables.cells import aligned_cells, cell_texts

DENSITY = "scene.sensor.clutter_density_per_m2"
DETECTION = "scene.sensor.detection_probability"
NOISE = "scene.sensor.noise_sd_m"
EVERY_KIND = [
    "study",
    "no_sweep",
    "one_key",
    "not_a_number",
    "one_strategy",
    "all_lost",
    "with_failures",
    "thousand_cases",
]


def rows_of(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_rows_are_the_swept_keys_and_columns_the_strategies_unless_chosen(study):
    table = comparison_table(study)
    assert [key.key for key in table.keys] == [DENSITY, DETECTION, NOISE]
    assert [column.name for column in table.columns] == list(study.strategies)
    assert len(table.rows) == 27
    assert table.block_keys == 0


def test_every_case_is_in_its_row_and_column(study):
    """All 162 values and intervals, against the summary."""
    shown = rows_of(as_csv(comparison_table(study)))
    cases = study.summary.set_index(["strategy", DENSITY, DETECTION, NOISE])
    heads = ("clutter density [1/m2]", "detection probability", "noise sd [m]")
    for row in shown:
        setting = tuple(float(row[head]) for head in heads)
        for name in study.strategies:
            case = cases.loc[(name, *setting)]
            for column, end in (("", ""), (", low", "_low"), (", high", "_high")):
                value = float(row[f"track loss [%], {name}{column}"])
                assert value == pytest.approx(100 * case[f"track_loss_rate{end}"], rel=1e-11)


@pytest.mark.parametrize("metric", ["track_loss_rate", "rmse_position"])
def test_marked_are_the_cases_whose_best_in_holds_the_metric(study, metric):
    table = comparison_table(study, metric)
    marked = {
        (table.columns[place].name, *row.levels)
        for row in table.rows
        for place, cell in enumerate(row.cells)
        if cell.marked
    }
    holds = study.summary[[metric in names.split() for names in study.summary["best_in"]]]
    assert marked == set(
        holds[["strategy", DENSITY, DETECTION, NOISE]].itertuples(index=False, name=None)
    )
    assert "* best, or not told apart from the best" in as_text(table)


def test_a_single_strategy_is_not_marked_as_best(one_strategy):
    table = comparison_table(one_strategy)
    assert not table.has_marks
    assert "best" not in as_text(table)


def test_keys_not_chosen_head_blocks(study):
    table = comparison_table(study, "anees", rows=[DETECTION], columns=[NOISE])
    assert [key.key for key in table.keys] == [DENSITY, "strategy", DETECTION]
    assert table.block_keys == 2
    assert [column.head for column in table.columns] == [
        f"ANEES by noise sd [m], {sd}" for sd in (5, 10, 20)
    ]
    text = as_text(table)
    assert text.count("clutter density 3e-4 per m2, ") == len(study.strategies)
    assert "clutter density 3e-4 per m2, mixture\n" in text


def test_rows_alone_leave_the_strategies_as_columns_and_columns_alone_as_rows(study):
    assert comparison_table(study, rows=["noise_sd_m"]).columns[0].name == "nearest"
    assert comparison_table(study, columns=["noise_sd_m"]).keys[-1].key == "strategy"
    assert comparison_table(study, rows=["strategy"]).columns[0].name == "5"
    table = comparison_table(study, columns=["strategy"])
    assert [key.key for key in table.keys] == [DENSITY, DETECTION, NOISE]


def test_without_a_sweep_the_strategies_are_rows(no_sweep):
    table = comparison_table(no_sweep)
    assert [row.levels for row in table.rows] == [(name,) for name in no_sweep.strategies]
    assert [column.name for column in table.columns] == ["track loss [%]"]


def test_a_case_that_is_missing_leaves_its_cell_empty(study):
    partial = replace(study, summary=study.summary.iloc[:-2])
    cells = comparison_table(partial).rows[-1].cells
    assert [cell is None for cell in cells] == [False] * 4 + [True] * 2
    assert as_text(comparison_table(partial))


@pytest.mark.parametrize(
    ("metric", "message"),
    [
        ("rmse_positon", r"no metric 'rmse_positon'; did you mean rmse_position"),
        ("track_loss", r"no metric 'track_loss'; did you mean track_loss_rate\?"),
        (
            "rmse",
            r"no metric 'rmse'; did you mean rmse_position or rmse_velocity or rmse_position_all",
        ),
        ("track_loss_rate_low", r"no metric 'track_loss_rate_low'; did you mean track_loss_rate"),
        ("best_in", r"no metric 'best_in'; the metrics are trials, lost, failed, "),
        ("strategy", r"no metric 'strategy'"),
    ],
)
def test_a_wrong_metric_is_refused_with_those_close_to_it(study, metric, message):
    with pytest.raises(ValueError, match=message):
        comparison_table(study, metric)


def test_a_key_named_twice_is_refused(study):
    with pytest.raises(ValueError, match=r"noise_sd_m' is named twice"):
        comparison_table(study, rows=[NOISE], columns=["noise_sd_m"])


def test_every_metric_of_the_summary_has_a_table(study):
    behind = list(study.summary.columns)[4:]
    metrics = [c for c in behind if not c.endswith(("_low", "_high", "_by", "_in"))]
    assert len(metrics) == 20
    for metric in metrics:
        assert as_text(comparison_table(study, metric))


def test_parts_of_gospa_have_the_unit_of_its_order(study):
    assert comparison_table(study, "gospa_missed").columns[0].group.endswith("[m2]")
    first_order = replace(study, document={**study.document, "gospa": {"order": 1.0}})
    assert comparison_table(first_order, "gospa_missed").columns[0].group.endswith("[m]")


def test_no_loss_is_zero_with_its_upper_bound(study):
    """0 of 400: Wilson's upper end is z²/(n + z²) = 0.951 %."""
    table = comparison_table(study)
    known = cell_texts(table, study.strategies.index("known"))
    assert {(text.value, text.interval) for text in known} == {("0", "(0–1.0)")}


def test_a_value_that_does_not_exist_is_a_dash_and_the_note_says_why(all_lost, study):
    text = as_text(comparison_table(all_lost, "rmse_position"))
    assert "– no trial held track: nearest, probable, pda, mixture, particles and known." in text
    assert "No trial held track: there is no position RMSE." in text
    assert {cell.strip() for cell in aligned_cells(comparison_table(all_lost, "anees"), 0)} == {"–"}
    counts = as_text(comparison_table(study, "hypotheses_per_scan"))
    assert "– no value: particles." in counts


def test_failed_trials_are_told(with_failures, study):
    note = "Failed trials, neither lost nor held: pda 81."
    assert note in as_text(comparison_table(with_failures))
    assert note in as_text(overall_table(with_failures))
    assert "Failed" not in as_text(overall_table(study))


def test_weak_evidence_is_told(study):
    summary = study.summary.copy()
    summary.loc[summary["strategy"] == "pda", "effective_trials"] = 24.0
    summary["outside"] = 0.03
    summary["trials_chosen_by"] = "judgement"
    summary[["track_loss_rate_low", "track_loss_rate_high"]] = np.nan
    doubtful = replace(study, summary=summary)
    errors = as_text(comparison_table(doubtful, "rmse_position"), 100)
    assert "Fewer than 25 trials carry the error" in errors
    assert "pda in 27 cases" in errors
    assert "outside the region in up to 3 % of scans" in errors
    losses = as_text(comparison_table(doubtful), 100)
    assert "Where a judgement chose the number of trials, track loss has no interval." in losses
    assert "Fewer than 25" not in losses


def test_references_are_told_and_never_counted(study):
    table = overall_table(study)
    known = next(row for row in table.rows if row.levels == ("known",))
    counts = [
        cell
        for cell, column in zip(known.cells, table.columns, strict=True)
        if column.group == "best of 27"
    ]
    assert [str(cell.value) for cell in counts] == ["nan", "nan"]
    assert "known is told the origins: a reference, not a candidate." in as_text(table)


def test_the_overall_table_pools_losses_and_claims_no_interval_for_dependent_conditions(invent):
    """81 of 263, Wilson 0.2553 to 0.3662; Newcombe, Statistics in Medicine 17 (1998) 857, Table I.

    The interval decides the digits alone, as conditions share their scenes.
    """
    results = invent(sweep={NOISE: [5.0, 10.0]}, strategies=("pda", "mixture"), trials=140)
    summary = results.summary.copy()
    summary["lost"] = [30, 0, 51, 0]
    summary["failed"] = [10, 0, 7, 0]
    table = overall_table(replace(results, summary=summary))
    assert table.columns[0].head == "track loss [%], all"
    assert not table.columns[0].shows_interval
    assert cell_texts(table, 0)[0][0] == "31"
    pooled = table.rows[0].cells[0]
    assert (pooled.low, pooled.high) == pytest.approx((25.53, 36.62), abs=0.005)


def test_the_overall_table_counts_conditions_and_takes_medians(study):
    cells = {row.levels[0]: row.cells for row in overall_table(study).rows}
    pda = study.summary[study.summary["strategy"] == "pda"]
    values = [cell.value for cell in cells["pda"]]
    assert values[1:3] == pytest.approx(
        [100 * pda["track_loss_rate"].median(), 100 * pda["track_loss_rate"].max()]
    )
    assert values[3:5] == pytest.approx([pda["rmse_position"].median(), pda["rmse_position"].max()])
    assert values[7:9] == [
        sum("track_loss_rate" in names for names in pda["best_in"]),
        sum("rmse_position" in names for names in pda["best_in"]),
    ]
    assert values[10] == pytest.approx(pda["us_per_scan"].median())


def test_the_worst_anees_is_the_one_farthest_from_one_either_way(study):
    summary = study.summary.copy()
    chosen = summary.index[summary["strategy"] == "known"]
    summary.loc[chosen, "anees"] = 1.0
    summary.loc[chosen[:2], "anees"] = [1.8, 0.5]
    known = overall_table(replace(study, summary=summary)).rows[-1]
    assert known.cells[6].value == 0.5


def test_the_meaning_names_the_leader_the_cheapest_and_what_it_gives_up(study):
    meaning = overall_table(study).meaning
    assert meaning.startswith(
        "mixture: best or not told apart from the best in 27 of 27 conditions on track loss, in 27"
    )
    assert "The cheapest, nearest (0.339 us a scan against 17.7): in 15 and 0." in meaning


def test_costs_within_a_tenth_are_equal_and_the_first_in_the_study_is_cheapest(study):
    summary = study.summary.copy()
    summary.loc[summary["strategy"] == "probable", "us_per_scan"] *= 0.9  # just below nearest
    meaning = overall_table(replace(study, summary=summary)).meaning
    assert "The cheapest, nearest (" in meaning
    summary.loc[summary["strategy"] == "probable", "us_per_scan"] *= 0.8
    meaning = overall_table(replace(study, summary=summary)).meaning
    assert "The cheapest, probable (" in meaning


def test_one_condition_has_intervals_and_marks_instead_of_medians(no_sweep):
    table = overall_table(no_sweep)
    assert [column.name for column in table.columns][:3] == [
        "track loss [%]",
        "position RMSE [m]",
        "ANEES",
    ]
    assert table.has_marks


@pytest.mark.parametrize("kind", EVERY_KIND)
@pytest.mark.parametrize("width", [60, 80, 100, 300])
def test_no_line_is_wider_than_the_terminal_or_than_a_hundred(request, kind, width):
    results = request.getfixturevalue(kind)
    tables = [
        overall_table(results),
        comparison_table(results),
        comparison_table(results, "rmse_position", columns=["strategy"]),
        comparison_table(results, "anees", rows=["strategy"]),
    ]
    for table in tables:
        assert max(map(len, as_text(table, width).splitlines())) <= min(width, 100)


def test_long_names_are_broken_in_heads_and_kept_whole_in_rows(study):
    name = "a-name_of.sixty+letters-that_goes.on+and-on_until.it+is-full"
    names = {"nearest": name}
    summary = study.summary.replace({"strategy": names})
    document = {
        **study.document,
        "strategies": {
            names.get(one, one): kind for one, kind in study.document["strategies"].items()
        },
    }
    results = replace(study, summary=summary, document=document)
    heads = as_text(comparison_table(results), 80)
    assert name not in heads.split("\n\n")[1]
    assert max(map(len, heads.splitlines())) <= 80
    assert name in as_text(overall_table(results), 100)


def test_a_wide_table_moves_keys_to_headings_before_it_splits_columns(study):
    one = comparison_table(study, rows=[DENSITY, DETECTION, NOISE])
    assert "detection probability 0.6" not in as_text(one, 100)
    narrow = as_text(one, 60)
    assert "clutter density 1e-5 per m2, detection probability 0.6" in narrow


@pytest.mark.parametrize("metric", ["track_loss_rate", "rmse_position", "us_per_scan"])
def test_decimal_points_of_a_column_stand_below_each_other(study, metric):
    table = comparison_table(study, metric)
    for column in range(len(table.columns)):
        texts = cell_texts(table, column)
        cells = aligned_cells(table, column)
        points = {
            cell.index(text.value) + len(text.value.partition(".")[0])
            for cell, text in zip(cells, texts, strict=True)
        }
        assert len(points) == 1
        assert len({cell.index("(") for cell in cells if "(" in cell}) <= 1
        assert len({len(cell) for cell in cells}) == 1


def test_a_rule_under_the_head_and_no_box_around_it(study):
    text = as_text(comparison_table(study), 100)
    rules = [line for line in text.splitlines() if set(line) == {"─"}]
    assert len(rules) == 2
    assert not re.search("[│┌┐└┘├┤┬┴┼|+=]", text)


def test_a_table_begins_with_its_question_and_ends_with_what_it_means(study):
    for table in (overall_table(study), comparison_table(study)):
        text = as_text(table, 100)
        assert text.startswith("Which strategy holds a small craft through sea clutter?\n")
        assert " ".join(text.split()).endswith(table.meaning)
    silent = replace(study, document={**study.document, "question": ""})
    assert as_text(overall_table(silent)).startswith("An invented harbour approach\n")


def test_a_thousand_cases_are_one_table(thousand_cases):
    table = comparison_table(thousand_cases)
    assert sum(cell is not None for row in table.rows for cell in row.cells) == 1008
