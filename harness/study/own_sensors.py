"""Sensors of the user's own that a study names: whether their files are there, and work."""

from __future__ import annotations

from collections.abc import Callable, Iterator

from filters.models.sensor import OwnSensor
from filters.models.sensor.own_file import OwnFileError
from harness.study.mistakes import Finding, KeyPath
from harness.study.schema import Scene
from harness.study.study import Study, study_error


def own_sensors(study: Study) -> list[str]:
    """Return what a study names, FILE.py:NAME each."""
    return list(dict.fromkeys(sensor.kind for _, _, sensor in _named(study)))


def find_own_files(study: Study) -> None:
    """Check that the files are there; nothing is imported.

    raises      StudyError
    """
    _check(study, lambda scene, sensor: sensor.code_digest())


def try_own_sensors(study: Study) -> None:
    """Import the files and try their functions where the target starts.

    raises      StudyError: a file is missing or fails to import; a function is not there, fails to
                compile, raises, or gives what is no number
    """
    _check(
        study,
        lambda scene, sensor: sensor.try_out(scene.scan_times(), scene.target.start_mean()),
    )


def _named(study: Study) -> Iterator[tuple[KeyPath, Scene, OwnSensor]]:
    """Yield where each own sensor is named, in which scene, and the sensor."""
    for condition in study.conditions:
        truth = condition.rules.scene
        scenes: list[tuple[KeyPath, Scene]] = [(("scene",), truth)]
        scenes += [
            (("strategies", case.name, "assumes"), case.assumed)
            for case in condition.cases
            if case.assumed is not truth
        ]
        for place, scene in scenes:
            if isinstance(scene.sensor, OwnSensor):
                yield (*place, "sensor", "kind"), scene, scene.sensor


def _check(study: Study, check: Callable[[Scene, OwnSensor], object]) -> None:
    findings: dict[tuple[str, str], Finding] = {}
    seen: set[tuple[object, ...]] = set()
    for path, scene, sensor in _named(study):
        own = (sensor.kind, sensor.parameters, sensor.measurement_units, scene.target.state_size)
        if own in seen:
            continue
        seen.add(own)
        try:
            check(scene, sensor)
        except OwnFileError as wrong:
            finding = Finding(path, wrong.rule, wrong.remedy, sensor.kind)
            findings.setdefault((sensor.kind, wrong.rule), finding)
    if findings:
        raise study_error(study, findings.values())
