from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path

import cloudpickle
import pytest

from filters.strategies import NearestNeighbour
from harness.trials.driver import TRIES, Progress, drive
from harness.trials.store import locked_store
from harness.trials.task import TaskCase, run_task
from harness.trials.workers import LocalProcesses, ThisProcess

cloudpickle.register_pickle_by_value(sys.modules[__name__])


class RaisesAlways(NearestNeighbour):
    """A strategy with a fault."""

    def run(self, assumptions, scans, numbers, first_trial):
        raise RuntimeError("a fault of the strategy")


class KillsItsWorker(NearestNeighbour):
    """A strategy that takes its whole process down."""

    def run(self, assumptions, scans, numbers, first_trial):
        os.kill(os.getpid(), signal.SIGKILL)


class OneRound:
    """A plan of given tasks."""

    def __init__(self, tasks):
        self.tasks = tasks

    def next_tasks(self, settled):
        return [
            task
            for task in self.tasks
            if not all(settled(case.key, span) for case in task.cases for span in task.spans)
        ]


def with_fault(task, kind, key):
    fault = TaskCase(key, kind(kind="nearest-neighbour"), task.scene)
    return replace(task, cases=(fault,), label=key)


def single_span_tasks(task):
    return [replace(task, spans=(span,)) for span in task.spans]


def test_a_failing_task_is_tried_three_times_then_set_aside_and_the_rest_finishes(
    make_task, tmp_path
):
    good = make_task(300, ["pda"])
    bad = with_fault(make_task(100), RaisesAlways, "faulty")
    calls = []

    class Counting(ThisProcess):
        def run(self, tasks):
            calls.extend(task.label for task in tasks)
            return super().run(tasks)

    with locked_store(tmp_path) as store:
        aside = drive(OneRound([bad, good]), store, Counting(), lambda progress: None)
        assert all(("pda", span) in store for span in good.spans)
    assert [one.task.label for one in aside] == ["faulty"]
    assert aside[0].failure.error == "RuntimeError: a fault of the strategy"
    assert calls.count("faulty") == TRIES
    assert calls.count("test") == 1


def test_a_task_that_kills_its_worker_is_set_aside_and_takes_no_other_with_it(make_task, tmp_path):
    good = single_span_tasks(make_task(800, ["pda"]))
    bad = with_fault(make_task(100), KillsItsWorker, "deadly")
    with locked_store(tmp_path) as store:
        aside = drive(OneRound([bad, *good]), store, LocalProcesses(2), lambda progress: None)
        assert all(("pda", task.spans[0]) in store for task in good)
    assert [one.task.label for one in aside] == ["deadly"]
    assert "died" in aside[0].failure.error


def test_two_processes_give_the_bits_of_one(make_task, tmp_path):
    tasks = single_span_tasks(make_task(400))
    found = []
    for name, workers in (("one", ThisProcess()), ("two", LocalProcesses(2))):
        with locked_store(tmp_path / name) as store:
            assert drive(OneRound(tasks), store, workers, lambda progress: None) == []
            spans = [task.spans[0] for task in tasks]
            found.append(store.read(dict.fromkeys(("nearest", "pda", "known"), spans)))
    for key, results in found[0].items():
        for ours, theirs in zip(results, found[1][key], strict=True):
            assert ours.scores.position_square.tobytes() == theirs.scores.position_square.tobytes()
            assert ours.scores.scan_nees.tobytes() == theirs.scores.scan_nees.tobytes()


def test_an_interrupted_run_keeps_what_was_finished(make_task, tmp_path):
    tasks = single_span_tasks(make_task(500, ["pda"]))

    def interrupt(progress):
        if progress.done >= 200:
            raise KeyboardInterrupt

    with locked_store(tmp_path) as store, pytest.raises(KeyboardInterrupt):
        drive(OneRound(tasks), store, ThisProcess(), interrupt)
    with locked_store(tmp_path) as store:
        kept = [("pda", task.spans[0]) in store for task in tasks]
        assert kept == [True, True, False, False, False]
        drive(OneRound(tasks), store, ThisProcess(), lambda progress: None)
        again = store.read({"pda": [task.spans[0] for task in tasks]})["pda"]
    for stored, task in zip(again, tasks, strict=True):
        (fresh,) = run_task(task)
        assert stored.scores.nees.tobytes() == fresh.scores.nees.tobytes()


def test_progress_tells_rate_and_time_left():
    progress = Progress(done=200, total=1000, seconds=4.0)
    assert progress.rate == 50
    assert progress.seconds_left == 16
    assert Progress(0, 10, 0.0).seconds_left is None


@pytest.mark.skipif(sys.platform == "win32", reason="signals of POSIX systems")
def test_no_worker_outlives_a_killed_parent(tmp_path):
    """The parent is killed with SIGKILL while its workers sleep; they must end by themselves."""
    script = tmp_path / "parent.py"
    script.write_text(
        "import os, sys, time\n"
        "from joblib import Parallel, delayed\n"
        "from harness.trials import workers\n"
        "def work(parent, folder):\n"
        "    open(os.path.join(folder, str(os.getpid())), 'w').close()\n"
        "    workers.end_with_parent(parent)\n"
        "    time.sleep(60)\n"
        "Parallel(n_jobs=2)(delayed(work)(os.getpid(), sys.argv[1]) for _ in range(2))\n"
    )
    pids = tmp_path / "pids"
    pids.mkdir()
    root = str(Path(__file__).parents[3])
    parent = subprocess.Popen(
        [sys.executable, str(script), str(pids)], env={**os.environ, "PYTHONPATH": root}
    )
    workers = wait_for(
        lambda: [int(p.name) for p in pids.iterdir()] if len(list(pids.iterdir())) == 2 else None,
        30,
    )
    parent.kill()
    parent.wait()
    assert wait_for(lambda: not any(is_running(pid) for pid in workers), 10)


def wait_for(condition, seconds):
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        if found := condition():
            return found
        time.sleep(0.1)
    return None


def is_running(pid):
    try:
        os.kill(pid, 0)
        with open(f"/proc/{pid}/stat") as stat:
            return stat.read().rsplit(")", 1)[1].split()[0] != "Z"
    except (ProcessLookupError, FileNotFoundError):
        return False
