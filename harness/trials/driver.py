"""The driver: asks a plan which tasks come next, has them run, and stores what they give."""

from __future__ import annotations

import time
from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

from harness.trials.store import Store
from harness.trials.task import Span, Task, TaskFailure
from harness.trials.workers import Workers

TRIES = 3


Settled = Callable[[str, Span], bool]


class Plan(Protocol):
    """Decides which tasks come next."""

    def next_tasks(self, settled: Settled) -> list[Task]:
        """Tasks of the next round; none when the plan is done.

        settled     whether a case's span is there already, or was given up
        """


@dataclass(frozen=True)
class Progress:
    """How far a run is."""

    done: int  # trials of this round
    total: int
    seconds: float  # since the round began

    @property
    def rate(self) -> float:
        """Trials a second; 0 before the first."""
        return self.done / self.seconds if self.seconds > 0 else 0.0

    @property
    def seconds_left(self) -> float | None:
        """Time left at this rate; None before the first results."""
        return (self.total - self.done) / self.rate if self.done else None


@dataclass(frozen=True)
class SetAside:
    """A task that failed as often as it was tried."""

    task: Task
    failure: TaskFailure


Watcher = Callable[[Progress], None]
_LOST = TaskFailure("the worker process died", "")


def drive(plan: Plan, store: Store, workers: Workers, watch: Watcher) -> list[SetAside]:
    """Run a plan to its end; results reach the store as they come, also when interrupted.

    A task that fails is tried twice more, then set aside; the rest goes on.

    returns     the tasks set aside
    """
    aside: list[SetAside] = []
    given_up: set[tuple[str, Span]] = set()

    def settled(key: str, span: Span) -> bool:
        return (key, span) in store or (key, span) in given_up

    try:
        while tasks := plan.next_tasks(settled):
            for one in _run_round(tasks, store, workers, watch):
                aside.append(one)
                given_up |= {(case.key, span) for case in one.task.cases for span in one.task.spans}
    finally:
        store.flush()
    return aside


def _run_round(
    tasks: Sequence[Task], store: Store, workers: Workers, watch: Watcher
) -> list[SetAside]:
    """Run tasks until each is stored or has failed three times; the third time it runs alone."""
    started = time.monotonic()
    total = sum(task.trials for task in tasks)
    done = 0
    aside: list[SetAside] = []
    tries: Counter[int] = Counter()
    waiting = list(range(len(tasks)))
    watch(Progress(0, total, 0.0))
    while waiting:
        group = [i for i in waiting if tries[i] < TRIES - 1] or waiting[:1]
        failures: dict[int, TaskFailure] = {}
        unheard = dict.fromkeys(group)
        for place, outcome in workers.run([tasks[i] for i in group]):
            i = group[place]
            del unheard[i]
            if isinstance(outcome, TaskFailure):
                failures[i] = outcome
                continue
            store.add(outcome)
            waiting.remove(i)
            done += tasks[i].trials
            watch(Progress(done, total, time.monotonic() - started))
        # With a worker its tasks are lost and those behind them; only the first may be to blame.
        failures |= dict.fromkeys(list(unheard)[: workers.in_flight], _LOST)
        for i, failure in failures.items():
            tries[i] += 1
            waiting.remove(i)
            if tries[i] == TRIES:
                aside.append(SetAside(tasks[i], failure))
            else:
                waiting.append(i)
    return aside
