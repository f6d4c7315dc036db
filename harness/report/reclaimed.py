"""What a store holds and what of it nobody needs, in words."""

from __future__ import annotations

from pathlib import Path

from harness.trials.reclaim import Reclaimable

_MB = 1e6


def reclaim_text(found: Reclaimable, store: Path, removed: bool) -> str:
    """Lines for the terminal."""
    lines = [
        f"{store}: {found.cases:,} cases in {found.segments:,} segments, "
        f"{found.size / _MB:,.1f} MB",
        f"needed by no study: {found.cases_unneeded:,} cases, {found.size_unneeded / _MB:,.1f} MB",
    ]
    if found.damaged:
        lines.append(f"damaged: {found.damaged:,} segments")
    if removed:
        lines.append("removed")
    elif found.cases_unneeded or found.damaged:
        lines.append(
            "nothing was removed; --remove does it. Name the studies whose unfinished runs you "
            "want to keep."
        )
    return "\n".join(lines)
