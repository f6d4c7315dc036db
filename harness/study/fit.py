"""Whether strategies fit what they assume: settings that only some sensors or states allow."""

from __future__ import annotations

from collections.abc import Iterable

from filters.models.record import BadValue
from harness.study.expand import Condition
from harness.study.mistakes import Finding, KeyPath


def unfit_strategies(conditions: Iterable[Condition]) -> list[Finding]:
    """Return what is wrong with the strategies' settings for the scenes that they assume."""
    findings: dict[tuple[KeyPath, str], Finding] = {}
    for condition in conditions:
        for case in condition.cases:
            for wrong in case.strategy.misfits(case.assumed.target, case.assumed.sensor):
                path = ("strategies", case.name, *wrong.key.split("."))
                finding = _at_its_sweep(condition, path, wrong)
                findings.setdefault((finding.path, wrong.rule), finding)
    return list(findings.values())


def _at_its_sweep(condition: Condition, path: KeyPath, wrong: BadValue) -> Finding:
    key = ".".join(map(str, path))
    if key in condition.settings:
        value = condition.settings[key]
        return Finding(("sweep", key), wrong.rule, wrong.remedy, value, path)
    return Finding(path, wrong.rule, wrong.remedy)
