"""Rows of what surrounds the kernels: whole trials, and a second worker."""

import tempfile
from pathlib import Path

from scenes import SCANS, SCENE
from timing import Record, interleaved

from filters.random_numbers import numbers_of
from filters.strategies.strategy import Strategy
from harness.scene.simulate import draw_scenes
from harness.study.schema import Gospa, TrackLoss
from harness.trials.score import ScoringRules
from harness.trials.store import locked_store
from harness.trials.task import Span, Task, TaskCase, assumptions_of, run_task
from harness.trials.workers import LocalProcesses, ThisProcess, Workers

SPANS = 10
TASKS = 8
SEED = 4107
RULES = ScoringRules(
    TrackLoss(error_above_m=80.0, for_scans=5), Gospa(cutoff_m=80.0, order=2), first_scan=10
)


def task_of(strategies: tuple[Strategy, ...], first: int = 0) -> Task:
    """Some spans of the benchmark's scene for the strategies."""
    cases = tuple(TaskCase(one.kind, one, SCENE) for one in strategies)
    spans = tuple(Span(first + i, 100) for i in range(SPANS))
    return Task(SCENE, RULES, cases, spans, SEED, "benchmark")


def whole_trial_row(strategies: tuple[Strategy, ...]) -> Record:
    """Scenes, strategies, metrics and storage, against the strategies on scenes drawn before."""
    task = task_of(strategies)
    numbers = numbers_of(SEED)
    batches = [draw_scenes(SCENE, numbers, 500 * half, 500) for half in range(2)]

    assumptions = assumptions_of(SCENE, SCENE, batches[0], numbers)

    def kernels() -> None:
        for batch in batches:
            told, untold = batch.scans, batch.scans_without_origins
            for strategy in strategies:
                scans = told if strategy.is_told_origins else untold
                strategy.run(assumptions, scans, numbers, batch.first_trial)

    def whole() -> None:
        with tempfile.TemporaryDirectory() as folder, locked_store(Path(folder)) as store:
            store.add(run_task(task))
            store.flush()

    ours, alone = interleaved(whole, kernels, repeats=7)
    trials = 100 * SPANS
    return Record(
        f"whole trial of {SCANS} scans",
        ours.best / trials * 1e6,
        "its strategies alone",
        alone.best / ours.best,
        1 / 1.8,
        max(ours.worst / ours.best, alone.worst / alone.best),
    )


def two_workers_row(strategies: tuple[Strategy, ...]) -> Record:
    """Two processes against one, on the same tasks."""
    tasks = [task_of(strategies, first=i * SPANS) for i in range(TASKS)]

    def run(workers: Workers) -> None:
        done = [outcome for outcome in workers.run(tasks) if isinstance(outcome[1], list)]
        if len(done) != TASKS:
            raise RuntimeError(f"{TASKS - len(done)} of {TASKS} tasks failed")

    two, one = interleaved(lambda: run(LocalProcesses(2)), lambda: run(ThisProcess()), repeats=3)
    trials = 100 * SPANS * TASKS
    return Record(
        "whole trial, two workers",
        two.best / trials * 1e6,
        "one worker",
        one.best / two.best,
        1.8,
        max(two.worst / two.best, one.worst / one.best),
    )
