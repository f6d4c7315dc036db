"""Studies that name a sensor of the user's own: read, checked, run by workers, and told apart."""

from pathlib import Path

import numpy as np
import pytest

import trackassay
from harness.study.mistakes import StudyError
from harness.study.study import load_study

STUDIES = Path(__file__).parents[2] / "studies"
FILE = """
import math

def polar(parameters, site, state, out):
    out[0] = math.sqrt((state[0] - site[0]) ** 2 + (state[1] - site[1]) ** 2)
    out[1] = math.atan2(state[1] - site[1], state[0] - site[0])

def polar_jacobian(parameters, site, state, out):
    east, north = state[0] - site[0], state[1] - site[1]
    square = east * east + north * north
    distance = math.sqrt(square)
    out[0, 0] = east / distance
    out[0, 1] = north / distance
    out[1, 0] = -north / square
    out[1, 1] = east / square
"""
STUDY = """\
title = "An own sensor"
seed = 5
trials = 20
[scene]
scans = 10
scan_interval_s = 1.0
[scene.target]
motion = "nearly-constant-velocity"
acceleration_psd_m2_per_s3 = 0.1
start_position_m = [200.0, 50.0]
start_velocity_m_per_s = [5.0, 3.0]
start_position_sd_m = [10.0, 10.0]
start_velocity_sd_m_per_s = [1.0, 1.0]
[scene.sensor]
kind = "parts/own.py:polar"
measurement_units = ["m", "deg"]
noise_sd = [5.0, 1.0]
measurement_region = [[0.0, 500.0], [-180.0, 180.0]]
detection_probability = 0.8
clutter_per_scan = 4.0
[strategies.pda]
kind = "pda"
[strategies.known]
kind = "known-association"
[track_loss]
error_above_m = 50.0
for_scans = 3
[gospa]
cutoff_m = 30.0
"""
SENSOR = STUDY[STUDY.index("kind = ") : STUDY.index("detection_prob")]
SHIPPED = """\
kind = "range-bearing"
noise_sd_range_m = 5.0
noise_sd_bearing_deg = 1.0
region_range_m = [0.0, 500.0]
"""


@pytest.fixture
def study(tmp_path):
    """Write a study and its sensor's file; return the study's path."""

    def write(file=FILE, *edits):
        (tmp_path / "parts").mkdir(exist_ok=True)
        if file is not None:
            (tmp_path / "parts" / "own.py").write_text(file)
        text = STUDY
        for old, new in edits:
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        path = tmp_path / "study.toml"
        path.write_text(text)
        return path

    return write


def run(path, **keys):
    path = Path(path)
    return trackassay.run_study(path, into=path.parent / "results", **{"workers": 1} | keys)


def without_cost(outcome):
    return outcome.results.summary.drop(columns="us_per_scan")


# Running


def test_an_own_sensor_gives_the_numbers_of_the_shipped_one_of_its_formula(study, tmp_path):
    own = without_cost(run(study()))
    shipped = without_cost(run(study(FILE, (SENSOR, SHIPPED))))
    assert len(own) == 2
    for column in own.columns:
        if own[column].dtype == float:
            np.testing.assert_allclose(own[column], shipped[column], rtol=1e-9, err_msg=column)


def test_workers_load_the_file_themselves(study, tmp_path):
    """Two processes, and the same bits as one."""
    path = study(FILE, ("trials = 20", "trials = 300"))
    here = without_cost(run(path, store=tmp_path / "one"))
    there = without_cost(run(path, store=tmp_path / "two", workers=2))
    assert here.equals(there)


def test_results_of_an_older_file_are_not_found(study):
    path = study()
    first = run(path)
    words = []
    run(path, tell=words.append)
    assert "nothing to run" in words[-1]
    second = run(study(FILE.replace("out[0] = math.sqrt(", "out[0] = 1.0 + math.sqrt(")))
    assert not without_cost(first).equals(without_cost(second))


def test_a_strategy_may_assume_a_shipped_sensor_of_the_same_units(study):
    """The target is seen by a sensor that bends; one strategy takes it for straight."""
    bent = FILE.replace("out[1] = math", "out[1] = 0.05 + math")
    assumes = 'kind = "pda"\nassumes.sensor = { kind = "range-bearing", noise_sd_range_m = 5.0, '
    assumes += "noise_sd_bearing_deg = 1.0, region_range_m = [0.0, 500.0] }"
    summary = without_cost(run(study(bent, ('kind = "pda"', assumes)))).set_index("strategy")
    assert summary.rmse_position["pda"] > 1.5 * summary.rmse_position["known"]


def test_a_fault_at_some_states_sets_the_trials_aside_and_says_why(study):
    """The target leaves x = 215 m within its ten scans; nothing is swallowed."""
    for fault, words in (
        ("raise ValueError('beyond 215')", "beyond 215"),
        ("out[0] = math.nan", "no number"),
    ):
        text = FILE.replace(
            "\ndef polar_jac", f"    if state[0] > 215.0:\n        {fault}\n\ndef polar_jac"
        )
        path = study(text, ("start_position_sd_m = [10.0, 10.0]", "start_position_sd_m = [1, 1]"))
        outcome = run(path)
        assert len(outcome.set_aside) > 0
        assert all(words in one.failure.error for one in outcome.set_aside)


# Reading and checking


def said(call, path):
    with pytest.raises(StudyError) as raised:
        call(path)
    return str(raised.value).replace(f"{path.parent}/", "")


def test_reading_and_checking_a_study_imports_nothing(study):
    path = study("raise SystemExit('this file was imported')\n")
    load_study(path)
    words = trackassay.check_study(path)
    assert "The study names parts/own.py:polar, which is not imported to check it" in words
    assert "outside the region" not in words


@pytest.mark.parametrize("call", [trackassay.check_study, run])
def test_a_missing_file_is_named_with_its_place(study, call):
    path = study(None)
    assert said(call, path) == (
        'study.toml:15: scene.sensor.kind = "parts/own.py:polar": names a file that does not '
        "exist: parts/own.py; a path is taken from the folder of the study file"
    )


@pytest.mark.parametrize(
    ("file", "fault"),
    [
        ("import no_such_package\n", "cannot be imported: ModuleNotFoundError"),
        (FILE.replace("def polar(", "def bipolar("), "names no function of that file, which has"),
        (FILE.replace("+ (state[1]", "+ str(state[1]"), "raises TypeError"),
        (FILE.replace("out[1] = math", "bearing = math"), "measures ["),
        (FILE.replace("import math", "import math\nstore = {}").replace(
            "out[0] = math", "store[0] = out[0] = math"), "does not compile: "),
    ],
)  # fmt: skip
def test_a_fault_of_the_file_is_an_error_of_the_study_before_anything_runs(study, file, fault):
    path = study(file)
    message = said(run, path)
    assert message.startswith('study.toml:15: scene.sensor.kind = "parts/own.py:polar": ' + fault)
    assert not (path.parent / "results" / "summary.csv").exists()


def test_a_fault_of_an_assumed_sensor_is_named_where_it_is_assumed(study):
    assumes = 'kind = "pda"\nassumes.sensor.kind = "parts/gone.py:polar"'
    message = said(run, study(FILE, ('kind = "pda"', assumes)))
    assert message.startswith(
        'study.toml:23: strategies.pda.assumes.sensor.kind = "parts/gone.py:polar": names a file'
    )


def test_swept_own_sensors_are_each_tried_out(study):
    sweep = '[sweep]\n"scene.sensor.kind" = ["parts/own.py:polar", "parts/own.py:bipolar"]\n'
    message = said(run, study(FILE, ("[track_loss]", f"{sweep}[track_loss]")))
    assert 'scene.sensor.kind = "parts/own.py:bipolar": names no function of that file' in message


MISTAKES = {
    "a kind that is no file": (
        ("parts/own.py:polar", "parts/own.txt:polar"),
        'scene.sensor.kind = "parts/own.txt:polar": is unknown; there are position, range, bearing,'
        " range-bearing, range-bearing-range-rate, range-azimuth-elevation, FILE.py:NAME",
    ),
    "a file without a function": (
        ("parts/own.py:polar", "parts/own.py"),
        'scene.sensor.kind = "parts/own.py": is unknown; there are position, range, bearing, '
        "range-bearing, range-bearing-range-rate, range-azimuth-elevation, FILE.py:NAME",
    ),
    "noise of another size": (
        ("noise_sd = [5.0, 1.0]", "noise_sd = [5.0]"),
        "scene.sensor.noise_sd = [5.0]: must have 2 entries; "
        "give one for each of measurement_units",
    ),
    "an unknown unit": (
        ('"deg"', '"degree"'),
        'scene.sensor.measurement_units[1] = "degree": must be m or m/s or deg or s or Hz or '
        "other; did you mean deg?",
    ),
    "a region that runs backwards": (
        ("[0.0, 500.0]", "[500.0, 0.0]"),
        "scene.sensor.measurement_region[0] = [500.0, 0.0]: must run from a lower to a higher "
        "value in its unit; swap its ends",
    ),
    "a region of more than a turn": (
        ("[-180.0, 180.0]", "[-180.0, 181.0]"),
        "scene.sensor.measurement_region[1] = [-180.0, 181.0]: must not span more than 360 "
        "degrees; bring its ends closer",
    ),
    "an assumed sensor of other units": (
        ('kind = "pda"', 'kind = "pda"\nassumes.sensor.measurement_units = ["m", "m"]'),
        "strategies.pda.assumes.sensor: measures something else than the scene's sensor; "
        "the detections are the scene's: keep its kind and its number of axes",
    ),
    "no sensor at all": (
        (STUDY[STUDY.index("[scene.sensor]") : STUDY.index("[strategies.pda]")], "sensor = 3\n"),
        "scene.target.sensor = 3: is unknown here; move it to [scene]",
    ),
}


@pytest.mark.parametrize("name", MISTAKES)
def test_a_mistake_about_an_own_sensor_has_one_message(study, name):
    edit, expected = MISTAKES[name]
    message = said(load_study, study(FILE, edit)).splitlines()[-1]
    assert message.split(": ", 1)[1] == expected


def test_the_shipped_study_of_an_own_sensor_runs(tmp_path):
    """Ten trials of its densest clutter; the Jacobian of its file stands its comparison."""
    shipped = load_study(STUDIES / "listening_posts.toml")
    small = shipped.with_changes({"trials": 10, "sweep": {"scene.sensor.clutter_per_scan": [80.0]}})
    outcome = trackassay.run_study(small, into=tmp_path / "results", workers=1)
    assert outcome.results.summary.rmse_position.between(1.0, 50.0).all()
    assert not outcome.set_aside
