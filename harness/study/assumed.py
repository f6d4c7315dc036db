"""The scene as a strategy is told it: the study's, with the strategy's `assumes` laid over it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pydantic import ValidationError

from filters.models.sensor.sensor import Sensor
from harness.study.keys import ASSUMABLE, FACTOR, Choice, Table, assumable_tables, is_numeric
from harness.study.mistakes import Finding, Findings, KeyPath, value_text
from harness.study.names import nearest
from harness.study.schema import Scene
from harness.study.unknown_keys import unknown_key
from harness.study.wording import findings_of
from harness.study.wrong_values import wrong_value

_SCENE = Table(Scene)


def assumption_findings(assumes: Any, scene: Any, base: KeyPath) -> list[Finding]:
    """Return what is wrong with the keys that a strategy's `assumes` names.

    assumes, scene      as the study states them; anything at all
    base                path of `assumes` in the study
    """
    if not isinstance(assumes, Mapping):
        return []  # the check of the strategy's record says so
    findings: list[Finding] = []
    for role, stated in assumes.items():
        if role not in ASSUMABLE:
            findings.append(_wrong_role(role, (*base, role)))
        elif not isinstance(stated, Mapping):
            remedy = f"name its keys: {role}.KEY = value"
            findings.append(Finding((*base, role), "must be a table", remedy))
        else:
            tables = assumable_tables(role, assumes, scene)
            for key, value in stated.items():
                findings += _key_findings(key, value, tables, (*base, role, key))
    return findings


def assumed_scene(scene: Scene, assumes: Mapping[str, Any], base: KeyPath) -> Scene:
    """Return the scene that a strategy assumes.

    What is not named is as in the scene. Where the kind of target or sensor differs, only keys
    that the new kind has are carried over. A quantity stated in another way than the scene's
    replaces that.

    base        path of `assumes` in the study
    raises      Findings
    """
    if not assumes:
        return scene
    parts: dict[str, Any] = dict(scene)
    for role, stated in assumes.items():
        parts[role] = _overlaid(parts[role], stated, role, base)
    try:
        assumed = Scene.model_validate(parts)
    except ValidationError as error:
        findings = findings_of(error, _SCENE, base)
        raise Findings(_of_factors(finding, assumes, base) for finding in findings) from None
    if _measured(assumed.sensor) != _measured(scene.sensor):
        raise Findings(
            [
                Finding(
                    (*base, "sensor"),
                    "measures something else than the scene's sensor",
                    "the detections are the scene's: keep its kind and its number of axes",
                )
            ]
        )
    return assumed


def _overlaid(record: Any, stated: Mapping[str, Any], role: str, base: KeyPath) -> dict[str, Any]:
    choice = _SCENE.fields[role]
    assert isinstance(choice, Choice)
    kind = stated.get(str(choice.tag), getattr(record, str(choice.tag)))
    table = choice.options.get(kind) if isinstance(kind, str) else None
    if not isinstance(table, Table):
        return dict(stated)  # the check says that there is no such kind
    laid = {key: value for key, value in record if value is not None and key in table.fields}
    for key in stated:
        for rival in table.record.other_ways(key):
            laid.pop(rival, None)
    for key, value in stated.items():
        laid[key] = value
        if isinstance(value, Mapping):
            own = getattr(record, key, None)
            if own is None:
                raise Findings([_nothing_to_multiply(record, key, (*base, role, key, "factor"))])
            laid[key] = _multiplied(own, value["factor"])
    return laid


def _multiplied(value: Any, factor: float) -> Any:
    if isinstance(value, tuple):
        return tuple(_multiplied(entry, factor) for entry in value)
    return value * factor


def _of_factors(finding: Finding, assumes: Mapping[str, Any], base: KeyPath) -> Finding:
    """Lay a finding on a product at the factor that made it."""
    role, key = finding.path[len(base)], finding.path[len(base) + 1]
    stated = assumes.get(str(role), {}).get(key)
    if not isinstance(stated, Mapping):
        return finding
    product = f"makes it {value_text(finding.value)}, which " if _is_plain(finding.value) else ""
    return Finding(
        (*base, role, key, "factor"), product + finding.rule, finding.remedy, stated["factor"]
    )


def _is_plain(value: Any) -> bool:
    return isinstance(value, int | float | tuple)


def _measured(sensor: Sensor) -> tuple[list[str], int]:
    """What a measurement consists of, by the keys of its region, and how many numbers it has."""
    keys = [key for key in type(sensor).model_fields if key.startswith("region_")]
    return keys, sensor.measurement_size


def _nothing_to_multiply(record: Any, key: str, path: KeyPath) -> Finding:
    stated = [way for way in type(record).other_ways(key) if getattr(record, way) is not None]
    remedy = f"multiply {stated[0]}, which it states" if stated else f"give {key} itself"
    return Finding(path, f"has nothing to multiply: the scene states no {key}", remedy)


def _wrong_role(role: Any, path: KeyPath) -> Finding:
    if role in _SCENE.fields:
        return Finding(
            path, "is the same for every strategy", "a strategy may assume target and sensor only"
        )
    places = [
        place
        for place in ASSUMABLE
        for table in assumable_tables(place, {}, {})
        if role in table.fields
    ]
    alike = nearest(str(role), ASSUMABLE)
    if places:
        return Finding(path, "is unknown here", f"write assumes.{places[0]}.{role}")
    meant = f"did you mean {alike}?" if alike else f"assume {' or '.join(ASSUMABLE)}"
    return Finding(path, "is unknown", meant)


def _key_findings(key: Any, value: Any, tables: list[Table], path: KeyPath) -> list[Finding]:
    nodes = [table.fields[key] for table in tables if key in table.fields]
    if not nodes:
        choice = _SCENE.fields[str(path[-2])]
        home = choice if isinstance(choice, Choice) else None
        return [Finding(path, *unknown_key(str(key), tables, home))]
    if not isinstance(value, Mapping):
        return []  # the check of the assumed scene sees to values
    wanted = "give a value, or { factor = x } times the scene's"
    if set(value) != {"factor"}:
        wrong = next((name for name in value if name != "factor"), None)
        return [Finding(path if wrong is None else (*path, wrong), "is no factor", wanted)]
    if not is_numeric(nodes[0]):
        return [Finding((*path, "factor"), "multiplies what is no number", "give a value instead")]
    factor = value["factor"]
    is_number = isinstance(factor, int | float) and not isinstance(factor, bool)
    if not is_number or not abs(factor) < float("inf"):
        return [Finding((*path, "factor"), *wrong_value("factor", FACTOR, factor))]
    return []
