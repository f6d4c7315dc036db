"""Linearisations and quadrature in study files, and what is said of those that don't fit."""

import pytest

from harness.study.json_schema import study_json_schema
from harness.study.study import load_study

PDA = 'kind = "pda"'
SENSOR = """\
kind = "position"
noise_sd_m = 4.0
detection_probability = 0.9
clutter_density_per_m2 = 2e-5
region_m = [[-400.0, 400.0], [-400.0, 400.0]]
"""
BEARINGS = """\
kind = "bearing"
noise_sd_bearing_deg = 2.0
detection_probability = 0.9
clutter_per_scan = 3.0
"""
SWEPT = '"scene.sensor.noise_sd_m" = [2.0, 4.0]'
UNSWEPT = '"scene.sensor.detection_probability" = [0.5, 0.9]'
STATED = "26: strategies.pda.linearisation"
FOUR = "for a state of 4 numbers, beyond 20,000; take at most 11"

MISTAKES = {
    "an unknown kind": (
        'linearisation = { kind = "unscentd" }',
        f'{STATED}.kind = "unscentd": is unknown; did you mean unscented? there are first-order, '
        "iterated, unscented, cubature, gauss-hermite, converted-measurements",
    ),
    "an unknown key": (
        'linearisation = { kind = "unscented", kapa = 1.0 }',
        f"{STATED}.kapa = 1.0: is unknown; did you mean kappa?",
    ),
    "a key of another kind": (
        'linearisation = { kind = "cubature", points_per_axis = 4 }',
        f"{STATED}.points_per_axis = 4: is unknown here: only kind = gauss-hermite has it; choose "
        "that, or remove it",
    ),
    "no kind": (
        "linearisation = { kappa = 1.0 }",
        f"{STATED}.kind: is missing; give kind, one of first-order, iterated, unscented, cubature, "
        "gauss-hermite, converted-measurements",
    ),
    "no table": (
        'linearisation = "unscented"',
        f'{STATED} = "unscented": must be a table; give its keys under a [table] or in {{ }}',
    ),
    "an alpha of 0": (
        'linearisation = { kind = "unscented", alpha = 0.0 }',
        f"{STATED}.alpha = 0.0: must be above 0; give a positive number",
    ),
    "kappa at minus the size of the state": (
        'linearisation = { kind = "unscented", kappa = -4.0 }',
        f"{STATED}.kappa = -4.0: must be above -4, minus the numbers in the state; leave it "
        "out for -1, or give a larger one",
    ),
    "too many Gauss-Hermite points": (
        'linearisation = { kind = "gauss-hermite", points_per_axis = 12 }',
        f"{STATED}.points_per_axis = 12: makes 20,736 points {FOUR}",
    ),
    "too many points for the detection probability": (
        "detection_points_per_axis = 32",
        f"26: strategies.pda.detection_points_per_axis = 32: makes 1,048,576 points {FOUR}",
    ),
    "one point": (
        "detection_points_per_axis = 1",
        "26: strategies.pda.detection_points_per_axis = 1: must be at least 2; give a whole number",
    ),
}


@pytest.mark.parametrize("mistake", MISTAKES)
def test_a_mistake_is_told_with_place_value_rule_and_remedy(said_of, mistake):
    line, message = MISTAKES[mistake]
    assert said_of((PDA, f"{PDA}\n{line}")) == [f"fog.toml:{message}"]


def test_detections_that_fix_no_position_are_not_converted(said_of):
    line = 'linearisation = { kind = "converted-measurements" }'
    said = said_of((PDA, f"{PDA}\n{line}"), (SENSOR, BEARINGS), (SWEPT, UNSWEPT))
    assert said == [
        'fog.toml:25: strategies.pda.linearisation.kind = "converted-measurements": needs '
        "detections that fix a position, which those of this sensor don't; choose another, or a "
        "sensor of kind position or range-bearing or range-azimuth-elevation"
    ]


def test_a_swept_value_that_does_not_fit_is_told_at_its_sweep(said_of):
    """Only the value that does not; the scene is swept beside it."""
    values = '"strategies.pda.linearisation.kappa" = [-5.0, 0.0]'
    line = 'linearisation = { kind = "unscented" }'
    said = said_of((PDA, f"{PDA}\n{line}"), (SWEPT, f"{SWEPT}\n{values}"))
    assert said == [
        "fog.toml:33: strategies.pda.linearisation.kappa = -5.0: must be above -4, minus the "
        "numbers in the state; leave it out for -1, or give a larger one"
    ]


def test_kinds_and_settings_may_be_swept(study_file):
    values = (
        '"strategies.pda.linearisation.kind" = ["first-order", "unscented", "cubature"]\n'
        '"strategies.mixture.detection_points_per_axis" = [2, 3]'
    )
    study = load_study(study_file((SWEPT, values)))
    found = [
        (pda.strategy.linearisation.kind, mixture.strategy.detection_points_per_axis)
        for pda, mixture in (condition.cases for condition in study.conditions)
    ]
    kinds = ("first-order", "unscented", "cubature")
    assert found == [(kind, points) for kind in kinds for points in (2, 3)]


def test_what_is_compiled_anew_is_named_to_the_warming_up(study_file):
    """One choice for each kind and for quadrature; numbers that compile nothing are left out."""
    line = 'linearisation = { kind = "unscented" }'
    swept = '"strategies.pda.linearisation.kappa" = [0.0, 1.0]'
    path = study_file((PDA, f"{PDA}\n{line}"), (SWEPT, swept))
    one, other = (condition.cases[0].strategy for condition in load_study(path).conditions)
    plain = load_study(path).conditions[0].cases[1].strategy
    by_quadrature = plain.model_copy(update={"detection_points_per_axis": 3})
    assert one.kernel_choice() == other.kernel_choice()
    choices = {strategy.kernel_choice() for strategy in (one, plain, by_quadrature)}
    assert len(choices) == 3


def test_editors_are_told_of_kinds_and_settings():
    definitions = study_json_schema()["$defs"]
    stated = definitions["ProbabilisticDataAssociation"]["properties"]
    assert stated["detection_points_per_axis"]["minimum"] == 2
    records = {option["$ref"].rpartition("/")[2] for option in stated["linearisation"]["oneOf"]}
    assert {"FirstOrder", "Unscented", "ConvertedMeasurements"} < records
    assert {"kind", "alpha", "beta", "kappa"} == set(definitions["Unscented"]["properties"])
