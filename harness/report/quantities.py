"""What the metrics of a summary are called, their units, and how they are read."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass, replace

from pandas.api.types import is_bool_dtype, is_numeric_dtype

from harness.evidence.results import Results


@dataclass(frozen=True)
class Quantity:
    """How a metric is shown.

    scale     what its values are multiplied by to be in the unit
    rate      whether it is a share of something, which belongs on a logarithmic axis
    held      whether it is over trials that held track only
    whole     whether it is a count
    expected  its value for an honest strategy, where there is one
    confident_below  whether over-confidence makes it smaller than that, not larger
    """

    name: str
    unit: str = ""
    scale: float = 1.0
    rate: bool = False
    held: bool = False
    whole: bool = False
    expected: float | None = None
    confident_below: bool = False

    @property
    def expected_shown(self) -> float | None:
        """The expected value in the unit."""
        return None if self.expected is None else self.scale * self.expected

    @property
    def head(self) -> str:
        """Name with the unit in brackets."""
        return head(self.name, self.unit)


def head(name: str, unit: str) -> str:
    """A name with its unit in brackets, if it has one."""
    return f"{name} [{unit}]" if unit else name


METRICS = {
    "track_loss_rate": Quantity("track loss", "%", 100.0, rate=True),
    "rmse_position": Quantity("position RMSE", "m", held=True),
    "rmse_velocity": Quantity("velocity RMSE", "m/s", held=True),
    "anees": Quantity("ANEES", held=True, expected=1.0),
    "gospa": Quantity("GOSPA", "m"),
    "nees_inside": Quantity("scans with NEES inside its bounds", "%", 100.0, held=True),
    "rmse_position_all": Quantity("position RMSE of all trials", "m"),
    "effective_trials": Quantity("trials that carry the RMSE", held=True),
    "anis": Quantity("ANIS"),
    "no_estimate": Quantity("scans without an estimate", "%", 100.0, rate=True),
    "gospa_localisation": Quantity("GOSPA, localisation part"),
    "gospa_missed": Quantity("GOSPA, missed part"),
    "gospa_false": Quantity("GOSPA, false part"),
    "hypotheses_per_scan": Quantity("hypotheses a scan"),
    "us_per_scan": Quantity("time a scan", "us"),
    "outside": Quantity("scans with the target outside", "%", 100.0, rate=True),
    "impossible_scans": Quantity("impossible scans"),
    "lost": Quantity("lost trials", whole=True),
    "existence_error": Quantity("squared error of existence"),
    "existence_on": Quantity("existence on target"),
    "existence_off": Quantity("existence off target"),
    "log_score": Quantity("log score", "nats", held=True),
    "region_level": Quantity("mean region level", held=True, expected=0.5),
    "central_level": Quantity("mean central level", held=True, expected=0.5),
    "posterior_gap_ise": Quantity("posterior gap, squared error", "%", 100.0, rate=True),
    "posterior_gap_kl": Quantity("posterior gap, divergence", "nats", held=True),
    "failed": Quantity("failed trials", whole=True),
    "trials": Quantity("trials", whole=True),
}


def metric_names(results: Results) -> list[str]:
    """Metrics that the summary holds: its columns of numbers behind `strategy`, bounds left out."""
    columns = list(results.summary.columns)
    behind = columns[columns.index("strategy") + 1 :]
    return [
        column
        for column in behind
        if not column.endswith(("_low", "_high")) and _holds_numbers(results, column)
    ]


def metric_quantity(results: Results, metric: str) -> Quantity:
    """How a metric of the summary is shown.

    raises  ValueError: the summary has no such metric
    """
    names = metric_names(results)
    if metric not in names:
        raise ValueError(
            f"the results hold no metric {metric!r}; {nearest_names(metric, names, 'metrics')}"
        )
    quantity = METRICS.get(metric) or Quantity(metric.replace("_", " "))
    if metric.startswith("coverage_"):
        level = metric.removeprefix("coverage_")
        expected = float(level) / 100.0
        name = f"coverage of {level} % regions"
        return Quantity(name, "%", 100.0, held=True, expected=expected, confident_below=True)
    if metric.startswith("gospa_"):
        order = float(results.document.get("gospa", {}).get("order", 2))
        return replace(quantity, unit="m" if order == 1 else f"m{order:g}")
    return quantity


def nearest_names(word: str, names: Iterable[str], kind: str) -> str:
    """The remedy for a wrong name: the names close to it, or all there are."""
    names = list(names)
    holding = [name for name in names if word in name]
    close = holding[:3] or difflib.get_close_matches(word, names, n=3)
    if close:
        return f"did you mean {' or '.join(close)}?"
    return f"the {kind} are {', '.join(names)}" if names else f"there are no {kind}"


def _holds_numbers(results: Results, column: str) -> bool:
    values = results.summary[column]
    if is_bool_dtype(values):
        return False
    return is_numeric_dtype(values) or bool(values.isna().all())
