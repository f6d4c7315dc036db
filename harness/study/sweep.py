"""What a study sweeps: which keys, in which steps, and what is wrong with that."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from pydantic import ValidationError

from harness.study.keys import Leaf, Node, Table
from harness.study.mistakes import ABSENT, Finding, KeyPath, value_at
from harness.study.names import in_another_unit, nearest
from harness.study.schema import Range

MOST_CONDITIONS = 100_000
_NOT_OF_A_CONDITION = ("title", "question", "seed", "trials")


@dataclass(frozen=True)
class SweptKey:
    """A key as the study sweeps it: its dotted name, where that stands, and what it is given."""

    key: str
    place: KeyPath
    given: Any

    @property
    def path(self) -> tuple[str, ...]:
        """Path of the key itself."""
        return tuple(self.key.split("."))

    def place_of(self, step: int) -> KeyPath:
        """Path of a step's value in the study."""
        return (*self.place, step) if isinstance(self.given, list | tuple) else self.place


@dataclass(frozen=True)
class Axis:
    """Keys that move in step, and their values step by step."""

    keys: tuple[SweptKey, ...]
    steps: tuple[tuple[Any, ...], ...]


def swept_groups(document: Mapping[str, Any]) -> list[list[SweptKey]]:
    """Return the swept keys, those that move in step together; whatever form they are in."""
    grid = document.get("sweep")
    groups = [
        [SweptKey(key, ("sweep", key), given)]
        for key, given in (grid.items() if isinstance(grid, Mapping) else ())
        if isinstance(key, str)
    ]
    together = document.get("sweep_together")
    for number, group in enumerate(together if isinstance(together, list | tuple) else ()):
        if isinstance(group, Mapping):
            keys = [
                SweptKey(key, ("sweep_together", number, key), given)
                for key, given in group.items()
                if isinstance(key, str)
            ]
            groups += [keys] if keys else []
    return groups


def key_findings(groups: Iterable[list[SweptKey]], known: Mapping[str, Node]) -> list[Finding]:
    """Return what is wrong with the names of the swept keys.

    known       every key that the study has or could have
    """
    findings: list[Finding] = []
    seen: list[SweptKey] = []
    for swept in itertools.chain.from_iterable(groups):
        wrong = _wrong_key(swept, known) or _swept_before(swept, seen)
        if wrong is not None:
            findings.append(Finding(swept.place, *wrong, ABSENT))
        seen.append(swept)
    return findings


def value_findings(groups: list[list[SweptKey]], known: Mapping[str, Node]) -> list[Finding]:
    """Return what is wrong with the swept values, apart from what their keys say of them.

    Lists and ranges that are none are left to the check of the study's record.
    """
    findings: list[Finding] = []
    conditions = 1
    for group in groups:
        columns = [_values(swept, known.get(swept.key)) for swept in group]
        own = [
            f
            for swept, values in zip(group, columns, strict=True)
            for f in _wrong_values(swept, values)
        ]
        findings += own or _out_of_step(group, columns) or _repeated(group, columns)
        conditions *= max(map(len, columns))
    if conditions > MOST_CONDITIONS:
        rule = f"makes {conditions} conditions with the other sweeps, more than {MOST_CONDITIONS}"
        findings.append(Finding(groups[-1][0].place, rule, "sweep fewer values", ABSENT))
    return findings


def with_first_values(
    document: Mapping[str, Any], groups: Iterable[list[SweptKey]], known: Mapping[str, Node]
) -> tuple[dict[str, Any], list[tuple[SweptKey, Any]]]:
    """Fill in the swept keys that the study leaves out by their first values.

    returns     the document so filled, and what was filled in
    """
    filled, first_values = dict(document), []
    for swept in itertools.chain.from_iterable(groups):
        node = known.get(swept.key)
        first = _first_value(swept, node) if _is_left_out(swept, document) else ABSENT
        if isinstance(node, Leaf) and first is not ABSENT:
            filled = changed(filled, swept.path, first)
            first_values.append((swept, first))
    return filled, first_values


def axes_of(groups: list[list[SweptKey]], known: Mapping[str, Node]) -> tuple[Axis, ...]:
    """Return the axes of a study's sweeps, in its order; the sweeps must have passed the checks."""
    return tuple(
        Axis(
            tuple(group),
            tuple(zip(*(_values(swept, known.get(swept.key)) for swept in group), strict=True)),
        )
        for group in groups
    )


def changed(document: Any, path: tuple[str, ...], value: Any) -> Any:
    """Return the document with another value at a path; what stands beside it is shared."""
    if not path:
        return value
    head, rest = path[0], path[1:]
    if isinstance(document, list | tuple):
        entries = list(document)
        entries[int(head)] = changed(entries[int(head)], rest, value)
        return entries
    table = dict(document) if isinstance(document, Mapping) else {}
    table[head] = changed(table.get(head), rest, value)
    return table


def _values(swept: SweptKey, node: Node | None) -> Sequence[Any]:
    """Return the values that a key is given; none if it is given neither a list nor a range."""
    if isinstance(swept.given, list | tuple):
        return swept.given
    try:
        values: list[Any] = Range.model_validate(swept.given).values()
    except ValidationError:
        return ()
    return [_as_whole(value) for value in values] if _is_whole(node) else values


def _is_left_out(swept: SweptKey, document: Mapping[str, Any]) -> bool:
    """Whether the key is absent, with no value where there should be the tables around it."""
    path = swept.path
    around = [value_at(document, path[:length]) for length in range(1, len(path))]
    is_free = all(table is ABSENT or isinstance(table, Mapping) for table in around)
    return is_free and value_at(document, path) is ABSENT


def _first_value(swept: SweptKey, node: Node | None) -> Any:
    values = _values(swept, node)
    return values[0] if values and _is_scalar(values[0]) else ABSENT


def _is_whole(node: Node | None) -> bool:
    return isinstance(node, Leaf) and node.type is int


def _as_whole(value: float) -> float:
    """Return the whole number that a step of a range is but for rounding."""
    is_finite = abs(value) < float("inf")
    return round(value) if is_finite and abs(value - round(value)) <= 1e-9 * abs(value) else value


def _is_scalar(value: Any) -> bool:
    return isinstance(value, int | float | str) and not isinstance(value, bool)


def _wrong_key(swept: SweptKey, known: Mapping[str, Node]) -> tuple[str, str] | None:
    """Return rule and remedy for a key that cannot be swept."""
    if isinstance(swept.given, Mapping) and not set(swept.given) & set(Table(Range).fields):
        return "is no swept key", 'put the whole key in quotes: "scene.sensor.KEY" = [..., ...]'
    node = known.get(swept.key)
    if isinstance(node, Leaf):
        if swept.path[0] not in _NOT_OF_A_CONDITION:
            return None
        return "is the same for all conditions", "sweep keys of the scene, strategies or scoring"
    if node is not None:
        inside = [key for key in known if key.startswith(f"{swept.key}.")]
        examples = f", such as {inside[0]}" if inside else ""
        return "is no single value", f"sweep one of its keys{examples}"
    return "is no key of the study", _meant(swept, known)


def _meant(swept: SweptKey, known: Mapping[str, Node]) -> str:
    table, _, name = swept.key.rpartition(".")
    here = [key.rpartition(".")[2] for key in known if key.rpartition(".")[0] == table]
    other_unit = in_another_unit(name, here)
    alike = f"{table}.{other_unit}" if other_unit else nearest(swept.key, known)
    return f"did you mean {alike}?" if alike else "name it as in scene.sensor.detection_probability"


def _swept_before(swept: SweptKey, seen: Iterable[SweptKey]) -> tuple[str, str] | None:
    for other in seen:
        if other.key == swept.key:
            return "is swept twice", f"keep one; the other stands in {other.place[0]}"
        shorter, longer = sorted((other.key, swept.key), key=len)
        if longer.startswith(f"{shorter}."):
            return f"and {other.key} sweep the same thing", "keep one of the two"
    return None


def _wrong_values(swept: SweptKey, values: Sequence[Any]) -> list[Finding]:
    if isinstance(swept.given, Mapping):
        return []
    return [
        Finding(
            swept.place_of(step),
            "must be a number or text",
            "sweep the entries of a list by their place, as in scene.target.start_position_m.0"
            if isinstance(value, list | tuple)
            else "give single values",
            value,
            swept.place,
        )
        for step, value in enumerate(values)
        if not _is_scalar(value)
    ]


def _out_of_step(group: list[SweptKey], columns: list[Sequence[Any]]) -> list[Finding]:
    lengths = list(map(len, columns))
    if len(set(lengths)) <= 1 or 0 in lengths:
        return []
    counts = ", ".join(
        f"{swept.key} has {length}" for swept, length in zip(group, lengths, strict=True)
    )
    return [
        Finding(
            group[0].place[:-1], f"must have equally many values: {counts}", "even them out", ABSENT
        )
    ]


def _repeated(group: list[SweptKey], columns: list[Sequence[Any]]) -> list[Finding]:
    """Return the steps that are given before: they would make the same condition twice."""
    findings = []
    seen: set[tuple[Any, ...]] = set()
    for step, values in enumerate(zip(*columns, strict=False)):
        if values in seen:
            swept = group[0]
            where = "" if len(group) == 1 else " with the same values beside it"
            findings.append(
                Finding(
                    swept.place_of(step),
                    f"is swept twice{where}",
                    "remove one",
                    values[0],
                    swept.place,
                )
            )
        seen.add(values)
    return findings
