"""Which strategies are best: not the smallest number, but all not told apart from the best.

Comparisons are paired by trial and corrected (Holm) within a condition and metric. Errors are
compared on the trials that both strategies held, and no strategy is among the best on an error
whose track loss rate is significantly higher.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from harness.evidence.case_scores import CaseScores
from metrics.intervals import mean_influence, mean_interval
from metrics.paired import (
    holm_adjust,
    loss_rate_difference,
    mean_difference,
    root_mean_ratio,
)

Cases = Mapping[str, CaseScores]
LEVEL = 0.95


def best_in(cases: Cases) -> dict[str, list[str]]:
    """Names of the metrics in which each strategy of a condition is among the best.

    cases   the candidates of one condition, over the same trials; references left out
    """
    found: dict[str, list[str]] = {name: [] for name in cases}

    def mark(metric: str, names: list[str]) -> None:
        for name in names:
            found[name].append(metric)

    fewest_lost = _not_told_apart(cases, _loss_rate, _loss_p_value)
    mark("track_loss_rate", fewest_lost)
    contenders = {name: cases[name] for name in fewest_lost}
    for error in ("position", "velocity"):
        column = f"{error}_square"
        value, p_value = _mean_square(column), _mean_square_p_value(column)
        mark(f"rmse_{error}", _not_told_apart(contenders, value, p_value))
    mark("anees", [name for name in contenders if _is_consistent(cases[name])])
    if all(case.scores.posterior is not None for case in cases.values()):
        mark("log_score", _not_told_apart(contenders, _log_score, _log_score_p_value))
    mark("gospa", _not_told_apart(cases, _gospa, _gospa_p_value))
    return found


def _not_told_apart(
    cases: Cases,
    value: Callable[[CaseScores], float],
    p_value: Callable[[CaseScores, CaseScores], float],
) -> list[str]:
    """The case of least value, and those that a paired test does not tell apart from it."""
    values = {name: value(case) for name, case in cases.items()}
    values = {name: number for name, number in values.items() if np.isfinite(number)}
    if not values:
        return []
    best = min(values, key=values.__getitem__)
    others = [name for name in values if name != best]
    adjusted = holm_adjust([p_value(cases[name], cases[best]) for name in others])
    told_apart = {name for name, p in zip(others, adjusted, strict=True) if p < 1.0 - LEVEL}
    return [name for name in values if name not in told_apart]


def _loss_rate(case: CaseScores) -> float:
    judged = case.counted.sum()
    return float(case.lost.sum() / judged) if judged else np.nan


def _loss_p_value(first: CaseScores, second: CaseScores) -> float:
    both = first.counted & second.counted
    only_first = int(np.sum(both & first.lost & ~second.lost))
    only_second = int(np.sum(both & second.lost & ~first.lost))
    return loss_rate_difference(only_first, only_second, int(both.sum())).p_value


def _mean_square(column: str) -> Callable[[CaseScores], float]:
    def value(case: CaseScores) -> float:
        held = case.held
        return mean_influence(getattr(case.scores, column)[held], case.scores.estimates[held])[0]

    return value


def _mean_square_p_value(column: str) -> Callable[[CaseScores, CaseScores], float]:
    def p_value(first: CaseScores, second: CaseScores) -> float:
        both = first.held & second.held
        return root_mean_ratio(
            getattr(first.scores, column)[both],
            getattr(second.scores, column)[both],
            2,
            first_weights=first.scores.estimates[both],
            second_weights=second.scores.estimates[both],
        ).p_value

    return p_value


def _gospa(case: CaseScores) -> float:
    return mean_influence(case.gospa_power[case.counted])[0]


def _gospa_p_value(first: CaseScores, second: CaseScores) -> float:
    both = first.counted & second.counted
    return root_mean_ratio(first.gospa_power[both], second.gospa_power[both], first.order).p_value


def _log_scores(case: CaseScores) -> np.ndarray:
    posterior = case.scores.posterior
    return np.full(case.trials, np.nan) if posterior is None else posterior.log_score


def _log_score(case: CaseScores) -> float:
    return mean_influence(_log_scores(case)[case.held])[0]


def _log_score_p_value(first: CaseScores, second: CaseScores) -> float:
    both = first.held & second.held
    ours, theirs = (_log_scores(case)[both, np.newaxis] for case in (first, second))
    return mean_difference(ours, theirs).p_value


def _is_consistent(case: CaseScores) -> bool:
    """Whether the interval of the mean NEES holds its expected value."""
    low, high = mean_interval(
        case.scores.nees[case.held], LEVEL, weights=case.scores.estimates[case.held]
    )
    return bool(low <= 2 * case.axes <= high)
