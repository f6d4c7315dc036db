"""Which swept values a failure is due to: one alone, or several together."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from harness.study.mistakes import Finding, KeyPath, key_text, value_text
from harness.study.sweep import Axis, SweptKey

Combination = tuple[int, ...]  # a step along each of the axes


def blamed(failures: Mapping[Combination, list[Finding]], axes: Sequence[Axis]) -> list[Finding]:
    """Lay findings at the sweeps that cause them, each once; without axes they stay where they are.

    A value is to blame if every combination with it fails at the same key; of several such values
    the one whose own key lies closest to the failing key. What then remains is due to combinations,
    of which one is named.

    failures    findings by the steps along the axes; combinations that are left out did not fail
    """
    by_key: dict[KeyPath, dict[Combination, Finding]] = {}
    for steps, findings in failures.items():
        for finding in findings:
            by_key.setdefault(finding.path, {}).setdefault(steps, finding)
    if not axes:
        return [finding for findings in failures.values() for finding in findings]
    return [finding for path, failing in by_key.items() for finding in _causes(path, failing, axes)]


def _causes(
    path: KeyPath, failing: dict[Combination, Finding], axes: Sequence[Axis]
) -> list[Finding]:
    causes = []
    combinations = math.prod(len(axis.steps) for axis in axes)
    nearest_first = sorted(range(len(axes)), key=lambda axis: -_closeness_of(axes[axis], path))
    for axis in nearest_first:
        with_step: dict[int, list[Combination]] = {}
        for steps in failing:
            with_step.setdefault(steps[axis], []).append(steps)
        for step, combined in with_step.items():
            if len(combined) == combinations // len(axes[axis].steps):
                causes.append(_single_cause(failing[combined[0]], axes[axis], step))
                for steps in combined:
                    del failing[steps]
    if failing:
        causes.append(_joint_cause(failing, axes))
    return causes


def _single_cause(finding: Finding, axis: Axis, step: int) -> Finding:
    swept, value = _closest(axis, step, finding.path)
    return laid_at(swept, step, value, finding)


def laid_at(swept: SweptKey, step: int, value: object, finding: Finding) -> Finding:
    """Lay a finding at the swept value that causes it."""
    is_own = finding.path[: len(swept.path)] == swept.path
    rule = finding.rule if is_own else f"does not fit: {key_text(finding.path)} {finding.rule}"
    return Finding(swept.place_of(step), rule, finding.remedy, value, swept.place)


def _joint_cause(failing: Mapping[Combination, Finding], axes: Sequence[Axis]) -> Finding:
    steps, finding = next(iter(failing.items()))
    needed = _needed_axes(steps, failing, axes, finding.path)
    (first, value), *others = [_closest(axes[axis], steps[axis], finding.path) for axis in needed]
    beside = " and ".join(f"{swept.key} = {value_text(given)}" for swept, given in others)
    rule = f"does not go with {beside}: {key_text(finding.path)} {finding.rule}"
    return Finding(first.place_of(steps[needed[0]]), rule, finding.remedy, value, first.place)


def _needed_axes(
    steps: Combination,
    failing: Mapping[Combination, Finding],
    axes: Sequence[Axis],
    path: KeyPath,
) -> list[int]:
    """Return axes whose steps alone make for failure, whatever the others; the closest first."""
    needed = sorted(range(len(axes)), key=lambda axis: -_closeness_of(axes[axis], path))
    for axis in reversed(needed.copy()):
        fewer = [other for other in needed if other != axis]
        alike = sum(all(other[place] == steps[place] for place in fewer) for other in failing)
        if alike == math.prod(
            len(axes[free].steps) for free in range(len(axes)) if free not in fewer
        ):
            needed = fewer
    return needed


def _closest(axis: Axis, step: int, path: KeyPath) -> tuple[SweptKey, object]:
    pairs = zip(axis.keys, axis.steps[step], strict=True)
    return max(pairs, key=lambda pair: closeness(pair[0], path))


def _closeness_of(axis: Axis, path: KeyPath) -> int:
    return max(closeness(swept, path) for swept in axis.keys)


def closeness(swept: SweptKey, path: KeyPath) -> int:
    """How many leading keys two paths share."""
    own = swept.path
    return next(
        (place for place, key in enumerate(own) if path[place : place + 1] != (key,)), len(own)
    )
