"""Run a study: drive its plan, then summarise what the store holds."""

from __future__ import annotations

import datetime
import os
import platform
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from harness.evidence.best import best_in
from harness.evidence.case_scores import CaseScores, join_spans
from harness.evidence.plans import FixedCount, KeyedCondition
from harness.evidence.results import Results
from harness.evidence.summary import (
    calibration_rows,
    existence_row,
    posterior_row,
    posterior_scan_rows,
    scan_rows,
    summary_row,
)
from harness.study.study import Study
from harness.trials.driver import SetAside, Watcher, drive
from harness.trials.keys import platform_words
from harness.trials.store import Store
from harness.trials.task import spans_of
from harness.trials.workers import Workers


def run_plan(
    study: Study, plan: FixedCount, store: Store, workers: Workers, watch: Watcher
) -> tuple[Results, list[SetAside]]:
    """Run what the store misses of a study by its plan, and summarise it.

    returns     the results, and the tasks that failed three times and are missing from them
    """
    started = datetime.datetime.now(datetime.UTC)
    conditions = plan.conditions
    aside = drive(plan, store, workers, watch)
    summary, scans, calibration = _summarise(study, conditions, store)
    manifest = _manifest(study, conditions, workers, started, aside)
    results = Results(summary, scans, dict(study.document), manifest, calibration=calibration)
    return results, aside


def _summarise(
    study: Study, conditions: Sequence[KeyedCondition], store: Store
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    summary: list[dict[str, Any]] = []
    scans: list[pd.DataFrame] = []
    calibration: list[pd.DataFrame] = []
    for keyed in conditions:
        condition = keyed.condition
        scored = _scored_cases(keyed, study.trials, store)
        best = best_in(
            {
                case.name: scored[case.name]
                for case in condition.cases
                if case.name in scored and not case.strategy.is_told_origins
            }
        )
        for case in condition.cases:
            if case.name not in scored:
                continue
            settings = {**condition.settings, "strategy": case.name}
            row = summary_row(
                scored[case.name],
                condition.rules.scene.sensor.measurement_size,
                case.strategy.counts_hypotheses,
            )
            chosen = {
                "trials_chosen_by": "fixed",
                "best_in": " ".join(best.get(case.name, [])),
            }
            asked = existence_row(scored[case.name]) | posterior_row(scored[case.name], keyed.rules)
            summary.append({**settings, **row, **chosen, **asked})
            times = condition.rules.scene.scan_times()
            by_scan = {
                **scan_rows(scored[case.name], times),
                **posterior_scan_rows(scored[case.name], keyed.rules),
            }
            scans.append(_with_settings(settings, by_scan))
            if keyed.rules.calibration is not None:
                levels = calibration_rows(scored[case.name])
                calibration.append(_with_settings(settings, levels))
    return pd.DataFrame(summary), _together(scans), _together(calibration)


def _together(frames: list[pd.DataFrame]) -> pd.DataFrame:
    return pd.concat(frames, ignore_index=True) if frames else pd.DataFrame()


def _scored_cases(keyed: KeyedCondition, trials: int, store: Store) -> dict[str, CaseScores]:
    rules = keyed.condition.rules
    spans = spans_of(trials)
    stored = store.read({case.key: spans for case in keyed.cases})
    window = slice(keyed.rules.first_scan, None)
    scored = {}
    for case, task_case in zip(keyed.condition.cases, keyed.cases, strict=True):
        joined = join_spans(
            stored[task_case.key], rules.scene.target.axes, window, rules.gospa.order
        )
        if joined is not None:
            scored[case.name] = joined
    return scored


def _with_settings(settings: Mapping[str, Any], rows: Mapping[str, np.ndarray]) -> pd.DataFrame:
    length = len(next(iter(rows.values())))
    return pd.DataFrame({**{key: [value] * length for key, value in settings.items()}, **rows})


def _manifest(
    study: Study,
    conditions: Sequence[KeyedCondition],
    workers: Workers,
    started: datetime.datetime,
    aside: Sequence[SetAside],
) -> dict[str, Any]:
    finished = datetime.datetime.now(datetime.UTC)
    return {
        "format": "trackassay results 1",
        "name": study.name,
        "study": dict(study.document),
        "file": str(study.path) if study.path else None,
        "seed": study.seed,
        "trials": study.trials,
        "started": started.isoformat(timespec="seconds"),
        "finished": finished.isoformat(timespec="seconds"),
        "seconds": round((finished - started).total_seconds(), 3),
        "workers": workers.describe(),
        "platform": list(platform_words()),
        "python": platform.python_version(),
        "machine": {"system": platform.platform(), "cores": os.cpu_count()},
        "cases": [
            {"settings": dict(keyed.condition.settings), "strategy": case.name, "key": task.key}
            for keyed in conditions
            for case, task in zip(keyed.condition.cases, keyed.cases, strict=True)
        ],
        "set_aside": [{"condition": one.task.label, "error": one.failure.error} for one in aside],
    }
