"""Whether the memory that strategies ask for, by their own settings, is there at all."""

from __future__ import annotations

import math
import os

import numpy as np

from harness.study.expand import Condition
from harness.study.mistakes import ABSENT, Finding, KeyPath
from harness.study.study import Study, study_error

_GB = 1e9
_BYTES_A_NUMBER = 8
_TRIALS_TOGETHER = 100  # in a span, the least that is drawn at once


def machine_memory() -> float:
    """Bytes of memory of this machine; infinite where the system does not tell."""
    try:
        return float(os.sysconf("SC_PAGE_SIZE")) * os.sysconf("SC_PHYS_PAGES")
    except (AttributeError, OSError, ValueError):
        return math.inf


def check_memory(study: Study) -> None:
    """Check that one worker alone could hold what each strategy works in.

    raises      StudyError, at the number that asks for too much
    """
    most = machine_memory()
    findings: dict[tuple[KeyPath, int], Finding] = {}
    for condition in study.conditions:
        wrong = _beyond_scenes(condition, most)
        if wrong is not None:
            findings.setdefault((wrong.path, 0), wrong)
        for case in condition.cases:
            strategy, assumed = case.strategy, case.assumed
            n, m = assumed.target.state_size, assumed.sensor.measurement_size
            for key, count, bytes_each in strategy.memory_asked(n, m):
                if count * bytes_each > most:
                    path = ("strategies", case.name, key)
                    swept = ("sweep", ".".join(path))
                    place = swept if swept[1] in condition.settings else path
                    finding = _beyond_memory(place, path, count, bytes_each, most)
                    findings.setdefault((path, count), finding)
    if findings:
        raise study_error(study, findings.values())


def _beyond_scenes(condition: Condition, most: float) -> Finding | None:
    """Say that the detections of a span of trials do not fit, if they don't."""
    scene = condition.rules.scene
    model = scene.sensor.clutter_model(scene.scan_times())
    m = scene.sensor.measurement_size
    volumes = np.prod(2.0 * model.boxes[:, m : 2 * m], axis=1)
    a_scan = float(volumes @ model.boxes[:, -1] + model.bumps[:, -1].sum())
    needed = a_scan * scene.scan_count * _TRIALS_TOGETHER * _BYTES_A_NUMBER * m
    if needed <= most:
        return None
    return Finding(
        ("scene", "sensor"),
        f"draws {a_scan:.3g} false detections a scan, which take {needed / _GB:,.3g} GB for "
        f"{_TRIALS_TOGETHER} trials, and this machine has {most / _GB:,.3g}",
        "lessen the clutter, the region or the scans",
        ABSENT,
    )


def _beyond_memory(
    place: KeyPath, path: KeyPath, count: int, bytes_each: int, most: float
) -> Finding:
    needed = count * bytes_each
    return Finding(
        place,
        f"needs {needed / _GB:,.3g} GB of memory, and this machine has {most / _GB:,.3g}",
        f"take at most {_rounded_down(most / bytes_each):,}",
        count,
        path,
    )


def _rounded_down(value: float) -> int:
    """Keep two digits, so that somewhat less than all memory is asked for."""
    unit = 10 ** max(0, math.floor(math.log10(value)) - 1)
    return math.floor(value / unit) * unit
