import itertools
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import norm

from harness.study.study import load_study

SWEEP = '"scene.sensor.noise_sd_m" = [2.0, 4.0]'
TOGETHER = """
[[sweep_together]]
"scene.scans" = [20, 40]
"scoring.from_scan" = [3, 5]
[[sweep_together]]
"strategies.mixture.estimate" = ["mean", "heaviest"]
"""
HARBOUR = Path(__file__).parents[3] / "studies" / "harbour_approach.toml"


@pytest.fixture
def swept(study_file):
    """Load the study with other sweeps."""

    def load(sweeps, *edits):
        return load_study(study_file((SWEEP, sweeps), *edits))

    return load


def test_a_study_without_sweeps_is_one_condition(swept):
    study = swept("")
    (condition,) = study.conditions
    assert study.swept == ()
    assert condition.settings == {}
    assert [case.name for case in condition.cases] == ["pda", "mixture"]


def test_the_grid_comes_first_and_the_last_key_varies_fastest(swept):
    study = swept(SWEEP + '\n"gospa.order" = [1, 2, 3]' + TOGETHER)
    assert study.swept == (
        "scene.sensor.noise_sd_m",
        "gospa.order",
        "scene.scans",
        "scoring.from_scan",
        "strategies.mixture.estimate",
    )
    expected = [
        (noise, order, *step, estimate)
        for noise, order, step, estimate in itertools.product(
            [2.0, 4.0], [1, 2, 3], [(20, 3), (40, 5)], ["mean", "heaviest"]
        )
    ]
    assert [tuple(condition.settings.values()) for condition in study.conditions] == expected
    assert all(tuple(condition.settings) == study.swept for condition in study.conditions)


def test_every_condition_has_its_settings_in_its_rules_and_the_rest_as_the_file_says(swept):
    study = swept(SWEEP + '\n"gospa.order" = [1, 2, 3]' + TOGETHER)
    for condition in study.conditions:
        rules, settings = condition.rules, condition.settings
        assert rules.scene.sensor.noise_sd_m == settings["scene.sensor.noise_sd_m"]
        assert rules.gospa.order == settings["gospa.order"]
        assert rules.scene.scans == settings["scene.scans"]
        assert rules.scoring.from_scan == settings["scoring.from_scan"]
        assert condition.cases[1].strategy.estimate == settings["strategies.mixture.estimate"]
        assert rules.scene.sensor.detection_probability == 0.9
        assert rules.gospa.cutoff_m == 30.0
        assert rules.strategies == {case.name: case.strategy for case in condition.cases}


def test_the_document_stays_as_it_was_read(swept):
    study = swept('"strategies.mixture.max_components" = [5, 10]')
    assert "max_components" not in study.document["strategies"]["mixture"]
    assert study.record.strategies["mixture"].max_components == 5


def test_a_part_that_a_sweep_leaves_alone_is_one_record_in_all_conditions(swept):
    """Thousands of conditions load fast because each version of a part is checked once."""
    study = swept('"strategies.mixture.max_components" = { from = 1, to = 50, count = 50 }')
    assert len({id(condition.rules.scene) for condition in study.conditions}) == 1
    assert len({id(condition.cases[0].strategy) for condition in study.conditions}) == 1
    assert len({id(condition.cases[1].strategy) for condition in study.conditions}) == 50


@pytest.mark.parametrize(
    ("spacing", "expected"),
    [
        ("linear", np.linspace(2.0, 18.0, 5)),
        ("logarithmic", 2.0 * 9.0 ** (np.arange(5) / 4)),
    ],
)
def test_a_range_has_equal_differences_or_ratios_and_exact_ends(swept, spacing, expected):
    study = swept(
        f'"scene.sensor.noise_sd_m" = {{ from = 2.0, to = 18.0, count = 5, spacing = "{spacing}" }}'
    )
    values = [condition.settings["scene.sensor.noise_sd_m"] for condition in study.conditions]
    np.testing.assert_allclose(values, expected, rtol=1e-14)
    assert (values[0], values[-1]) == (2.0, 18.0)


def test_a_range_of_a_whole_number_gives_whole_numbers(swept):
    study = swept(
        '"strategies.mixture.max_components" = '
        '{ from = 1, to = 1000, count = 4, spacing = "logarithmic" }'
    )
    values = [
        condition.settings["strategies.mixture.max_components"] for condition in study.conditions
    ]
    assert values == [1, 10, 100, 1000]
    assert all(isinstance(value, int) for value in values)


@pytest.mark.parametrize(
    ("sweep", "key", "expected"),
    [
        ('"track_loss.error_above_m" = [60.0]', "track_loss.error_above_m", 60.0),
        ('"strategies.pda.gate_probability" = [1]', "strategies.pda.gate_probability", 1.0),
        ('"strategies.pda.ends.empty_scans" = [7]', "strategies.pda.ends.empty_scans", 7),
        (
            '"strategies.pda.kind" = ["nearest-neighbour"]',
            "strategies.pda.kind",
            "nearest-neighbour",
        ),
        ('"scene.target.start_position_m.1" = [7.0]', "scene.target.start_position_m", (40.0, 7.0)),
        (
            '"scene.sensor.region_m.0.1" = [700]',
            "scene.sensor.region_m",
            ((-400, 700), (-400, 400)),
        ),
        ('"scoring.from_scan" = [9]', "scoring.from_scan", 9),
    ],
)
def test_anything_of_one_value_can_be_swept_stated_or_not(swept, sweep, key, expected):
    (condition,) = swept(sweep).conditions
    value = condition.rules
    for name in key.split("."):
        value = value[name] if isinstance(value, dict) else getattr(value, name)
    assert value == expected


def test_a_swept_key_may_be_left_out_of_its_table(swept):
    study = swept(SWEEP, ("noise_sd_m = 4.0\n", ""))
    assert [c.rules.scene.sensor.noise_sd_m for c in study.conditions] == [2.0, 4.0]


def test_strategies_whose_names_hold_blanks_can_be_swept(swept):
    study = swept(
        '"strategies.own mix.max_components" = [3]',
        ("[strategies.mixture]", '[strategies."own mix"]'),
    )
    assert study.strategies == ("pda", "own mix")
    assert study.conditions[0].cases[1].strategy.max_components == 3


KEY = 'sweep."scene.sensor.noise_sd_m"'
MISTAKES = {
    "an empty list": (
        '"scene.sensor.noise_sd_m" = []',
        f"31: {KEY} = []: is empty; give at least one value",
    ),
    "neither list nor range": (
        '"scene.sensor.noise_sd_m" = 3.0',
        f"31: {KEY} = 3.0: must be a list of values or a range; "
        "write [..., ...] or { from = ..., to = ..., count = ... }",
    ),
    "a range without an end": (
        '"scene.sensor.noise_sd_m" = { from = 1.0, count = 3 }',
        f"31: {KEY}.to: is missing; add it: last value",
    ),
    "a range with an unknown key": (
        '"scene.sensor.noise_sd_m" = { from = 1.0, to = 2.0, cout = 3 }',
        f"31: {KEY}.cout = 3: is unknown; did you mean count?",
    ),
    "a range of one value": (
        '"scene.sensor.noise_sd_m" = { from = 1.0, to = 2.0, count = 1 }',
        f"31: {KEY}.count = 1: must be at least 2; give a whole number",
    ),
    "a range without extent": (
        '"scene.sensor.noise_sd_m" = { from = 1.0, to = 1.0, count = 3 }',
        f"31: {KEY}.to = 1.0: must differ from `from`; give two ends, or a list of one value",
    ),
    "a logarithmic range from zero": (
        '"scene.sensor.noise_sd_m" = { from = 0, to = 1.0, count = 3, spacing = "logarithmic" }',
        f'31: {KEY}.spacing = "logarithmic": needs ends above 0; give such ends or linear spacing',
    ),
    "a range of unknown spacing": (
        '"scene.sensor.noise_sd_m" = { from = 1, to = 2.0, count = 3, spacing = "linea" }',
        f'31: {KEY}.spacing = "linea": must be linear or logarithmic; did you mean linear?',
    ),
    "a range wider than numbers": (
        '"scene.target.start_position_m.0" = { from = -1e308, to = 1e308, count = 3 }',
        '31: sweep."scene.target.start_position_m.0".from = -1e+308: is beyond 1e+30 in size; '
        "give a number that can be reckoned with",
    ),
    "a value that its key does not take": (
        '"scene.sensor.noise_sd_m" = [\n1.0,\n-2.0,\n3.0]',
        f"33: {KEY} = -2.0: must be above 0; give a positive number, in m",
    ),
    "a range that runs out of what its key takes": (
        '"scene.sensor.noise_sd_m" = { from = 0, to = 2.0, count = 3 }',
        f"31: {KEY} = 0.0: must be above 0; give a positive number, in m",
    ),
    "true among values": (
        '"scene.sensor.noise_sd_m" = [1.0, true]',
        f"31: {KEY} = true: must be a number or text; give single values",
    ),
    "a list among values": (
        '"scene.target.start_position_m.0" = [[1.0, 2.0]]',
        '31: sweep."scene.target.start_position_m.0" = [1.0, 2.0]: must be a number or text; '
        "sweep the entries of a list by their place, as in scene.target.start_position_m.0",
    ),
    "text for a number": (
        '"scene.sensor.noise_sd_m" = ["1.0"]',
        f'31: {KEY} = "1.0": must be a number, not text; write it without quotes',
    ),
    "a fraction for a whole number": (
        '"scene.scans" = { from = 10, to = 15, count = 3 }',
        '31: sweep."scene.scans" = 12.5: must be a whole number; '
        "write it without a decimal point or exponent",
    ),
    "a value twice": (
        '"scene.sensor.noise_sd_m" = [1.0,\n2.0,\n1]',
        f"33: {KEY} = 1: is swept twice; remove one",
    ),
    "an unknown key": (
        '"scene.sensor.nose_sd_m" = [1.0]',
        '31: sweep."scene.sensor.nose_sd_m": is no key of the study; '
        "did you mean scene.sensor.noise_sd_m?",
    ),
    "an unknown key of a strategy": (
        '"strategies.mixtures.max_components" = [1]',
        '31: sweep."strategies.mixtures.max_components": is no key of the study; '
        "did you mean strategies.mixture.max_components?",
    ),
    "an unknown assumption": (
        '"strategies.pda.assumes.sensor.noise_sd.factor" = [1]',
        '31: sweep."strategies.pda.assumes.sensor.noise_sd.factor": is no key of the study; '
        "did you mean strategies.pda.assumes.sensor.noise_sd_m.factor?",
    ),
    "a key of another kind": (
        '"strategies.pda.max_components" = [1]',
        '31: sweep."strategies.pda.max_components": is no key of the study; '
        "did you mean strategies.mixture.max_components?",
    ),
    "a key without its table": (
        '"sensor.noise_sd_m" = [1.0]',
        '31: sweep."sensor.noise_sd_m": is no key of the study; '
        "did you mean scene.sensor.noise_sd_m?",
    ),
    "a key in another unit": (
        '"scene.sensor.noise_sd_km" = [1.0]',
        '31: sweep."scene.sensor.noise_sd_km": is no key of the study; '
        "did you mean scene.sensor.noise_sd_m?",
    ),
    "a key like no other": (
        '"xyz" = [1.0]',
        "31: sweep.xyz: is no key of the study; name it as in scene.sensor.detection_probability",
    ),
    "dots outside quotes": (
        "scene.sensor.noise_sd_m = [1.0]",
        "31: sweep.scene: is no swept key; "
        'put the whole key in quotes: "scene.sensor.KEY" = [..., ...]',
    ),
    "a table": (
        '"gospa" = [1.0]',
        "31: sweep.gospa: is no single value; sweep one of its keys, such as gospa.cutoff_m",
    ),
    "a list": (
        '"scene.target.start_position_m" = [1.0]',
        '31: sweep."scene.target.start_position_m": is no single value; '
        "sweep one of its keys, such as scene.target.start_position_m.0",
    ),
    "the seed": (
        '"seed" = [1, 2]',
        "31: sweep.seed: is the same for all conditions; "
        "sweep keys of the scene, strategies or scoring",
    ),
    "a key twice": (
        SWEEP + '\n[[sweep_together]]\n"scene.sensor.noise_sd_m" = [1.0]',
        '33: sweep_together[0]."scene.sensor.noise_sd_m": is swept twice; '
        "keep one; the other stands in sweep",
    ),
    "a value and its factor": (
        '"strategies.pda.assumes.sensor.noise_sd_m" = [1.0]\n'
        '"strategies.pda.assumes.sensor.noise_sd_m.factor" = [1.0]',
        '32: sweep."strategies.pda.assumes.sensor.noise_sd_m.factor": and '
        "strategies.pda.assumes.sensor.noise_sd_m sweep the same thing; keep one of the two",
    ),
    "unequal steps": (
        '[[sweep_together]]\n"gospa.order" = [1, 2]\n"gospa.cutoff_m" = [1.0, 2.0, 3.0]',
        "31: sweep_together[0]: must have equally many values: "
        "gospa.order has 2, gospa.cutoff_m has 3; even them out",
    ),
    "a step twice": (
        '[[sweep_together]]\n"gospa.order" = [1, 2,\n1]\n"gospa.cutoff_m" = [1.0, 1.0, 1.0]',
        '33: sweep_together[0]."gospa.order" = 1: is swept twice with the same values beside it; '
        "remove one",
    ),
    "an empty group": (
        "[[sweep_together]]",
        "31: sweep_together[0]: is empty; name at least one",
    ),
    "a group in single brackets": (
        '[sweep_together]\n"gospa.order" = [1, 2]',
        "31: sweep_together: must be a list of tables; write each under [[ ]]",
    ),
    "more conditions than can be meant": (
        '"gospa.order" = { from = 1, to = 2, count = 1000 }\n'
        '"gospa.cutoff_m" = { from = 1, to = 2, count = 1000 }',
        '32: sweep."gospa.cutoff_m": makes 1000000 conditions with the other sweeps, '
        "more than 100000; sweep fewer values",
    ),
    "a value at odds with what the file says": (
        '"scoring.from_scan" = [10, 31]',
        '31: sweep."scoring.from_scan" = 31: must not exceed the 30 scans of the scene; '
        "give an earlier scan or more scans",
    ),
    "a first value at odds with what the file says": (
        '"scene.sensor.clutter_per_scan" = [1.0, 2.0]',
        '31: sweep."scene.sensor.clutter_per_scan" = 1.0: does not fit: '
        "scene.sensor.clutter_density_per_m2 says the same as clutter_per_scan; keep one of them",
    ),
    "a kind that lacks keys": (
        '"scene.target.motion" = ["nearly-constant-velocity", "coordinated-turn"]\n'
        '"scene.sensor.noise_sd_m" = [1.0, 2.0]',
        '31: sweep."scene.target.motion" = "coordinated-turn": does not fit: '
        "scene.target.turn_rate_psd_deg2_per_s3 is missing; "
        "add it: power spectral density of the white noise that drives the turn rate, deg2/s3",
    ),
    "two values at odds with each other": (
        '"scene.scans" = [20, 40]\n"scoring.from_scan" = [10, 30]\n"gospa.order" = [1, 2]',
        '32: sweep."scoring.from_scan" = 30: does not go with scene.scans = 20: '
        "scoring.from_scan must not exceed the 20 scans of the scene; "
        "give an earlier scan or more scans",
    ),
}


@pytest.mark.parametrize("name", MISTAKES)
def test_a_mistake_in_a_sweep_is_named_at_the_sweep(said_of, name):
    sweeps, expected = MISTAKES[name]
    assert said_of((SWEEP, sweeps))[:1] == [f"fog.toml:{expected}"]
    assert len(said_of((SWEEP, sweeps))) == (2 if name == "a kind that lacks keys" else 1)


def test_the_shipped_study_is_27_conditions_of_six_strategies():
    study = load_study(HARBOUR)
    assert study.name == "harbour_approach"
    assert len(study.conditions) == 27
    assert study.strategies == ("nearest", "probable", "pda", "mixture", "particles", "known")
    assert all(case.assumed is c.rules.scene for c in study.conditions for case in c.cases)


def test_the_target_of_the_shipped_study_stays_in_the_region():
    """Closed form: the position is Gaussian, of variance p^2 + v^2 t^2 + q t^3 / 3 at time t.

    Source of the last term: double integral of white noise (Bar-Shalom, Li and Kirubarajan (2001),
    section 6.2.2). Detections leave it too, by the noise.
    """
    scene = load_study(HARBOUR).record.scene
    target, sensor = scene.target, scene.sensor
    times = scene.scan_interval_s * np.arange(scene.scans)
    outside = np.zeros(scene.scans)
    for axis, (low, high) in enumerate(sensor.region_m):
        mean = target.start_position_m[axis] + target.start_velocity_m_per_s[axis] * times
        variance = (
            target.start_position_sd_m[axis] ** 2
            + (target.start_velocity_sd_m_per_s[axis] * times) ** 2
            + target.acceleration_psd_m2_per_s3 * times**3 / 3
            + 20.0**2  # the largest noise that is swept
        )
        deviation = np.sqrt(variance)
        outside += norm.sf(high, mean, deviation) + norm.cdf(low, mean, deviation)
    assert outside.max() < 1e-4
