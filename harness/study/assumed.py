"""The scene as a strategy is told it: the study's, with the strategy's `assumes` laid over it."""

from __future__ import annotations

import sys
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from filters.models.over_range import OVER_RANGE
from filters.models.record import Record
from filters.models.sensor.own import FOLDER, OwnSensor
from filters.models.sensor.sensor import Sensor
from harness.study.keys import (
    ASSUMABLE,
    FACTOR,
    Choice,
    Node,
    Table,
    is_numeric,
    laid_over,
    tables_of,
)
from harness.study.mistakes import Finding, Findings, KeyPath, value_text
from harness.study.names import nearest
from harness.study.schema import Scene
from harness.study.unknown_keys import unknown_key
from harness.study.wording import findings_of
from harness.study.wrong_values import wrong_value

_SCENE = Table(Scene)
TOLD_TO_NO_STRATEGY = ("legs", "unmodelled")


def assumption_findings(assumes: Any, scene: Any, base: KeyPath) -> list[Finding]:
    """Return what is wrong with the keys that a strategy's `assumes` names.

    assumes, scene      as the study states them; anything at all
    base                path of `assumes` in the study
    """
    if not isinstance(assumes, Mapping):
        return []  # the check of the strategy's record says so
    findings: list[Finding] = []
    said = laid_over(scene, assumes)
    for role, stated in assumes.items():
        if role not in ASSUMABLE:
            findings.append(_wrong_role(role, (*base, role)))
        else:
            findings += _table_findings(_SCENE.fields[role], stated, said[role], (*base, role))
    return findings


def assumed_scene(scene: Scene, assumes: Mapping[str, Any], base: KeyPath, folder: Path) -> Scene:
    """Return the scene that a strategy assumes.

    What is not named is as in the scene. Where a kind differs, only keys that the new kind has are
    carried over. A quantity stated in another way than the scene's replaces that. What is true but
    told to no strategy is left out.

    base        path of `assumes` in the study
    folder      of the study's file
    raises      Findings
    """
    if not assumes:
        return scene
    parts = {key: part for key, part in scene if key not in TOLD_TO_NO_STRATEGY}
    for role, stated in assumes.items():
        parts[role] = _overlaid(_SCENE.fields[role], parts[role], stated, (*base, role))
    try:
        assumed = Scene.model_validate(parts, context={FOLDER: folder})
    except ValidationError as error:
        findings = findings_of(error, _SCENE, base)
        raise Findings(_of_factors(finding, assumes, base) for finding in findings) from None
    if not _measure_alike(assumed.sensor, scene.sensor):
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


def _overlaid(
    node: Node, record: Record, stated: Mapping[str, Any], path: KeyPath
) -> dict[str, Any]:
    """Lay what is stated over a record; return the keys of the new one."""
    table = _table_of(node, record, stated)
    if table is None:
        return dict(stated)  # the check says that there is no such kind
    rivals = {rival for key in stated for rival in table.record.other_ways(key)}
    laid = {
        key: value
        for key, value in record
        if value is not None and key in table.fields and key not in rivals
    }
    for key, value in stated.items():
        own, child = getattr(record, key, None), table.fields.get(key)
        if child is None or not isinstance(value, Mapping):
            laid[key] = value
        elif is_numeric(child):
            if own is None:
                raise Findings([_nothing_to_multiply(record, key, (*path, key, "factor"))])
            laid[key] = _multiplied(key, own, value["factor"])
        else:
            inner = (*path, key)
            laid[key] = (
                _overlaid(child, own, value, inner) if isinstance(own, Record) else dict(value)
            )
    return laid


def _table_of(node: Node, record: Record, stated: Mapping[str, Any]) -> Table | None:
    """Return the table of the kind that is stated, or else the record's own."""
    if not isinstance(node, Choice):
        return node if isinstance(node, Table) else None
    table = node.chosen({node.tag: stated.get(str(node.tag), getattr(record, str(node.tag)))})
    return table if isinstance(table, Table) else None


def _multiplied(key: str, value: Any, factor: float) -> Any:
    """Multiply a number, each of a list, or the values of a table against range."""
    if key.endswith(OVER_RANGE):
        return tuple((place, entry * factor) for place, entry in value)
    if isinstance(value, tuple):
        return tuple(_multiplied(key, entry, factor) for entry in value)
    return value * factor


def _of_factors(finding: Finding, assumes: Mapping[str, Any], base: KeyPath) -> Finding:
    """Lay a finding on a product at the factor that made it."""
    inner = finding.path[len(base) :]
    stated: Any = assumes
    for depth, key in enumerate(inner, start=1):
        stated = stated.get(key) if isinstance(stated, Mapping) else None
        if isinstance(stated, Mapping) and set(stated) == {"factor"}:
            is_plain = _is_plain(finding.value)
            product = f"makes it {value_text(finding.value)}, which " if is_plain else ""
            place = (*base, *inner[:depth], "factor")
            return Finding(place, product + finding.rule, finding.remedy, stated["factor"])
    return finding


def _is_plain(value: Any) -> bool:
    return isinstance(value, int | float | tuple)


def _measure_alike(sensor: Sensor, other: Sensor) -> bool:
    """Whether two sensors measure the same; one of the user's own is known by its units only."""
    if isinstance(sensor, OwnSensor) or isinstance(other, OwnSensor):
        return sensor.measured_units() == other.measured_units()
    return type(sensor).components == type(other).components and sensor.axes == other.axes


def _nothing_to_multiply(record: Any, key: str, path: KeyPath) -> Finding:
    stated = [way for way in type(record).other_ways(key) if getattr(record, way) is not None]
    remedy = f"multiply {stated[0]}, which it states" if stated else f"give {key} itself"
    return Finding(path, f"has nothing to multiply: the scene states no {key}", remedy)


def _wrong_role(role: Any, path: KeyPath) -> Finding:
    if role in TOLD_TO_NO_STRATEGY:
        return Finding(
            path,
            "is told to no strategy",
            f"state it as scene.{role}, which is for the truth alone",
        )
    if role in _SCENE.fields:
        return Finding(
            path, "is the same for every strategy", "a strategy may assume target and sensor only"
        )
    places = [
        place
        for place in ASSUMABLE
        if any(role in table.fields for table in tables_of(_SCENE.fields[place], None))
    ]
    alike = nearest(str(role), ASSUMABLE)
    if places:
        return Finding(path, "is unknown here", f"write assumes.{places[0]}.{role}")
    meant = f"did you mean {alike}?" if alike else f"assume {' or '.join(ASSUMABLE)}"
    return Finding(path, "is unknown", meant)


def _table_findings(node: Node, stated: Any, said: Any, path: KeyPath) -> list[Finding]:
    """Check the keys of a table of assumptions.

    said        the same table laid over the scene's
    """
    if not isinstance(stated, Mapping):
        return [Finding(path, "must be a table", f"name its keys: {path[-1]}.KEY = value")]
    tables = tables_of(node, said)
    home = node if isinstance(node, Choice) else None
    findings = []
    for key, value in stated.items():
        nodes = [table.fields[key] for table in tables if key in table.fields]
        place = (*path, key)
        if not nodes:
            findings.append(Finding(place, *unknown_key(str(key), tables, home)))
        elif isinstance(nodes[0], Table | Choice) and set(_keys_of(value)) != {"factor"}:
            findings += _table_findings(nodes[0], value, said[key], place)
        elif isinstance(value, Mapping):
            findings += _factor_findings(nodes[0], value, place)
    return findings  # the check of the assumed scene sees to values


def _keys_of(value: Any) -> Iterable[Any]:
    return value if isinstance(value, Mapping) else ()


def _factor_findings(node: Node, stated: Mapping[str, Any], path: KeyPath) -> list[Finding]:
    wanted = "give a value, or { factor = x } times the scene's"
    if set(stated) != {"factor"}:
        wrong = next((name for name in stated if name != "factor"), None)
        return [Finding(path if wrong is None else (*path, wrong), "is no factor", wanted)]
    if not is_numeric(node):
        return [Finding((*path, "factor"), "multiplies what is no number", "give a value instead")]
    factor = stated["factor"]
    is_number = isinstance(factor, int | float) and not isinstance(factor, bool)
    if not is_number or not abs(factor) <= sys.float_info.max:
        return [Finding((*path, "factor"), *wrong_value("factor", FACTOR, factor))]
    return []
