"""A task: some spans of one condition's trials, for the strategies still missing there.

A pure function: scenes are drawn once for all strategies, and the same task gives the same bits on
any worker, alone or among others. Sums are formed over fixed spans of 100 trials.
"""

from __future__ import annotations

import time
import traceback
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from filters.compiled import raising_what_compiled_code_raised
from filters.posteriors import NOT_ASKED, Posteriors
from filters.random_numbers import Numbers, numbers_of
from filters.strategies.gaussian import KnownAssociation
from filters.strategies.strategy import Assumptions, Strategy
from filters.track import Tracks, tracks_of
from harness.scene.batch import SceneBatch
from harness.scene.models import models_of
from harness.scene.priors import prior_means
from harness.scene.simulate import draw_scenes
from harness.scene.truth import prior_of
from harness.study.schema import Scene
from harness.trials.posterior_values import (
    PosteriorValues,
    joined,
    posterior_values,
    reference_trials,
)
from harness.trials.score import ScoringRules, SpanScores, score_span

SPAN = 100
_SCANS_PER_BATCH = 50_000
_TRIALS_RECORDED = 10  # at once, as whole posteriors take memory


@dataclass(frozen=True)
class TaskCase:
    """One strategy of a task, what it assumes, and the key of its results."""

    key: str
    strategy: Strategy
    assumed: Scene


@dataclass(frozen=True)
class Span:
    """Consecutive trials whose sums are kept together."""

    number: int  # trials number * 100 and on
    trials: int  # 100, or fewer in the last span

    @property
    def first_trial(self) -> int:
        """Number of the first trial."""
        return self.number * SPAN


@dataclass(frozen=True)
class Task:
    """What a worker is sent."""

    scene: Scene
    rules: ScoringRules
    cases: tuple[TaskCase, ...]
    spans: tuple[Span, ...]
    seed: int
    label: str  # for people: which condition
    gap_reference: TaskCase | None = None  # whose posteriors the others are compared with

    @property
    def trials(self) -> int:
        """Number of scenes to draw."""
        return sum(span.trials for span in self.spans)


@dataclass(frozen=True)
class SpanResult:
    """One case's scores on one span."""

    key: str
    span: Span
    scores: SpanScores
    us_per_scan: float


@dataclass(frozen=True)
class TaskFailure:
    """A task that broke off, with what it said."""

    error: str
    traceback: str


def spans_of(trials: int) -> list[Span]:
    """Spans of the first so many trials."""
    starts = range(0, trials, SPAN)
    return [Span(start // SPAN, min(SPAN, trials - start)) for start in starts]


def run_task(task: Task) -> list[SpanResult]:
    """Run every case of a task on every span.

    raises      CompiledCodeError: a model function raised
    """
    numbers = numbers_of(task.seed)
    results = []
    with raising_what_compiled_code_raised():
        for spans in _batches(task):
            trials = sum(span.trials for span in spans)
            batch = draw_scenes(task.scene, numbers, spans[0].first_trial, trials)
            reference = _reference(task, batch, numbers)
            posteriors = {span: _posterior_values(task, span, numbers) for span in spans}
            for case in task.cases:
                tracks, us_per_scan = _run_case(task.scene, case, batch, numbers)
                for span in spans:
                    rows = _rows_of(span, batch)
                    scores = score_span(
                        batch.truth.rows(rows),
                        tracks_of(tracks, rows),
                        None if reference is None else tracks_of(reference, rows),
                        task.rules,
                        posteriors[span].get(case.key),
                    )
                    results.append(SpanResult(case.key, span, scores, us_per_scan))
    return results


def _posterior_values(task: Task, span: Span, numbers: Numbers) -> dict[str, PosteriorValues]:
    """What the posteriors of every case say on a span, by key; nothing where it is not asked.

    Strategies run once more for it, so that their cost is measured without the recording.
    """
    if not task.rules.need_posteriors:
        return {}
    parts: dict[str, list[PosteriorValues]] = {case.key: [] for case in task.cases}
    end = span.first_trial + span.trials
    for first in range(span.first_trial, end, _TRIALS_RECORDED):
        batch = draw_scenes(task.scene, numbers, first, min(_TRIALS_RECORDED, end - first))
        recorded = {case.key: _recorded(task.scene, case, batch, numbers) for case in task.cases}
        references = None
        if task.gap_reference is not None and task.rules.posterior_gap is not None:
            own = recorded.get(task.gap_reference.key)
            if own is None:
                own = _recorded(task.scene, task.gap_reference, batch, numbers)
            references = reference_trials(
                own, task.rules.posterior_gap, batch.truth.axes, numbers, first
            )
        for key, posteriors in recorded.items():
            parts[key].append(
                posterior_values(
                    posteriors, batch.truth, task.rules.calibration, references, numbers, first
                )
            )
    return {key: joined(values) for key, values in parts.items()}


def _recorded(scene: Scene, case: TaskCase, batch: SceneBatch, numbers: Numbers) -> Posteriors:
    if not type(case.strategy).has_posteriors:
        return NOT_ASKED
    tracks, _ = _run_case(scene, case, batch, numbers, record=True)
    return tracks.posteriors


def _batches(task: Task) -> Iterator[list[Span]]:
    """Runs of consecutive spans that go through the kernels together.

    A call of a kernel costs half a millisecond, so it should serve many trials; but their estimates
    should stay small enough for the caches.
    """
    most = max(1, _SCANS_PER_BATCH // (SPAN * task.scene.scan_count))
    batch: list[Span] = []
    for span in task.spans:
        if batch and (len(batch) == most or span.number != batch[-1].number + 1):
            yield batch
            batch = []
        batch.append(span)
    yield batch


def _rows_of(span: Span, batch: SceneBatch) -> slice:
    start = span.first_trial - batch.first_trial
    return slice(start, start + span.trials)


def run_task_safely(
    task: Task, run: Callable[[Task], list[SpanResult]] = run_task
) -> list[SpanResult] | TaskFailure:
    """Run a task; an exception becomes a record, so that it cannot stop other tasks."""
    try:
        return run(task)
    except Exception as error:  # whatever it is, the driver tells it
        return TaskFailure(f"{type(error).__name__}: {error}", traceback.format_exc())


def _run_case(
    scene: Scene, case: TaskCase, batch: SceneBatch, numbers: Numbers, record: bool = False
) -> tuple[Tracks, float]:
    assumptions = assumptions_of(case.assumed, scene, batch, numbers)
    is_told = type(case.strategy).is_told_origins
    scans = batch.scans if is_told else batch.scans_without_origins
    asked = {"record": True} if record else {}  # only families with posteriors know it
    started = time.thread_time_ns()
    tracks = case.strategy.run(assumptions, scans, numbers, batch.first_trial, **asked)
    spent = time.thread_time_ns() - started
    return tracks, spent / 1000 / scans.origins.size


def assumptions_of(
    assumed: Scene, scene: Scene, batch: SceneBatch, numbers: Numbers
) -> Assumptions:
    """What a strategy is told, from the scene that it assumes.

    Of the scene itself only stated truth matters: the prior's means are drawn around it.
    """
    prior = prior_of(assumed)
    if scene.legs is not None:
        means = prior_means(scene, assumed, batch.truth.states, numbers, batch.first_trial)
        prior = prior._replace(means=means)
    return Assumptions(models_of(assumed), prior, assumed.target.axes)


def _reference(task: Task, batch: SceneBatch, numbers: Numbers) -> Tracks | None:
    """Known association's tracks, where track loss is measured against them."""
    if task.rules.track_loss.error_above_sigma is None:
        return None
    reference = TaskCase("", KnownAssociation(kind="known-association"), task.scene)
    return _run_case(task.scene, reference, batch, numbers)[0]
