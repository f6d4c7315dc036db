from dataclasses import replace

import numpy as np
import pytest

from harness.report.swept import (
    narrowed,
    resolve,
    settings_of,
    short_name,
    strategy_key,
    swept_keys,
)

DENSITY = "scene.sensor.clutter_density_per_m2"


@pytest.mark.parametrize(
    ("key", "name", "unit"),
    [
        (DENSITY, "clutter density", "1/m2"),
        ("scene.sensor.clutter_density_per_m_deg", "clutter density", "1/(m deg)"),
        ("scene.sensor.clutter_per_scan", "clutter", "1/scan"),
        ("scene.sensor.detection_probability", "detection probability", ""),
        ("scene.sensor.noise_sd_m", "noise sd", "m"),
        ("scene.sensor.noise_sd_bearing_deg", "noise sd bearing", "deg"),
        ("scene.target.acceleration_psd_m2_per_s3", "acceleration psd", "m2/s3"),
        ("scene.target.start_velocity_m_per_s", "start velocity", "m/s"),
        ("scene.scan_interval_s", "scan interval", "s"),
        ("track_loss.for_scans", "for scans", ""),
        ("strategies.mixture.max_components", "max components", ""),
        (f"strategies.pda.assumes{DENSITY[5:]}.factor", "assumed clutter density factor", ""),
        ("strategies.pda.assumes.sensor.noise_sd_m", "assumed noise sd", "m"),
        (
            "scene.unmodelled.persistent_clutter.expected_number",
            "persistent clutter expected number",
            "",
        ),
    ],
)
def test_a_swept_key_is_called_by_its_last_part_with_the_unit_apart(key, name, unit):
    assert short_name(key) == (name, unit)


def test_heads_put_the_unit_in_brackets(study):
    assert [key.head for key in swept_keys(study).values()] == [
        "clutter density [1/m2]",
        "detection probability",
        "noise sd [m]",
    ]


def test_settings_and_assumptions_name_their_strategy(invent):
    keys = ("strategies.mixture.max_components", f"strategies.pda.assumes{DENSITY[5:]}.factor")
    results = invent(sweep={key: [5, 10] for key in keys})
    assert [swept.name for swept in swept_keys(results).values()] == [
        "max components of mixture",
        "assumed clutter density factor of pda",
    ]


def test_names_that_collide_are_led_by_what_differs(invent):
    keys = ("scene.target.start_m", "scene.sensor.start_m")
    results = invent(sweep={key: [5, 10] for key in keys})
    assert [swept.name for swept in swept_keys(results).values()] == [
        "target start",
        "sensor start",
    ]


def test_lists_become_levels_that_are_text(invent):
    results = invent(sweep={"scene.sensor.region_m": [[[0.0, 1.0]], [[0.0, 2.0]]]})
    swept = swept_keys(results)["scene.sensor.region_m"]
    assert not swept.numeric
    assert swept.levels == ("[[0.0, 1.0]]", "[[0.0, 2.0]]")


def test_a_key_may_be_given_by_its_last_parts(study):
    assert resolve(study, "noise_sd_m") == "scene.sensor.noise_sd_m"
    assert resolve(study, "sensor.noise_sd_m") == "scene.sensor.noise_sd_m"
    assert resolve(study, "strategy") == "strategy"


def test_a_key_that_is_not_swept_is_refused_with_the_near_miss(study):
    with pytest.raises(ValueError, match=r"does not sweep 'scene.sensor.noise_sd'.*noise_sd_m\?"):
        resolve(study, "scene.sensor.noise_sd")


def test_last_parts_that_several_keys_share_are_refused(invent):
    keys = ("strategies.mixture.max_components", "strategies.particles.max_components")
    results = invent(sweep={key: [5, 10] for key in keys})
    with pytest.raises(ValueError, match=r"may mean strategies\.mixture\.max_components or"):
        resolve(results, "max_components")


def test_narrowing_finds_scans_whose_numbers_went_through_a_text_file(study):
    density = study.summary[DENSITY].unique()[1]
    summary = study.summary.copy()
    summary[DENSITY] = np.nextafter(summary[DENSITY], 1.0)
    level = float(np.nextafter(density, 1.0))
    view = narrowed(replace(study, summary=summary), {DENSITY: level})
    assert len(view.summary) == 9 * 6
    assert len(view.scans) == 9 * 6 * 40


def test_a_condition_that_was_not_run_is_refused_with_those_that_were(study):
    with pytest.raises(ValueError, match=r"no condition with noise_sd_m = 7; .* 5, 10, 20"):
        narrowed(study, {"noise_sd_m": 7})


def test_settings_are_those_that_occur(study, no_sweep):
    assert len(settings_of(study)) == 27
    assert settings_of(study, ["scene.sensor.noise_sd_m"]) == [
        {"scene.sensor.noise_sd_m": sd} for sd in (5.0, 10.0, 20.0)
    ]
    assert settings_of(no_sweep) == [{}]


def test_a_partial_study_has_the_strategies_that_were_run(study):
    rest = study.summary[study.summary["strategy"] != "particles"]
    assert "particles" not in strategy_key(replace(study, summary=rest)).levels


def test_results_without_a_case_are_refused(study):
    with pytest.raises(ValueError, match="hold no case yet; run the study first"):
        strategy_key(replace(study, summary=study.summary.iloc[:0]))
