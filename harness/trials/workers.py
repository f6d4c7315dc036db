"""Workers on this machine: processes that run tasks and give back results as they come."""

from __future__ import annotations

import os
import threading
import time
from collections.abc import Iterator, Sequence
from typing import Protocol

from joblib import Parallel, cpu_count, delayed
from joblib.externals.loky.process_executor import TerminatedWorkerError
from threadpoolctl import threadpool_limits

from harness.trials.task import SpanResult, Task, TaskFailure, run_task, run_task_safely
from harness.trials.warm_up import warm_up

Outcome = tuple[int, list[SpanResult] | TaskFailure]


class Workers(Protocol):
    """Where tasks run."""

    @property
    def in_flight(self) -> int:
        """Most tasks that are under way at any time."""

    def run(self, tasks: Sequence[Task]) -> Iterator[Outcome]:
        """Run tasks in any order; yield (index, outcome) as each is done.

        Tasks lost with a worker are not yielded; the driver asks for them again.
        """

    def describe(self) -> str:
        """Words for people, as "2 processes"."""


class ThisProcess:
    """Runs tasks one after the other, in the calling process."""

    in_flight = 1

    def run(self, tasks: Sequence[Task]) -> Iterator[Outcome]:
        """Run tasks in order."""
        for index, task in enumerate(tasks):
            with threadpool_limits(1):
                outcome = run_task_safely(task)
            yield index, outcome

    def describe(self) -> str:
        """Words for people."""
        return "1 process"


class LocalProcesses:
    """Runs tasks in several processes, which end with their parent however it ends."""

    def __init__(self, count: int) -> None:
        self.count = count

    @property
    def in_flight(self) -> int:
        """Running, and handed out ahead; one alone where workers were lost."""
        return 2 * self.count if self.count > 1 else 1

    def run(self, tasks: Sequence[Task]) -> Iterator[Outcome]:
        """Run tasks as processes come free; stop early where a worker was lost."""
        parent = os.getpid()
        jobs = (delayed(_run_in_worker)(index, task, parent) for index, task in enumerate(tasks))
        parallel = Parallel(
            n_jobs=max(2, self.count),  # joblib takes 1 to mean this very process
            return_as="generator_unordered",
            batch_size=1,
            pre_dispatch=self.in_flight,
        )
        try:
            yield from parallel(jobs)
        except TerminatedWorkerError:
            self.count = max(1, self.count - 1)  # memory may have run out: be more modest

    def describe(self) -> str:
        """Words for people."""
        return f"{self.count} processes"


def local_workers(count: int | None) -> Workers:
    """Workers on this machine; by default one a core that this process may use."""
    count = cpu_count() if count is None else count
    return ThisProcess() if count == 1 else LocalProcesses(count)


_watching = threading.Event()


def _run_in_worker(index: int, task: Task, parent: int) -> Outcome:
    end_with_parent(parent)
    return index, run_task_safely(task, _run_warm)


def _run_warm(task: Task) -> list[SpanResult]:
    warm_up([task])
    return run_task(task)


def end_with_parent(parent: int) -> None:
    """Have this process end once its parent is gone, by kill -9 too; kernels release the GIL."""
    if not _watching.is_set():
        _watching.set()
        threading.Thread(target=_wait_for_the_end, args=(parent,), daemon=True).start()


def _wait_for_the_end(parent: int) -> None:
    while os.getppid() == parent:
        time.sleep(0.5)
    os._exit(1)
