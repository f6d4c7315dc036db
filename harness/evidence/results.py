"""The results of a study as tables and figures take them: two data frames and what was asked."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pandas as pd

REFERENCE_KIND = "known-association"


@dataclass(frozen=True)
class Results:
    """A finished or partial study.

    summary     one row a case, the columns of summary.csv
    scans       one row a case and scan: swept keys, strategy, scan (from 1), time_s, held (trials
                that held track and have an estimate at the scan), rmse_position, rmse_velocity
                (over those), nees (mean over those, not divided by the dimension), nees_low and
                nees_high (95 % bounds of such a mean), dimension, lost (share of the trials not
                failed that are lost so far)
    document    the study file as run
    """

    summary: pd.DataFrame
    scans: pd.DataFrame
    document: dict[str, Any]
    manifest: dict[str, Any]
    folder: Path | None = None
    calibration: pd.DataFrame = field(default_factory=pd.DataFrame)

    @property
    def title(self) -> str:
        """The study's title."""
        return str(self.document["title"])

    @property
    def question(self) -> str:
        """The study's question; may be empty."""
        return str(self.document.get("question", ""))

    @property
    def strategies(self) -> list[str]:
        """Names of the strategies in the order of the study."""
        return list(self.document["strategies"])

    @property
    def references(self) -> list[str]:
        """Strategies that are told the origins: references, not candidates."""
        settings = self.document["strategies"]
        return [name for name in settings if settings[name].get("kind") == REFERENCE_KIND]

    @property
    def swept(self) -> list[str]:
        """Dotted names of the swept keys: the columns that stand before `strategy`."""
        columns = list(self.summary.columns)
        return columns[: columns.index("strategy")]
