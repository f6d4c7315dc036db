"""Keys of results: a digest of all that a case's numbers depend on, and of nothing else."""

from __future__ import annotations

import functools
import hashlib
import json
import platform
from typing import Any

import llvmlite
import numba
import numpy as np
import scipy

from filters.compiled import source_digest
from harness.study.expand import Case
from harness.study.schema import Scene
from harness.trials.score import ScoringRules

# Sources whose change makes stored results stale.
_SCENE_SOURCES = (
    "filters/models",
    "filters/random_numbers.py",
    "filters/cholesky.py",
    "harness/scene",
    "harness/study/legs.py",
    "harness/study/names.py",
    "harness/study/schema.py",
    "harness/study/unmodelled.py",
    "harness/trials/task.py",
)
_STRATEGY_SOURCES = ("filters",)
_METRIC_SOURCES = (
    "metrics",
    "harness/trials/score.py",
    "harness/trials/posterior_scores.py",
    "harness/trials/posterior_values.py",
)

_DIGITS = 12


def _rounded(value: Any) -> Any:
    """The value with its numbers as text of 12 digits, so that 0.1 + 0.2 is 0.3."""
    if isinstance(value, bool) or value is None or isinstance(value, str):
        return value
    if isinstance(value, (int, float)):
        return f"{value:.{_DIGITS}g}"
    if isinstance(value, dict):
        return {key: _rounded(entry) for key, entry in value.items()}
    return [_rounded(entry) for entry in value]


def digest(value: Any) -> str:
    """Digest of nested dicts, lists, texts and numbers; the order of keys does not matter."""
    text = json.dumps(_rounded(value), sort_keys=True, allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()[:32]


@functools.cache
def platform_words() -> tuple[str, ...]:
    """What the bits of a result depend on beside the code: processor family, system, versions."""
    return (
        platform.machine(),
        platform.system(),
        f"numpy {np.__version__}",
        f"scipy {scipy.__version__}",
        f"numba {numba.__version__}",
        f"llvmlite {llvmlite.__version__}",
    )


def scene_key(scene: Scene, seed: int) -> str:
    """Key of a condition's scenes.

    raises      OwnFileError: a sensor's own file is not there
    """
    return digest(
        [
            scene.model_dump(),
            scene.sensor.code_digest(),
            str(seed),
            platform_words(),
            source_digest(*_SCENE_SOURCES),
        ]
    )


def rules_key(rules: ScoringRules, gap_reference: str | None = None) -> str:
    """Key of how trials are scored.

    gap_reference   key of the strategy that posteriors are compared with, where they are
    """
    asked = []
    if rules.need_posteriors:
        calibration, gap = rules.calibration, rules.posterior_gap
        asked = [
            None if calibration is None else calibration.model_dump(),
            None if gap is None else [gap.samples, gap_reference],
        ]
    return digest(
        [
            rules.track_loss.model_dump(),
            rules.gospa.model_dump(),
            rules.first_scan,
            source_digest(*_METRIC_SOURCES),
            *asked,
        ]
    )


def case_key(scenes: str, case: Case, rules: str) -> str:
    """Key of a case: its scenes, its strategy with what it assumes, and how it is scored."""
    return digest(
        [
            scenes,
            case.strategy.model_dump(exclude={"assumes"}),
            case.assumed.model_dump(),
            case.assumed.sensor.code_digest(),
            rules,
            source_digest(*_STRATEGY_SOURCES),
        ]
    )
