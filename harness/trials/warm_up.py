"""Compile what a study needs: once and in the parent, before workers look for it in the cache.

A worker does the same before its first task, so that loading is not taken for a strategy's cost.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from dataclasses import replace

from harness.study.schema import Scene
from harness.trials.task import Span, Task, TaskCase, run_task

_PATIENCE_S = 1.0
_warm: set[tuple[object, ...]] = set()  # combinations that this process has run


def warm_up(tasks: Iterable[Task], tell: Callable[[], None] = lambda: None) -> None:
    """Run a first trial of two scans for every combination of models and strategies.

    tell    see telling_if_slow
    """
    with telling_if_slow(tell):
        for task in tasks:
            for case in task.cases:
                combination = (
                    type(case.strategy),
                    *case.strategy.kernel_choice(),
                    type(case.strategy.start),
                    *_models(task.scene),
                    *_models(case.assumed),
                )
                if combination not in _warm:
                    _warm.add(combination)
                    run_task(_shortest(task, case))


def _models(scene: Scene) -> tuple[object, ...]:
    sensor = scene.sensor
    parts = (scene.target, sensor, sensor.detection, sensor.clutter)
    own_code = sensor.code_digest()
    return scene.target.axes, scene.legs is None, own_code, *map(type, parts)


def _shortest(task: Task, case: TaskCase) -> Task:
    short_case = replace(case, assumed=case.assumed.with_first_scans(2))
    reference = task.gap_reference
    if reference is not None:
        reference = replace(reference, assumed=reference.assumed.with_first_scans(2))
    return replace(
        task,
        scene=task.scene.with_first_scans(2),
        rules=replace(task.rules, first_scan=0),
        cases=(short_case,),
        gap_reference=reference,
        spans=(Span(0, 1),),
    )


@contextmanager
def telling_if_slow(tell: Callable[[], None]) -> Iterator[None]:
    """Call `tell` once if the block takes longer than loading compiled code would."""
    timer = threading.Timer(_PATIENCE_S, tell)
    timer.daemon = True
    timer.start()
    try:
        yield
    finally:
        timer.cancel()
