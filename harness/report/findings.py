"""What results say, in sentences with numbers: titles of figures and the last line of tables."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import pandas as pd

from harness.evidence.results import Results
from harness.report.numerals import with_interval, with_unit, written
from harness.report.quantities import Quantity, metric_quantity
from harness.report.swept import STRATEGY, SweptKey, plain, settings_of, strategy_key
from metrics.intervals import wilson_interval

HELD_RATE = 0.95  # share of tracks held that findings speak of
_MOST_LISTED = 3  # names in a list; more are counted


def candidates(results: Results) -> list[str]:
    """Strategies with results that are not references."""
    return [name for name in strategy_key(results).levels if name not in results.references]


def rivals(results: Results) -> list[str]:
    """The candidates, or all strategies where there are only references."""
    return candidates(results) or list(strategy_key(results).levels)


def compared(results: Results, metric: str) -> list[str]:
    """The strategies of a metric; the reference of a posterior gap is no way from itself."""
    names = strategy_key(results).levels
    if not metric.startswith("posterior_gap_"):
        return list(names)
    return [name for name in names if name != results.document["posterior_gap"]["reference"]]


def best_counts(results: Results, metric: str) -> dict[str, int]:
    """In how many conditions each candidate is not told apart from the best in a metric."""
    return {
        name: sum(is_best(names, metric) for names in _of(results, name)["best_in"])
        for name in candidates(results)
    }


def is_best(names: object, metric: str) -> bool:
    """Whether a metric is among the space-separated names of a case's `best_in`."""
    return isinstance(names, str) and metric in names.split()


def finding(results: Results, metric: str) -> str:
    """One sentence, without its full stop, on a metric over all conditions of the results."""
    quantity = metric_quantity(results, metric)
    names = [name for name in rivals(results) if name in compared(results, metric)]
    rows = results.summary[results.summary[STRATEGY].isin(names)]
    if rows[metric].isna().all():
        why = "No trial held track" if quantity.held else "Nothing was counted"
        return f"{why}: there is no {quantity.name}"
    if metric == "track_loss_rate" and not rows["lost"].any():
        return f"No strategy lost a track{_in_any_of(len(settings_of(results)))}"
    if quantity.expected is not None:
        return _calibration(results, metric)
    counts = best_counts(results, metric)
    if len(counts) > 1 and any(counts.values()):
        return _ranking(results, metric, quantity, counts)
    return _range(rows, metric, quantity)


def finding_along(results: Results, swept: SweptKey) -> str:
    """Up to which value of a swept quantity (or from which on) tracks are held.

    The results are at one setting of all other swept keys.
    """
    reach = {name: _holding_levels(results, name, swept) for name in rivals(results)}
    share = f"{HELD_RATE:.0%}".replace("%", " % of tracks")
    if all(len(held) == len(swept.levels) for held in reach.values()):
        return f"Every strategy holds {share} at every {swept.name} swept"
    if not any(reach.values()):
        return f"No strategy holds {share} at any {swept.name} swept"
    longest = max(len(held) for held in reach.values())
    leaders = [name for name, held in reach.items() if len(held) == longest]
    last = min(reach, key=lambda name: len(reach[name]))
    held = reach[leaders[0]]
    words = "up to" if held[0] == min(swept.levels) else "from"
    verb = "holds" if len(leaders) == 1 else "hold"
    text = f"{_who(leaders, len(reach))} {verb} {share} {words} {swept.described(held[-1])}"
    if len(leaders) == len(reach):
        return text
    if not reach[last]:
        return f"{text}, {last} nowhere"
    return f"{text}, {last} {words} {swept.label(reach[last][-1])}"


def trials_run(results: Results) -> str:
    """How many trials a case has, and how that was decided."""
    fewest, most = int(results.summary["trials"].min()), int(results.summary["trials"].max())
    text = f"{fewest} trials a case" if fewest == most else f"{fewest} to {most} trials a case"
    chosen_by = set(results.summary.get("trials_chosen_by", pd.Series(dtype=str)).dropna())
    return text + (", chosen by precision" if "precision" in chosen_by else "")


def listed(names: Sequence[str]) -> str:
    """'a', 'a and b', 'a, b and c'."""
    return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)


def case_in_words(quantity: Quantity, case: Mapping[Any, Any], metric: str) -> str:
    """A case's value in the quantity's unit, with as many digits as its interval supports."""
    return in_words(quantity, *(case.get(metric + end, math.nan) for end in ("", "_low", "_high")))


def in_words(
    quantity: Quantity, value: float, low: float = math.nan, high: float = math.nan
) -> str:
    """A value in the quantity's unit, with as many digits as its interval supports."""
    text, _ = written(*(quantity.scale * float(x) for x in (value, low, high)))
    return with_unit(text, quantity.unit)


def closest_case(cases: pd.DataFrame, metric: str, value: float) -> dict[Any, Any]:
    """The case whose value of a metric is closest to one; some case must have a value."""
    known = cases.dropna(subset=metric).to_dict("records")
    return min(known, key=lambda case: abs(case[metric] - value))


def _of(results: Results, strategy: str) -> pd.DataFrame:
    return results.summary[results.summary[STRATEGY] == strategy]


def _in_any_of(conditions: int) -> str:
    return f" in any of the {conditions} conditions" if conditions > 1 else ""


def _ranking(results: Results, metric: str, quantity: Quantity, counts: dict[str, int]) -> str:
    """Who is best how often, and what that means beside who is best least often."""
    conditions = len(settings_of(results))
    if all(count == conditions for count in counts.values()):
        return f"No two strategies are told apart yet in {quantity.name}{_in_any_of(conditions)}"
    if conditions == 1:
        return _best_of_one(results, metric, quantity, counts)
    typical = {name: _typical(results, metric, name) for name in counts}
    order = sorted(counts, key=lambda name: (-counts[name], typical[name][0]))
    first, last, most = order[0], order[-1], counts[order[0]]
    leaders = [name for name in counts if counts[name] == most]
    who = f"{_who(leaders, len(counts))} {'is' if len(leaders) == 1 else 'are each'}"
    value = in_words(quantity, *typical[first])
    if metric == "track_loss_rate":
        value = f"{first} loses {value} of all tracks"
    else:
        value = f"median {quantity.name} {value} with {first}"
    return (
        f"{who} best or not told apart from the best in {most} of {conditions} conditions; "
        f"{value} against {in_words(quantity, *typical[last])} with {last}"
    )


def _who(names: Sequence[str], among: int) -> str:
    """Names, or how many they are."""
    return listed(names) if len(names) <= _MOST_LISTED else f"{len(names)} of {among} strategies"


def _best_of_one(results: Results, metric: str, quantity: Quantity, counts: dict[str, int]) -> str:
    leaders = [name for name, count in counts.items() if count]
    values = []
    for name in leaders:
        case = _of(results, name).to_dict("records")[0]
        ends = (metric, f"{metric}_low", f"{metric}_high")
        value, low, high = (quantity.scale * float(case[name]) for name in ends)
        values.append(with_interval(value, low, high, quantity.unit))
    if len(leaders) > _MOST_LISTED:
        return (
            f"{len(leaders)} of {len(counts)} strategies are best in {quantity.name} and not told "
            f"apart; the first of them, {leaders[0]}: {values[0]}"
        )
    if len(leaders) == 1:
        return f"{leaders[0]} is best in {quantity.name}: {values[0]}"
    return f"{listed(leaders)} are best in {quantity.name} and not told apart: {listed(values)}"


def _typical(results: Results, metric: str, name: str) -> tuple[float, float, float]:
    """Pooled rate of loss, or the median over the conditions; with an interval for its digits."""
    rows = _of(results, name)
    if metric == "track_loss_rate":
        trials, lost = int((rows["trials"] - rows["failed"]).sum()), int(rows["lost"].sum())
        ends = wilson_interval(lost, trials)
        return lost / trials if trials else math.nan, float(ends.low), float(ends.high)
    median = float(rows[metric].median())
    if math.isnan(median):
        return median, math.nan, math.nan
    middle = closest_case(rows, metric, median)
    low, high = (float(middle.get(metric + end, math.nan)) for end in ("_low", "_high"))
    return median, low, high


def _range(rows: pd.DataFrame, metric: str, quantity: Quantity) -> str:
    cases = sorted(rows.dropna(subset=metric).to_dict("records"), key=lambda case: case[metric])
    low, high = cases[0], cases[-1]
    name = quantity.name[0].upper() + quantity.name[1:]
    if low[metric] == high[metric]:
        return f"{name} is {case_in_words(quantity, low, metric)}"
    ends = [f"{case_in_words(quantity, end, metric)} ({end[STRATEGY]})" for end in (low, high)]
    if low[STRATEGY] == high[STRATEGY]:
        ends[0] = case_in_words(quantity, low, metric)
    return f"{name} runs from {ends[0]} to {ends[1]}"


def _calibration(results: Results, metric: str) -> str:
    """Whose claimed errors are too small: the interval lies beyond what is expected."""
    conditions = len(settings_of(results))
    counts = {name: over_confident(results, metric, name) for name in rivals(results)}
    guilty = sorted((name for name in counts if counts[name]), key=lambda name: -counts[name])
    if not guilty:
        return f"No strategy is over-confident{_in_any_of(conditions)}"
    if conditions == 1:
        return f"Over-confident: {listed(guilty)}"
    first, *others = guilty
    parts = [f"{first} in {counts[first]} of {conditions} conditions"]
    parts += [f"{name} in {counts[name]}" for name in others]
    return f"Over-confident: {', '.join(parts)}"


def over_confident(results: Results, metric: str, name: str) -> int:
    """In how many conditions a strategy's whole interval lies on the wrong side of the expected."""
    quantity, cases = metric_quantity(results, metric), _of(results, name)
    if quantity.confident_below:
        return int((cases[f"{metric}_high"] < quantity.expected).sum())
    return int((cases[f"{metric}_low"] > quantity.expected).sum())


def _holding_levels(results: Results, name: str, swept: SweptKey) -> list[float]:
    """Levels from the easier end on, as far as the strategy holds enough of the tracks."""
    cases = _of(results, name)
    rates = dict(zip(map(plain, cases[swept.key]), cases["track_loss_rate"], strict=True))
    overall = results.summary.groupby(swept.key)["track_loss_rate"].mean().sort_index()
    hardest_last = overall.iloc[-1] >= overall.iloc[0]
    held = []
    for level in sorted(swept.levels, reverse=not hardest_last):
        if not rates.get(level, math.nan) <= 1 - HELD_RATE:
            break
        held.append(level)
    return held
