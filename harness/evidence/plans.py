"""Plans: which trials to run. A fixed number for every condition."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

from harness.study.expand import Case, Condition
from harness.study.study import Study
from harness.trials.driver import Settled
from harness.trials.keys import case_key, rules_key, scene_key
from harness.trials.score import ScoringRules
from harness.trials.task import Span, Task, TaskCase, spans_of

# Enough tasks a worker that the last ones end together, few enough that sending them costs nothing.
_TASKS_PER_WORKER = 8
_MOST_SPANS_PER_TASK = 20


@dataclass(frozen=True)
class KeyedCondition:
    """A condition with the keys of its results, one a case."""

    condition: Condition
    rules: ScoringRules
    cases: tuple[TaskCase, ...]
    gap_reference: TaskCase | None = None

    @property
    def label(self) -> str:
        """The condition in words, for messages."""
        settings = [f"{key} = {value}" for key, value in self.condition.settings.items()]
        return ", ".join(settings) or "the only condition"


def keyed_conditions(study: Study) -> list[KeyedCondition]:
    """Conditions of a study with the keys that their results have now."""
    keyed = []
    for condition in study.conditions:
        rules = condition.rules
        scoring = ScoringRules(
            rules.track_loss,
            rules.gospa,
            rules.first_scored_scan(),
            rules.calibration,
            rules.posterior_gap,
        )
        scenes = scene_key(rules.scene, study.seed)
        reference = _gap_reference(condition)
        alone = None if reference is None else case_key(scenes, reference, "")
        scored = rules_key(scoring, alone)
        cases = tuple(
            TaskCase(case_key(scenes, case, scored), case.strategy, case.assumed)
            for case in condition.cases
        )
        places = {case.name: place for place, case in enumerate(condition.cases)}
        compared = None if reference is None else cases[places[reference.name]]
        keyed.append(KeyedCondition(condition, scoring, cases, compared))
    return keyed


def _gap_reference(condition: Condition) -> Case | None:
    gap = condition.rules.posterior_gap
    if gap is None:
        return None
    return next(case for case in condition.cases if case.name == gap.reference)


class Part(NamedTuple):
    """One of several shares of a study's trials, for machines that work apart."""

    number: int  # from 1
    of: int

    def holds(self, place: int) -> bool:
        """Whether a span, by its place among all, belongs to it."""
        return place % self.of == self.number - 1


WHOLE = Part(1, 1)


@dataclass(frozen=True)
class FixedCount:
    """The same number of trials for every condition."""

    conditions: Sequence[KeyedCondition]
    seed: int
    trials: int
    workers: int
    part: Part = WHOLE

    def next_tasks(self, settled: Settled) -> list[Task]:
        """All that is missing, in one round."""
        missing: list[tuple[KeyedCondition, tuple[TaskCase, ...], list[Span]]] = []
        claimed: set[tuple[str, Span]] = set()  # conditions may share a case
        every_span = spans_of(self.trials)
        for number, condition in enumerate(self.conditions):
            groups: dict[tuple[str, ...], tuple[tuple[TaskCase, ...], list[Span]]] = {}
            for place, span in enumerate(every_span, number * len(every_span)):
                if not self.part.holds(place):
                    continue
                cases = tuple(
                    case
                    for case in condition.cases
                    if not settled(case.key, span) and (case.key, span) not in claimed
                )
                claimed |= {(case.key, span) for case in cases}
                if cases:
                    group = groups.setdefault(tuple(case.key for case in cases), (cases, []))
                    group[1].append(span)
            missing += [(condition, cases, spans) for cases, spans in groups.values()]
        spans_in_all = sum(len(spans) for _, _, spans in missing)
        length = math.ceil(spans_in_all / (_TASKS_PER_WORKER * self.workers))
        length = max(1, min(length, _MOST_SPANS_PER_TASK))
        return [
            Task(
                condition.condition.rules.scene,
                condition.rules,
                cases,
                tuple(spans[start : start + length]),
                self.seed,
                condition.label,
                condition.gap_reference,
            )
            for condition, cases, spans in missing
            for start in range(0, len(spans), length)
        ]
