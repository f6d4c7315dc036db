"""What a study file may say; every record is frozen and checked once."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import TYPE_CHECKING, Annotated, Any, Literal, Self, Union, get_args

import numpy as np
from pydantic import Discriminator, Field, Tag, model_validator

from filters.models.motion import MOTIONS
from filters.models.motion.target import Target
from filters.models.record import BadValue, Count, Positive, Real, Record, Ways, within
from filters.models.sensor import SENSORS, OwnSensor
from filters.models.sensor.own import OWN_KIND
from filters.models.sensor.sensor import Sensor
from filters.strategies import STRATEGIES
from filters.strategies.strategy import Strategy
from harness.study.legs import AnyLeg, check_legs
from harness.study.names import nearest
from harness.study.unmodelled import Unmodelled

OWN = "FILE.py:NAME"  # stands for all sensors of a user's own among the kinds


class KindOrFile:
    """Tells sensors apart by their kind; FILE.py:NAME is one of the user's own."""

    key = "kind"
    __name__ = "kind_or_file"  # pydantic asks for it

    def __call__(self, raw: Any) -> str | None:
        """Return the kind that is said, in text."""
        said = raw.get(self.key) if isinstance(raw, Mapping) else getattr(raw, self.key, None)
        if isinstance(said, str):
            return OWN if re.match(OWN_KIND, said) else said
        return None if said is None else repr(said)


SENSOR_KINDS: dict[str, type[Sensor]] = {
    **{get_args(record.model_fields["kind"].annotation)[0]: record for record in SENSORS},
    OWN: OwnSensor,
}

if TYPE_CHECKING:
    AnyTarget = Target
    AnySensor = Sensor
    AnyStrategy = Strategy
else:  # unions over whatever the catalogues hold
    AnyTarget = Annotated[Union[MOTIONS], Field(discriminator="motion")]  # noqa: UP007
    _tagged = tuple(Annotated[record, Tag(kind)] for kind, record in SENSOR_KINDS.items())
    AnySensor = Annotated[Union[_tagged], Discriminator(KindOrFile())]  # noqa: UP007
    AnyStrategy = Annotated[Union[STRATEGIES], Field(discriminator="kind")]  # noqa: UP007

Seed = Annotated[int, Field(strict=True, ge=0, lt=2**63)]
Trials = Annotated[int, Field(strict=True, ge=1, le=100_000_000)]
MOST_SCANS = 100_000
ScanCount = Annotated[int, Field(strict=True, ge=1, le=MOST_SCANS)]
Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Order = Annotated[float, Field(strict=True, ge=1.0, le=10.0, allow_inf_nan=False)]
Text = Annotated[str, Field(strict=True)]
# No dots and no quotes, so that a dotted key names one place.
StrategyName = Annotated[str, Field(strict=True, pattern=r"^[A-Za-z0-9][A-Za-z0-9 _+-]{0,59}$")]


class Scene(Record):
    """Target, sensor and scans; a strategy's assumptions mirror it."""

    scans: ScanCount | None = None
    """Number of scans of a trial."""
    scan_interval_s: Positive | None = None
    """Time from one scan to the next, s."""
    scan_times_s: Annotated[tuple[Real, ...], Field(min_length=1, max_length=MOST_SCANS)] | None = (
        None
    )
    """Time of each scan, s, in place of their number and interval; the prior holds at the first."""
    target: AnyTarget
    """How the target starts and moves."""
    sensor: AnySensor
    """What is measured of the target, and the clutter."""
    legs: Annotated[tuple[AnyLeg, ...], Field(min_length=1)] | None = None
    """Path of the true target, the same in every trial: legs one after the other from the start's
    mean position and velocity, then straight on. Strategies are told the target's motion."""
    unmodelled: Unmodelled = Unmodelled()
    """What is true of the scene but told to no strategy."""

    @classmethod
    def alternatives(cls) -> tuple[Ways, ...]:
        """The scans are stated in one of two ways."""
        return (*super().alternatives(), (("scans", "scan_interval_s"), ("scan_times_s",)))

    @property
    def scan_count(self) -> int:
        """Number of scans of a trial."""
        return len(self.scan_times_s or ()) or self.scans or 0

    def scan_times(self) -> np.ndarray:
        """When each scan is, (scans,) s."""
        if self.scan_times_s is not None:
            return np.array(self.scan_times_s, float)
        assert self.scans is not None
        assert self.scan_interval_s is not None
        return self.scan_interval_s * np.arange(self.scans)

    def scan_intervals(self) -> np.ndarray:
        """Seconds before each scan, (scans,); the first is zero."""
        if self.scan_times_s is not None:
            return np.diff(self.scan_times(), prepend=self.scan_times_s[0])
        intervals = np.full(self.scan_count, self.scan_interval_s)
        intervals[0] = 0.0
        return intervals

    def with_first_scans(self, count: int) -> Scene:
        """Return the scene with only its first scans."""
        if self.scan_times_s is not None:
            return self.model_copy(update={"scan_times_s": self.scan_times_s[:count]})
        return self.model_copy(update={"scans": count})

    @model_validator(mode="after")
    def _scans_are_stated(self) -> Self:
        times = self.scan_times_s
        if times is None:
            for key in ("scans", "scan_interval_s"):
                if getattr(self, key) is None:
                    raise BadValue(
                        key,
                        "is missing",
                        "give it, or scan_times_s in place of scans and scan_interval_s",
                    )
            return self
        for place in range(1, len(times)):
            if not times[place - 1] < times[place]:
                raise BadValue(
                    f"scan_times_s[{place}]", "must be later than the one before", "order the times"
                )
        return self

    @model_validator(mode="after")
    def _target_and_sensor_share_their_axes(self) -> Self:
        target: Target = self.target
        sensor: Sensor = self.sensor
        if target.axes != sensor.axes:
            raise BadValue(
                "target.start_position_m",
                f"has {target.axes} entries but the sensor works along {sensor.axes} axes",
                "give the target and the sensor's place or region the same number",
            )
        return self

    @model_validator(mode="after")
    def _what_is_stated_fits_the_sensor(self) -> Self:
        with within("sensor"):
            self.sensor.check_times(self.scan_times())
        with within("unmodelled"):
            self.unmodelled.check(self.sensor.measurement_size)
        return self

    @model_validator(mode="after")
    def _legs_can_be_flown(self) -> Self:
        if self.legs is not None:
            check_legs(self.legs, np.array(self.target.start_velocity_m_per_s, float))
        return self


class TrackLoss(Record):
    """When a track counts as lost: position error above a limit for some scans in a row."""

    error_above_m: Positive | None = None
    """Limit of the position error, m."""
    error_above_sigma: Positive | None = None
    """Limit of the position error in known association's position spread, in place of metres."""
    for_scans: Count
    """So many scans in a row above the limit are a loss."""

    @model_validator(mode="after")
    def _one_limit(self) -> Self:
        if self.error_above_m is None and self.error_above_sigma is None:
            raise BadValue("error_above_m", "is missing", "give it or error_above_sigma")
        if self.error_above_m is not None and self.error_above_sigma is not None:
            raise BadValue(
                "error_above_sigma", "stands beside error_above_m", "keep one of the two"
            )
        return self


class Gospa(Record):
    """Settings of the GOSPA metric (alpha = 2)."""

    cutoff_m: Annotated[Positive, Field(le=1e12)]
    """Largest position error that still counts as a localisation, m."""
    order: Order = 2
    """The power p of the errors, 1 to 10."""


class Scoring(Record):
    """Which scans count."""

    from_scan: Count | None = None
    """First scan of the scoring window, from 1; by default the one after the first tenth."""


Level = Annotated[float, Field(strict=True, allow_inf_nan=False, gt=0.0, lt=1.0)]
Samples = Annotated[int, Field(strict=True, ge=2, le=1_000_000)]


class Calibration(Record):
    """Whether whole posteriors mean what they say; the table's presence asks for it."""

    levels: Annotated[tuple[Level, ...], Field(min_length=1, max_length=20)] = (0.5, 0.9, 0.95)
    """Levels of highest-density regions of position and velocity whose coverage is counted."""
    samples: Samples = 200
    """Draws of each posterior of several components, to find the region that the truth lies on."""

    @model_validator(mode="after")
    def _levels_differ(self) -> Self:
        if len(set(self.levels)) < len(self.levels):
            raise BadValue("levels", "names a level twice", "give each level once")
        return self


class PosteriorGap(Record):
    """How far posteriors are from a reference's; the table's presence asks for it."""

    reference: StrategyName
    """Name of the strategy whose posterior the others are compared with, best an exact one."""
    samples: Samples = 200
    """Draws of each posterior of the reference, for the Kullback-Leibler divergence."""


class Range(Record):
    """Swept values from one end to the other."""

    from_: Number = Field(alias="from")
    """First value."""
    to: Number
    """Last value."""
    count: Annotated[int, Field(strict=True, ge=2, le=10_000)]
    """How many values, both ends counted."""
    spacing: Literal["linear", "logarithmic"] = "linear"
    """Equal differences or equal ratios."""

    @model_validator(mode="after")
    def _ends_differ(self) -> Self:
        if self.from_ == self.to:
            raise BadValue("to", "must differ from `from`", "give two ends, or a list of one value")
        if self.spacing == "logarithmic" and not (self.from_ > 0 and self.to > 0):
            raise BadValue("spacing", "needs ends above 0", "give such ends or linear spacing")
        return self

    def values(self) -> list[float]:
        """The swept values; the ends are exact."""
        space = np.geomspace if self.spacing == "logarithmic" else np.linspace
        with np.errstate(all="ignore"):  # ends near the largest number; the values are checked
            return [float(value) for value in space(self.from_, self.to, self.count)]


def _values_or_range(swept: Any) -> str | None:
    if isinstance(swept, list | tuple):
        return "values"
    return "range" if isinstance(swept, dict | Range) else None


Swept = Annotated[
    Annotated[list[Any], Field(min_length=1), Tag("values")] | Annotated[Range, Tag("range")],
    Discriminator(_values_or_range),
]
Sweep = dict[str, Swept]
SweepInStep = Annotated[Sweep, Field(min_length=1)]


class Rules(Record):
    """What a condition fixes: the scene, the strategies and how they are scored."""

    scene: Scene
    """Target, sensor and scans."""
    strategies: Annotated[dict[StrategyName, AnyStrategy], Field(min_length=1)]
    """Ways to follow the target; a table's name is the strategy's name in every output."""
    track_loss: TrackLoss
    """When a track counts as lost."""
    gospa: Gospa
    """Settings of the GOSPA metric."""
    scoring: Scoring = Scoring()
    """Which scans count towards the metrics."""
    calibration: Calibration | None = None
    """Asks whether whole posteriors mean what they say: coverage, transforms, log score."""
    posterior_gap: PosteriorGap | None = None
    """Asks how far posteriors are from a reference strategy's."""

    def first_scored_scan(self) -> int:
        """Index of the first scan that counts, from 0."""
        if self.scoring.from_scan is not None:
            return self.scoring.from_scan - 1
        return self.scene.scan_count // 10

    @model_validator(mode="after")
    def _some_scans_count(self) -> Self:
        if self.first_scored_scan() >= self.scene.scan_count:
            raise BadValue(
                "scoring.from_scan",
                f"must not exceed the {self.scene.scan_count} scans of the scene",
                "give an earlier scan or more scans",
            )
        return self

    @model_validator(mode="after")
    def _the_gap_has_a_reference(self) -> Self:
        if self.posterior_gap is None:
            return self
        name, key = self.posterior_gap.reference, "posterior_gap.reference"
        strategy = self.strategies.get(name)
        if strategy is None:
            alike = nearest(name, self.strategies)
            meant = f"did you mean {alike}? " if alike else ""
            raise BadValue(
                key,
                f"names {name!r}, which is no strategy of the study",
                f"{meant}there are {', '.join(self.strategies)}",
            )
        if type(strategy).is_told_origins:
            raise BadValue(
                key,
                f"names {name!r}, which is told the origins: its posterior is not the scans'",
                "name a strategy that sees what the others see, best an unreduced-mixture",
            )
        if not type(strategy).has_posteriors:
            raise BadValue(
                key,
                f"names {name!r}, which has an estimate but no posterior",
                "name a strategy of Gaussian components or particles, best an unreduced-mixture",
            )
        return self


class StudyDocument(Rules):
    """A whole study file."""

    title: Annotated[Text, Field(min_length=1)]
    """What the study is about, in a few words."""
    question: Text = ""
    """The question that the study shall answer."""
    seed: Seed
    """Start of all random numbers."""
    trials: Trials
    """Number of trials of each condition."""
    sweep: Sweep = Field(default_factory=dict)
    """A grid: each key a quoted dotted name such as "scene.sensor.detection_probability", with a
    list of values or a range; every combination is a condition."""
    sweep_together: list[SweepInStep] = Field(default_factory=list)
    """Groups of keys that move in step: in a group all keys have equally many values."""
