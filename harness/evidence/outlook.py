"""What a study would do, from a few scenes of each condition and known association: no trials."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import gammaln
from scipy.stats import chi2

from filters.models.contract import Models
from filters.random_numbers import numbers_of
from filters.strategies.gaussian import GatedStrategy, KnownAssociation
from filters.strategies.unreduced import UnreducedMixture
from filters.track import Tracks
from filters.unreduced import components_unreduced, most_components
from harness.evidence.plans import KeyedCondition, keyed_conditions
from harness.scene.batch import SceneBatch
from harness.scene.models import models_of
from harness.scene.simulate import draw_scenes
from harness.study.own_sensors import own_sensors
from harness.study.schema import Scene
from harness.study.study import Study
from harness.trials.score import score_span
from harness.trials.task import assumptions_of

SCENES = 50
_MOST_CONDITIONS = 200
_SCENES_FOR_GATES = 3
_MOST_OUTSIDE = 0.01
_MUCH_OF_THE_ROOM = 0.1  # expected components above it make a trial without room likely


@dataclass(frozen=True)
class Unreduced:
    """How large unreduced mixtures grow in a condition, and how large they may."""

    expected: float  # components after the last scan: product over scans of 1 + mean detections
    refused: float  # share of the scenes drawn that need more than there is room for
    most: float  # components for which there is room


@dataclass(frozen=True)
class ConditionOutlook:
    """What a few scenes of a condition show."""

    label: str
    detections_per_scan: float
    own_detections_per_scan: float
    clutter_in_unit_gate: float  # mean of intensity * |S|^(1/2), S the innovation covariance
    measurement_size: int
    outside: float  # share of scans with the target outside the region
    reference_lost: float  # share of scenes in which known association itself is lost
    unreduced: Unreduced

    def false_detections_in_gate(self, gate_probability: float) -> float:
        """Expected false detections in a gate of that probability; infinite without a gate."""
        m = self.measurement_size
        log_unit_ball = m / 2 * math.log(math.pi) - gammaln(m / 2 + 1)
        radius_square = chi2.ppf(gate_probability, m)
        return float(self.clutter_in_unit_gate * np.exp(log_unit_ball) * radius_square ** (m / 2))


@dataclass(frozen=True)
class Outlook:
    """What a study would do; of many conditions, some spread evenly are looked at.

    conditions  none where the sensor is one of the user's own: its file is not imported
    """

    study: Study
    conditions: tuple[ConditionOutlook, ...]
    gate_probabilities: tuple[float, ...]

    @property
    def warnings(self) -> list[str]:
        """What an engineer should know before running."""
        found = []
        far = [one for one in self.conditions if one.outside > _MOST_OUTSIDE]
        if far:
            worst = max(far, key=lambda one: one.outside)
            found.append(
                f"targets are outside the sensor's region in up to {worst.outside:.1%} of scans "
                f"({worst.label}), above 1 %; they are not detected there: widen the region"
            )
        for condition in self.study.conditions:
            rules = condition.rules
            if rules.track_loss.for_scans > rules.scene.scan_count:
                found.append(
                    f"track_loss.for_scans is {rules.track_loss.for_scans} but a trial has "
                    f"{rules.scene.scan_count} scans: no track can be lost"
                )
                break
        lost = [one for one in self.conditions if one.reference_lost > 0]
        if lost:
            worst = max(lost, key=lambda one: one.reference_lost)
            found.append(
                f"known association itself is lost in up to {worst.reference_lost:.1%} of scenes "
                f"({worst.label}): raise the limit of track_loss, or it measures the sensor"
            )
        return found + self._too_long_unreduced()

    def _too_long_unreduced(self) -> list[str]:
        strategies = self.study.record.strategies.items()
        names = [name for name, one in strategies if isinstance(one, UnreducedMixture)]
        if not names or not self.conditions:
            return []
        worst = max(
            self.conditions, key=lambda one: (one.unreduced.refused, one.unreduced.expected)
        )
        size = worst.unreduced
        if size.refused == 0 and size.expected < _MUCH_OF_THE_ROOM * size.most:
            return []
        return [
            f"{names[0]} would keep {size.expected:.2g} components by the last scan, as expected "
            f"({worst.label}), and {size.most:.2g} fit; {size.refused:.0%} of these scenes need "
            "more, and one such trial stops its task: take fewer scans or less clutter"
        ]


def look_ahead(study: Study) -> Outlook:
    """Draw a few scenes of each condition and follow them by known association."""
    keyed = keyed_conditions(study)
    step = math.ceil(len(keyed) / _MOST_CONDITIONS)
    probabilities = {
        case.strategy.gate_probability
        for condition in study.conditions
        for case in condition.cases
        if isinstance(case.strategy, GatedStrategy)
    }
    return Outlook(
        study,
        tuple(_look_at(condition, study.seed) for condition in keyed[::step]),
        tuple(sorted(probabilities)),
    )


def _look_at(keyed: KeyedCondition, seed: int) -> ConditionOutlook:
    scene = keyed.condition.rules.scene
    numbers = numbers_of(seed)
    batch = draw_scenes(scene, numbers, 0, SCENES)
    strategy = KnownAssociation(kind="known-association")
    tracks = strategy.run(assumptions_of(scene, scene, batch, numbers), batch.scans, numbers, 0)
    scores = score_span(batch.truth, tracks, tracks, keyed.rules)
    return ConditionOutlook(
        keyed.label,
        len(batch.scans.detections) / batch.scans.origins.size,
        float(np.mean(batch.scans.origins >= 0)),
        _clutter_in_unit_gate(models_of(scene), batch, tracks),
        scene.sensor.measurement_size,
        float(batch.truth.outside.mean()),
        float(np.mean(scores.lost_at >= 0)),
        _unreduced(batch, tracks.means.shape[-1]),
    )


def _unreduced(batch: SceneBatch, n: int) -> Unreduced:
    scans = batch.scans
    most = most_components(n, scans.most_detections)
    mean_detections = np.diff(scans.offsets, axis=1).mean(axis=0)
    with np.errstate(over="ignore"):
        expected = float(np.prod(1.0 + mean_detections))
    return Unreduced(expected, float(np.mean(components_unreduced(scans) > most)), most)


def _clutter_in_unit_gate(models: Models, batch: SceneBatch, tracks: Tracks) -> float:
    """Mean over scans of lambda(zhat) |S|^(1/2), along known association's predictions."""
    intervals = batch.scans.intervals
    found = [
        _intensity_times_spread(
            models, k, tracks.means[trial, k - 1], tracks.covariances[trial, k - 1], intervals[k]
        )
        for trial in range(_SCENES_FOR_GATES)
        for k in range(1, len(intervals))
    ]
    return float(np.mean(found)) if found else math.nan


def _intensity_times_spread(
    models: Models, k: int, mean: np.ndarray, covariance: np.ndarray, interval: float
) -> float:
    motion, sensor = models.motion, models.sensor
    n, m = len(mean), len(sensor.periods)
    site = sensor.sites[min(k, len(sensor.sites) - 1)]
    predicted, transition, disturbance = np.empty(n), np.empty((n, n)), np.empty((n, n))
    motion.transition(motion.parameters, interval, mean, predicted)
    motion.jacobian(motion.parameters, interval, mean, transition)
    motion.process_noise(motion.parameters, interval, mean, disturbance)
    expected, jacobian, noise = np.empty(m), np.empty((m, n)), np.empty((m, m))
    sensor.measure(sensor.parameters, site, predicted, expected)
    sensor.jacobian(sensor.parameters, site, predicted, jacobian)
    sensor.noise(sensor.parameters, site, predicted, noise)
    spread = jacobian @ (transition @ covariance @ transition.T + disturbance) @ jacobian.T + noise
    clutter = models.clutter.intensity(models.clutter.parameters, site, expected)
    return float(clutter * np.sqrt(np.linalg.det(spread)))


def outlook_text(outlook: Outlook) -> str:
    """The outlook in words, for a terminal of 80 columns."""
    study, seen = outlook.study, outlook.conditions
    cases = sum(len(condition.cases) for condition in study.conditions)
    scene = study.conditions[0].rules.scene
    scenes = study.trials * len(study.conditions)
    lines = [study.title, *([study.question] if study.question else []), ""]
    lines += _aligned(
        [
            ("conditions", f"{len(study.conditions):,}{_sweep_words(study)}"),
            ("strategies", ", ".join(study.strategies)),
            ("cases", f"{cases:,}"),
            ("trials", f"{study.trials:,} a condition: {scenes:,} scenes, "
                       f"{cases * study.trials:,} runs of a strategy"),
            ("scans", _scan_words(scene)),
        ]
    )  # fmt: skip
    if not seen:
        names = ", ".join(own_sensors(study))
        words = f"The study names {names}, which is not imported to check it:"
        return "\n".join([*lines, "", words, "what its scenes are like shows when it is run."])
    lines += ["", f"From {SCENES} scenes of each condition" + _which(seen, study) + ":"]
    lines += _aligned(
        [
            ("detections a scan", _span([one.detections_per_scan for one in seen])),
            ("the target's own", _span([one.own_detections_per_scan for one in seen])),
            *(
                (
                    f"false in a gate of {probability:g}",
                    _span([one.false_detections_in_gate(probability) for one in seen]),
                )
                for probability in outlook.gate_probabilities
                if probability < 1.0
            ),
            (
                "target outside the region",
                _span([100 * one.outside for one in seen], " % of scans"),
            ),
        ]
    )
    lines += [f"\nwarning: {warning}" for warning in outlook.warnings]
    return "\n".join(lines)


def _aligned(rows: Sequence[tuple[str, str]]) -> list[str]:
    width = max(len(name) for name, _ in rows)
    return [f"  {name:<{width}}  {value}" for name, value in rows]


def _span(values: Sequence[float], unit: str = "") -> str:
    low, high = f"{min(values):.3g}", f"{max(values):.3g}"
    return f"{low}{unit}" if low == high else f"{low} to {high}{unit}"


def _scan_words(scene: Scene) -> str:
    if scene.scan_interval_s is not None:
        return f"{scene.scan_count:,}, {scene.scan_interval_s:g} s apart"
    times = scene.scan_times()
    return f"{len(times):,}, at stated times from {times[0]:g} to {times[-1]:g} s"


def _sweep_words(study: Study) -> str:
    if not study.swept:
        return ""
    counts = [len(_distinct(study, key)) for key in study.swept]
    words = [f"{key} ({count})" for key, count in zip(study.swept, counts, strict=True)]
    return ": " + ", ".join(words)


def _distinct(study: Study, key: str) -> list[Any]:
    return list(dict.fromkeys(condition.settings[key] for condition in study.conditions))


def _which(seen: Sequence[ConditionOutlook], study: Study) -> str:
    return "" if len(seen) == len(study.conditions) else f" among {len(seen)} spread evenly"
