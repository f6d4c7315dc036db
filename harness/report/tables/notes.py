"""What stands below a table: how to read it, and what is missing or weak in it."""

from __future__ import annotations

import pandas as pd

from harness.evidence.results import Results
from harness.report.findings import listed
from harness.report.numerals import NO_VALUE
from harness.report.quantities import Quantity
from harness.report.swept import STRATEGY

OUTSIDE_WORTH_A_NOTE = 0.01
FEWEST_EFFECTIVE_TRIALS = 25


def sign_meaning(quantity: Quantity) -> str:
    """What a marked cell of a metric is."""
    if quantity.expected is not None:
        expected = f"{quantity.expected_shown:g}"
        return f"its interval holds {expected}, and none loses significantly fewer tracks"
    best = "best, or not told apart from the best (paired by trial, corrected)"
    return f"{best}; none loses significantly fewer tracks" if quantity.held else best


def metric_notes(results: Results, metric: str, quantity: Quantity) -> tuple[str, ...]:
    """How a metric is to be read, and why values of it are missing."""
    summary = results.summary
    notes = []
    if quantity.expected is not None:
        sides = ("below", "above") if quantity.confident_below else ("above", "below")
        notes.append(
            f"{quantity.expected_shown:g} is expected; {sides[0]} it a strategy is over-confident, "
            f"{sides[1]} it too cautious."
        )
    if metric.startswith("posterior_gap_"):
        reference = results.document["posterior_gap"]["reference"]
        notes.append(f"From the posterior of {reference}, over position and velocity.")
    if quantity.held:
        notes.append("Over trials that held track: read it beside the track loss.")
        notes += _thin_evidence(summary)
    without = summary[summary[metric].isna()]
    if not without.empty:
        held = without["trials"] - without["lost"] - without["failed"]
        why = "no trial held track" if quantity.held and not held.any() else "no value"
        notes.append(f"{NO_VALUE} {why}: {listed(list(dict.fromkeys(without[STRATEGY])))}.")
    notes += common_notes(results)
    return tuple(notes)


def _thin_evidence(summary: pd.DataFrame) -> list[str]:
    """Where a few trials carry the errors, their intervals are too short."""
    if "effective_trials" not in summary:
        return []
    thin = summary[summary["effective_trials"] < FEWEST_EFFECTIVE_TRIALS]
    if thin.empty:
        return []
    cases = thin.groupby(STRATEGY, sort=False).size()
    counts = [f"{name} in {count}" for name, count in cases.items()]
    return [
        f"Fewer than {FEWEST_EFFECTIVE_TRIALS} trials carry the error, so its interval is too "
        f"short: {listed(counts)} {'case' if len(thin) == 1 else 'cases'}."
    ]


def common_notes(results: Results) -> list[str]:
    """What every table of these results must say: references, failures, targets outside."""
    summary = results.summary
    notes = []
    if told := [name for name in results.references if name in set(summary[STRATEGY])]:
        verb = "is" if len(told) == 1 else "are"
        notes.append(f"{listed(told)} {verb} told the origins: a reference, not a candidate.")
    failed = summary.groupby(STRATEGY, sort=False)["failed"].sum()
    if failed.any():
        counts = [f"{name} {count}" for name, count in failed.items() if count]
        notes.append(f"Failed trials, neither lost nor held: {listed(counts)}.")
    if "judgement" in set(summary.get("trials_chosen_by", ())):
        notes.append("Where a judgement chose the number of trials, track loss has no interval.")
    outside = summary["outside"].max() if "outside" in summary else 0.0
    if outside > OUTSIDE_WORTH_A_NOTE:
        notes.append(f"The target is outside the region in up to {100 * outside:.2g} % of scans.")
    return notes
