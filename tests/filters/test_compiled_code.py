"""How compiled code is cached, fails, and does without compiling."""

import os
import shutil
import subprocess
import sys
import textwrap
from pathlib import Path

import numpy as np
import pytest
from small_worlds import as_scans, constant_velocity_world, pda, run_on

from filters import compiled
from filters.compiled import (
    CompiledCodeError,
    WholeSourceLocator,
    model_function,
    raising_what_compiled_code_raised,
    source_digest,
)
from filters.models.contract import SCALAR_OF

ROOT = Path(compiled.__file__).resolve().parent.parent


@model_function(SCALAR_OF)
def refuses_positive_places(parameters, site, measurement):
    if measurement[0] > 0.0:
        raise ValueError("no clutter is known there")
    return parameters[0]


def refusing_world():
    world = constant_velocity_world(clutter=0.1)
    models = world.assumptions.models
    clutter = models.clutter._replace(intensity=refuses_positive_places.compiled)
    models = models._replace(clutter=clutter)
    return world._replace(assumptions=world.assumptions._replace(models=models))


def test_an_exception_in_a_model_function_is_raised_at_the_end_of_the_block():
    before = sys.unraisablehook
    with (
        pytest.raises(CompiledCodeError, match="a model function raised ValueError") as caught,
        raising_what_compiled_code_raised(),
    ):
        run_on(refusing_world(), pda(), as_scans([[[[0.5]]]], 1))
    assert isinstance(caught.value.__cause__, ValueError)
    assert "no clutter is known there" in str(caught.value)
    assert sys.unraisablehook is before


def test_a_block_in_which_nothing_was_raised_is_left_alone():
    before = sys.unraisablehook
    with raising_what_compiled_code_raised():
        tracks = run_on(refusing_world(), pda(), as_scans([[[[-0.5]]]], 1))
    expected = run_on(constant_velocity_world(clutter=0.1), pda(), as_scans([[[[-0.5]]]], 1))
    np.testing.assert_array_equal(tracks.means, expected.means)
    assert sys.unraisablehook is before


def test_an_exception_of_plain_python_passes_through_the_block():
    before = sys.unraisablehook
    with pytest.raises(KeyError), raising_what_compiled_code_raised():
        raise KeyError("from Python")
    assert sys.unraisablehook is before


def test_a_model_function_called_from_python_is_the_plain_function():
    with pytest.raises(ValueError, match="no clutter is known there"):
        refuses_positive_places(np.array([0.1]), np.zeros(2), np.array([1.0]))
    assert refuses_positive_places(np.array([0.1]), np.zeros(2), np.array([-1.0])) == 0.1
    assert refuses_positive_places.__name__ == "refuses_positive_places"


@pytest.fixture
def copied_sources(tmp_path, monkeypatch):
    """A copy of the sources in place of the project's own, for the digest of them."""
    for folder in ("filters", "harness/scene"):
        shutil.copytree(
            ROOT / folder, tmp_path / folder, ignore=shutil.ignore_patterns("__pycache__")
        )
    monkeypatch.setattr(compiled, "_SOURCES", tmp_path)
    source_digest.cache_clear()
    yield tmp_path
    source_digest.cache_clear()


def test_the_stamp_changes_with_any_source_that_can_reach_a_kernel(copied_sources):
    def stamp():
        source_digest.cache_clear()
        return WholeSourceLocator(stamp, __file__).get_source_stamp()

    before = stamp()
    assert before == stamp()
    sources = sorted(copied_sources.rglob("*.py"))
    assert len(sources) > 30
    for path in sources:
        text = path.read_text()
        path.write_text(text + "\n# changed\n")
        assert stamp() != before, path
        path.write_text(text)
    assert stamp() == before
    (copied_sources / "filters" / "another.py").write_text("")
    assert stamp() != before


def run_script(script, folder, **environment):
    """Run Python text in a process of its own, from a folder that holds `filters`."""
    keep = {key: value for key, value in os.environ.items() if not key.startswith("NUMBA")}
    return subprocess.run(
        [sys.executable, "-W", "error", "-c", textwrap.dedent(script)],
        cwd=folder,
        env=keep | {"PYTHONPATH": str(folder)} | environment,
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )


PROBE = """
    import probe
    print(probe.doubled(21.0), sum(probe.doubled.stats.cache_hits.values()))
"""


def test_a_changed_helper_in_another_file_is_compiled_anew(tmp_path):
    """Numba's own stamp would go on with the old machine code."""
    shutil.copytree(
        ROOT / "filters", tmp_path / "filters", ignore=shutil.ignore_patterns("__pycache__")
    )
    (tmp_path / "probe.py").write_text(
        "from filters.compiled import kernel\n"
        "from filters.factor import times\n\n"
        "@kernel\n"
        "def doubled(x):\n"
        "    return times(x)\n"
    )
    factor = tmp_path / "filters" / "factor.py"
    text = "from filters.compiled import helper\n\n@helper\ndef times(x):\n    return 2.0 * x\n"
    cache = {"NUMBA_CACHE_DIR": str(tmp_path / "cache")}
    factor.write_text(text)
    first, again = (run_script(PROBE, tmp_path, **cache).stdout.split() for _ in range(2))
    assert (first, again) == (["42.0", "0"], ["42.0", "1"])
    factor.write_text(text.replace("2.0", "3.0"))
    assert run_script(PROBE, tmp_path, **cache).stdout.split() == ["63.0", "0"]


def test_without_a_place_to_cache_kernels_and_model_functions_still_compile(tmp_path):
    """A path below a regular file can't be written, not even by root."""
    blocked = tmp_path / "file"
    blocked.write_text("")
    (tmp_path / "filters").symlink_to(ROOT / "filters")
    (tmp_path / "probe.py").write_text(
        "from filters.compiled import kernel\n"
        "from filters.models.detection.constant import constant_detection\n\n"
        "@kernel\n"
        "def doubled(x):\n"
        "    return 2.0 * x\n\n"
        "constant_detection(0.5)\n"
    )
    done = run_script(PROBE, tmp_path, NUMBA_CACHE_DIR=str(blocked / "cache"))
    assert done.stdout.split() == ["42.0", "0"], done.stderr


EVERY_STRATEGY = """
    import sys
    sys.path.append(sys.argv[1] if len(sys.argv) > 1 else SUPPORT)
    import numpy as np
    from filters.compiled import COMPILING
    from small_worlds import *

    world = constant_velocity_world(1)
    drawn = draw_scenes_of(world, np.random.default_rng(1), 2, 4, clutter_half_width=30.0)
    scans = as_scans(drawn.trials, 1)
    strategies = [nearest_neighbour(), most_probable_hypothesis(), pda(), gaussian_mixture()]
    strategies += [pruned_mixture(), n_scan_mixture(scans_back=1)]
    strategies.append(runnalls_mixture(max_components=3, merge_among=6))
    strategies.append(particle_filter(particles=30, ends={"empty_scans": 3}))
    settings = {"proposal": "detections", "resampling": "stratified", "roughening": 0.1}
    strategies.append(particle_filter(particles=30, ends={"empty_scans": 3}, **settings))
    strategies.append(rao_blackwellised(particles=12))
    two_point = {"kind": "two-point", "fastest_m_per_s": 3.0}
    strategies += [pda(start=two_point), rao_blackwellised(particles=12, start=two_point)]
    one_point = {"kind": "one-point", "velocity_sd_m_per_s": 1.0}
    strategies.append(particle_filter(particles=30, start=one_point))
    found = [run_on(world, strategy, scans) for strategy in strategies]
    told = scans._replace(origins=drawn.origins.astype(np.int64))
    found.append(run_on(world, known_association(), told))
    np.savez(
        OUT,
        compiling=COMPILING,
        means=[tracks.means for tracks in found],
        covariances=[tracks.covariances for tracks in found],
        hypotheses=[tracks.hypotheses for tracks in found],
    )
"""


def test_plain_python_gives_the_same_tracks_as_compiled_code(tmp_path):
    """NUMBA_DISABLE_JIT=1, for debugging and coverage; warnings are errors there too."""
    results = []
    for switch in ("0", "1"):
        out = tmp_path / f"tracks{switch}.npz"
        names = f"SUPPORT, OUT = {str(Path(__file__).parent / 'support')!r}, {str(out)!r}\n"
        done = run_script(names + textwrap.dedent(EVERY_STRATEGY), ROOT, NUMBA_DISABLE_JIT=switch)
        assert done.returncode == 0, done.stderr
        results.append(np.load(out))
    compiled_run, plain_run = results
    assert compiled_run["compiling"]
    assert not plain_run["compiling"]
    np.testing.assert_array_equal(plain_run["hypotheses"], compiled_run["hypotheses"])
    for name in ("means", "covariances"):
        np.testing.assert_allclose(plain_run[name], compiled_run[name], rtol=1e-11, atol=1e-12)
