"""The command as a user meets it: what it prints, writes and exits with."""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pandas as pd
import pytest

import trackassay
from harness import cli
from harness.study.memory import machine_memory

ROOT = Path(__file__).parents[2]
SMOKE = ROOT / "studies" / "smoke.toml"
ENVIRONMENT = {**os.environ, "PYTHONPATH": str(ROOT)}

WITH_INTERVAL = ["track_loss_rate", "rmse_position", "rmse_velocity", "anees", "gospa"]
CONTRACT = {
    *WITH_INTERVAL,
    *(f"{name}_{end}" for name in WITH_INTERVAL for end in ("low", "high")),
    "nees_inside",
    "gospa_localisation",
    "gospa_missed",
    "gospa_false",
    "rmse_position_all",
    "hypotheses_per_scan",
    "us_per_scan",
    "trials_chosen_by",
}


@pytest.fixture
def command(monkeypatch, capsys, tmp_path):
    """Runs the command in this process, in an empty folder: (exit code, output, messages)."""
    monkeypatch.chdir(tmp_path)

    def run(*arguments):
        monkeypatch.setattr(sys, "argv", ["trackassay", *map(str, arguments)])
        before = signal.getsignal(signal.SIGTERM)
        try:
            code = cli.main()
        finally:
            signal.signal(signal.SIGTERM, before)
        said = capsys.readouterr()
        return code, said.out, said.err

    return run


@pytest.fixture(scope="module")
def finished(tmp_path_factory):
    """A folder in which a small study was run."""
    folder = tmp_path_factory.mktemp("finished")
    study = trackassay.load_study(SMOKE).with_changes({"trials": 30})
    trackassay.run_study(study, into=folder / "results" / "smoke", workers=1)
    return folder


@pytest.fixture
def results(finished, tmp_path):
    """A copy of finished results that a test may harm."""
    return Path(shutil.copytree(finished / "results" / "smoke", tmp_path / "smoke"))


def start(tmp_path, *arguments):
    return subprocess.Popen(
        [sys.executable, "-m", "trackassay", *map(str, arguments)],
        cwd=tmp_path,
        env=ENVIRONMENT,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


def without_cost(results):
    return results.summary.drop(columns="us_per_scan")


def test_help_loads_nothing_heavy():
    heavy = ["numba", "pandas", "scipy", "matplotlib", "pyarrow", "pydantic"]
    code = (
        "import sys, trackassay, harness.cli\n"
        f"print([name for name in {heavy} if name in sys.modules])"
    )
    loaded = subprocess.run(
        [sys.executable, "-c", code], env=ENVIRONMENT, capture_output=True, text=True, check=True
    )
    assert loaded.stdout.strip() == "[]"


def test_check_says_what_a_study_would_do(command):
    code, out, _ = command("check", SMOKE)
    assert code == 0
    assert "8" in out.split("cases")[1].split("\n")[0]
    assert "200 scenes, 800 runs of a strategy" in out
    assert "outside the region" in out


@pytest.mark.parametrize("word", ["check", "run"])
def test_particles_beyond_memory_are_a_mistake_in_the_study(command, tmp_path, word):
    """A thousand million of four states, two measured: 15 numbers of 8 bytes each."""
    if machine_memory() > 1.2e11:
        pytest.skip("they fit into this machine")
    path = tmp_path / "cloud.toml"
    table = '[strategies.cloud]\nkind = "particle-filter"\nparticles = 1_000_000_000\n\n'
    path.write_text(SMOKE.read_text().replace("[strategies.", table + "[strategies.", 1))
    code, _, messages = command(word, path)
    assert code == 2
    assert "strategies.cloud.particles = 1000000000: needs 120 GB of memory" in messages
    assert "take at most" in messages


def test_check_prints_the_schema(command):
    code, out, _ = command("check", "--schema")
    assert code == 0
    assert out.startswith("{")
    assert "https://json-schema.org/draft/2020-12/schema" in out


def test_a_wrong_study_is_told_in_one_line_a_mistake_with_exit_code_2(command, tmp_path):
    wrong = tmp_path / "wrong.toml"
    wrong.write_text(
        SMOKE.read_text()
        .replace("detection_probability = 0.8", "detection_probability = 1.7")
        .replace("noise_sd_m", "noise_sd_km")
    )
    for verb in ("check", "run"):
        code, out, err = command(verb, wrong)
        assert code == 2
        assert out == ""
        assert "Traceback" not in err
        lines = err.strip().splitlines()
        assert any(
            "detection_probability = 1.7" in line and "wrong.toml:" in line for line in lines
        )
        assert any("noise_sd_m" in line for line in lines)
    assert not (tmp_path / "results").exists()


def test_a_wrong_option_is_told_with_exit_code_2(command):
    assert command("run", SMOKE, "--workers", "none")[0] == 2
    assert command("fly")[0] == 2
    assert command("check")[0] == 2


def test_summary_has_the_columns_of_the_contract_after_the_swept_keys(results):
    columns = list(pd.read_csv(results / "summary.csv").columns)
    assert columns[0] == "scene.sensor.clutter_density_per_m2"
    assert columns[1:5] == ["strategy", "trials", "lost", "failed"]
    assert set(columns) >= CONTRACT


def test_parts_of_gospa_add_up_to_its_power(results):
    summary = pd.read_csv(results / "summary.csv")
    parts = summary[["gospa_localisation", "gospa_missed", "gospa_false"]].sum(axis=1)
    pd.testing.assert_series_equal(parts, summary["gospa"] ** 2, check_names=False)


def test_run_ends_with_a_table_and_the_paths_of_what_it_wrote(command, tmp_path):
    code, out, err = command("run", SMOKE, "--workers", 1, "--no-figures")
    assert code == 0
    assert "mixture" in out
    assert "results/smoke/summary.csv" in out
    assert "200 of 200 trials" in err
    code, _, err = command("run", SMOKE, "--workers", 1, "--no-figures")
    assert code == 0
    assert "nothing to run" in err


def test_the_number_of_workers_changes_no_bit(finished, tmp_path):
    study = trackassay.load_study(SMOKE).with_changes({"trials": 30})
    two = trackassay.run_study(study, into=tmp_path / "two", workers=2)
    one = trackassay.find_results(finished / "results" / "smoke")
    pd.testing.assert_frame_equal(
        without_cost(one), without_cost(two.results), check_exact=True, check_dtype=False
    )


def test_more_trials_run_only_what_is_missing(finished, tmp_path):
    store = shutil.copytree(finished / "results" / ".store", tmp_path / "store")
    study = trackassay.load_study(SMOKE).with_changes({"trials": 130})
    asked = []
    trackassay.run_study(study, into=tmp_path / "more", store=store, workers=1, watch=asked.append)
    assert asked[0].total == 2 * 130  # a span cut short is done again
    asked.clear()
    study = study.with_changes({"trials": 200})
    trackassay.run_study(study, into=tmp_path / "more", store=store, workers=1, watch=asked.append)
    assert asked[0].total == 2 * 100


def test_a_folder_that_is_not_ours_is_left_alone(command, tmp_path):
    (tmp_path / "mine").mkdir()
    (tmp_path / "mine" / "thesis.txt").write_text("years of work")
    code, _, err = command("run", SMOKE, "--into", "mine")
    assert code == 2
    assert "mine" in err
    assert "--into" in err
    assert [entry.name for entry in (tmp_path / "mine").iterdir()] == ["thesis.txt"]


def test_a_folder_that_cannot_be_written_is_told_before_anything_runs(command, tmp_path):
    (tmp_path / "file").write_text("")
    code, _, err = command("run", SMOKE, "--into", "file/inside")
    assert code == 2
    assert "can't be written" in err


def test_results_of_another_study_are_not_overwritten(command, results):
    other = results.parent / "other.toml"
    other.write_text(SMOKE.read_text())
    code, _, err = command("run", other, "--into", results, "--no-figures")
    assert code == 2
    assert "holds the results of the study 'smoke'" in err


@pytest.mark.parametrize(
    "content", ["{}", "[]", '{"format": "trackassay results 1", "study": 3, "files": []}', "\xff"]
)
def test_a_damaged_manifest_is_told_and_running_again_restores_it(content, command, results):
    (results / "manifest.json").write_text(content, encoding="latin-1")
    code, _, err = command("show", results)
    assert code == 2
    assert "manifest.json" in err
    study = results.parent / "smoke.toml"
    study.write_text(SMOKE.read_text().replace("trials = 100", "trials = 10"))
    assert command("run", study, "--into", results, "--workers", 1, "--no-figures")[0] == 0
    assert command("show", results)[0] == 0


@pytest.mark.parametrize("name", ["summary.csv", "scans.parquet", "manifest.json"])
def test_damaged_results_are_named_not_misread(name, results, command):
    path = results / name
    path.write_bytes(path.read_bytes()[:-40])
    code, out, err = command("show", results)
    assert code == 2
    assert out == ""
    assert name in err
    assert "run the study again" in err


def test_missing_results_are_told(command, tmp_path):
    assert command("show", tmp_path / "nowhere")[0] == 2
    code, _, err = command("show", SMOKE)
    assert code == 2
    assert "run the study first" in err


def test_show_offers_the_nearest_metric_and_key(results, command):
    code, _, err = command("show", results, "--metric", "rmse_positon")
    assert code == 2
    assert "rmse_position" in err
    code, _, err = command("show", results, "--rows", "scene.sensor.clutter")
    assert code == 2
    assert "clutter_density_per_m2" in err
    code, _, err = command("show", results, "--as", "word")
    assert code == 2
    assert "markdown" in err


def test_figures_are_not_drawn_against_strategies(results, command):
    code, _, err = command("draw", results, "--against", "strategy")
    assert code == 2
    assert "swept key" in err


def test_figures_into_a_file_are_wrong_input(results, command, tmp_path):
    (tmp_path / "file").write_text("")
    code, _, err = command("draw", results, "--into", "file")
    assert code == 2
    assert "can't be a folder" in err


def test_results_of_a_study_changed_since_are_said_to_be_old(command, tmp_path):
    study = tmp_path / "mine.toml"
    text = SMOKE.read_text().replace("trials = 100", "trials = 10")
    study.write_text(text)
    assert command("run", study, "--workers", 1, "--no-figures")[0] == 0
    assert "has changed since" not in command("show", study)[1]
    study.write_text(text.replace("trials = 10", "trials = 20"))
    assert "has changed since" in command("show", study)[1]


@pytest.mark.parametrize("form", ["terminal", "csv", "markdown", "latex"])
def test_show_writes_every_form(form, results, command):
    code, out, _ = command("show", results, "--metric", "gospa", "--as", form)
    assert code == 0
    assert "mixture" in out


@pytest.mark.skipif(sys.platform == "win32", reason="signals of POSIX systems")
@pytest.mark.parametrize(("number", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_a_stopped_run_keeps_what_it_has_and_goes_on_to_the_same_results(number, code, tmp_path):
    study = tmp_path / "long.toml"
    text = SMOKE.read_text().replace("trials = 100", "trials = 20000")
    study.write_text(text)
    run = start(tmp_path, "run", study, "--workers", 2, "--no-figures")
    store = tmp_path / "results" / ".store"
    end = time.monotonic() + 90
    while not list(store.glob("segment-*")) and time.monotonic() < end:
        time.sleep(0.05)
    run.send_signal(number)
    _, err = run.communicate(timeout=30)
    assert run.returncode == code, err
    assert "goes on from there" in err
    assert not (tmp_path / "results" / "long" / "summary.csv").exists()
    assert not list(store.glob(".*")), "a half-written segment"

    short = trackassay.load_study(study).with_changes({"trials": 400})
    went_on = trackassay.run_study(short, into=tmp_path / "a", store=store, workers=1)
    fresh = trackassay.run_study(short, into=tmp_path / "b", store=tmp_path / "s", workers=1)
    pd.testing.assert_frame_equal(
        without_cost(went_on.results), without_cost(fresh.results), check_exact=True
    )


def test_a_file_that_shadows_a_package_is_named(tmp_path):
    (tmp_path / "filters.py").write_text("")
    run = start(tmp_path, "--help")
    _, err = run.communicate(timeout=30)
    assert run.returncode == 2
    assert str(tmp_path / "filters.py") in err
    assert "Traceback" not in err


def test_a_fault_of_ours_has_its_own_exit_code(command, monkeypatch):
    def broken(*arguments, **named):
        raise ZeroDivisionError("a fault")

    monkeypatch.setattr("harness.api.check_study", broken)
    code, _, err = command("check", SMOKE)
    assert code == 5
    assert "fault of the tool itself" in err


def test_a_full_disk_breaks_off_with_exit_code_4(command, monkeypatch):
    def full(*arguments):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("harness.api.write_results", full)
    code, _, err = command("run", SMOKE, "--workers", 1, "--no-figures")
    assert code == 4
    assert "No space left on device" in err
