"""The conditions of a study: what is swept, put into scenes, strategies and scoring.

Tables that a sweep changes are checked once for each of their versions, not once a condition, so
that thousands of conditions load in seconds.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import TypeAdapter, ValidationError

from filters.models.sensor.own import FOLDER
from filters.strategies.strategy import Strategy
from harness.study.assumed import assumed_scene
from harness.study.blame import blamed
from harness.study.keys import STUDY, Named, Table
from harness.study.mistakes import ABSENT, Finding, Findings, KeyPath, value_at
from harness.study.schema import AnyStrategy, Rules, Scene
from harness.study.sweep import Axis, changed
from harness.study.wording import findings_of

Steps = Mapping[int, int]  # axis -> step, for as many axes as matter

_STRATEGY: TypeAdapter[Strategy] = TypeAdapter(AnyStrategy)
_RULES = Table(Rules)


@dataclass(frozen=True)
class Case:
    """A strategy in a condition: a row of the results."""

    name: str
    strategy: Strategy
    assumed: Scene  # what the strategy is told of target and sensor


@dataclass(frozen=True)
class Condition:
    """One setting of everything that is swept.

    settings    swept key, dotted -> its value here, in the order of the study
    """

    settings: dict[str, Any]
    rules: Rules
    cases: tuple[Case, ...]


@dataclass(frozen=True)
class Versions:
    """One part of the study in every version that the sweeps make of it.

    axes        those that change it
    records     its checked record, by the steps along those axes
    """

    axes: tuple[int, ...]
    records: Mapping[tuple[int, ...], Any]

    def at(self, steps: Steps) -> Any:
        """Return the version at these steps; an axis that they leave out stands at its first."""
        return self.records[tuple(steps.get(axis, 0) for axis in self.axes)]


def conditions_of(
    document: Mapping[str, Any], axes: Sequence[Axis], folder: Path
) -> tuple[Condition, ...]:
    """Return the conditions that a checked document and its axes make; the last axis is fastest.

    folder      of the study's file
    raises      Findings, at the sweeps: a swept value or a combination of them does not fit
    """
    scene, strategies, scoring = _tables(document, axes, folder)
    assumed = _assumed_scenes(scene, strategies, axes, folder)

    def condition(steps: Steps) -> Condition:
        here = {name: versions.at(steps) for name, versions in strategies.items()}
        parts = {name: versions.at(steps) for name, versions in scoring.items()}
        truth = scene.at(steps)
        rules = _checked(
            lambda: Rules.model_validate({"scene": truth, "strategies": here, **parts}), ()
        )
        cases = tuple(
            Case(name, strategy, assumed[name].at(steps) if name in assumed else truth)
            for name, strategy in rules.strategies.items()
        )
        return Condition(_settings(axes, steps), rules, cases)

    return tuple(_versions(tuple(range(len(axes))), axes, condition).records.values())


def _tables(
    document: Mapping[str, Any], axes: Sequence[Axis], folder: Path
) -> tuple[Versions, dict[str, Versions], dict[str, Versions]]:
    """Return the versions of the scene, of each strategy and of each table of scoring."""
    findings: list[Finding] = []

    def versions(path: tuple[str, ...], check: Callable[[Any], Any]) -> Versions:
        def record(steps: Steps) -> Any:
            raw = _with_steps(document, path, axes, steps)
            return _checked(lambda: check(raw), path)

        try:
            return _versions(_axes_under(path, axes), axes, record)
        except Findings as found:
            findings.extend(found.findings)
            return Versions((), {})

    scene = versions(("scene",), lambda raw: Scene.model_validate(raw, context={FOLDER: folder}))
    strategies = {
        name: versions(("strategies", name), _STRATEGY.validate_python)
        for name in document["strategies"]
    }
    scoring = {
        name: versions((name,), table.record.model_validate)
        for name, table in _RULES.fields.items()
        if name != "scene" and isinstance(table, Table) and _is_said(name, document)
    }
    if findings:
        raise Findings(findings)
    return scene, strategies, scoring


def _is_said(name: str, document: Mapping[str, Any]) -> bool:
    """Whether a table stands in the study, or would be there all the same."""
    return name in document or Rules.model_fields[name].get_default() is not None


def _assumed_scenes(
    scene: Versions, strategies: Mapping[str, Versions], axes: Sequence[Axis], folder: Path
) -> dict[str, Versions]:
    """Return the assumed scenes of the strategies that assume something of their own."""
    findings: list[Finding] = []
    assumed = {}
    for name, strategy in strategies.items():
        if not any(record.assumes for record in strategy.records.values()):
            continue
        base = ("strategies", name, "assumes")

        def record(steps: Steps, strategy: Versions = strategy, base: KeyPath = base) -> Scene:
            return assumed_scene(scene.at(steps), strategy.at(steps).assumes, base, folder)

        changing = tuple(sorted({*scene.axes, *_axes_under(base, axes)}))
        try:
            assumed[name] = _versions(changing, axes, record)
        except Findings as found:
            findings += found.findings
    if findings:
        raise Findings(findings)
    return assumed


def _versions(
    changing: tuple[int, ...], axes: Sequence[Axis], make: Callable[[Steps], Any]
) -> Versions:
    """Make a record for every combination of steps along the axes that change it."""
    records: dict[tuple[int, ...], Any] = {}
    failures: dict[tuple[int, ...], list[Finding]] = {}
    for steps in itertools.product(*(range(len(axes[axis].steps)) for axis in changing)):
        try:
            records[steps] = make(dict(zip(changing, steps, strict=True)))
        except Findings as found:
            failures[steps] = found.findings
    if failures:
        raise Findings(blamed(failures, [axes[axis] for axis in changing]))
    return Versions(changing, records)


def _with_steps(
    document: Mapping[str, Any], path: tuple[str, ...], axes: Sequence[Axis], steps: Steps
) -> Any:
    """Return a table of the document with the swept values of these steps in it."""
    raw = value_at(document, path)
    raw = {} if raw is ABSENT else raw
    for axis, step in steps.items():
        for swept, value in zip(axes[axis].keys, axes[axis].steps[step], strict=True):
            if swept.path[: len(path)] == path:
                raw = changed(raw, swept.path[len(path) :], value)
    return raw


def _axes_under(path: tuple[str, ...], axes: Sequence[Axis]) -> tuple[int, ...]:
    return tuple(
        number
        for number, axis in enumerate(axes)
        if any(swept.path[: len(path)] == path for swept in axis.keys)
    )


def _settings(axes: Iterable[Axis], steps: Steps) -> dict[str, Any]:
    return {
        swept.key: value
        for number, axis in enumerate(axes)
        for swept, value in zip(axis.keys, axis.steps[steps[number]], strict=True)
    }


def _checked(check: Callable[[], Any], path: KeyPath) -> Any:
    try:
        return check()
    except ValidationError as error:
        raise Findings(findings_of(error, _node_of(path), path)) from None


def _node_of(path: KeyPath) -> Any:
    node: Any = STUDY
    for key in path:
        node = node.entry if isinstance(node, Named) else node.fields[key]
    return node
