"""What the checks of the records found, in words for the one who wrote the study."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterable, Mapping
from typing import Any, get_args

from pydantic import ValidationError

from filters.models.record import BadValue
from harness.study.keys import STUDY, Choice, Leaf, Named, Node, Row, Table, node_at, path_of
from harness.study.mistakes import ABSENT, STATED, Finding, KeyPath
from harness.study.names import in_another_unit, nearest, unit_of

Detail = Mapping[str, Any]


def findings_of(error: ValidationError, root: Node, base: KeyPath = ()) -> list[Finding]:
    """Say what a check of a record found.

    root        what was checked
    base        the path at which it stands in the study
    """
    details: list[Detail] = [dict(detail) for detail in error.errors(include_url=False)]
    replaced = _replaced_keys(details, root)
    findings: list[Finding] = []
    for detail in details:
        is_replaced = detail["type"] == "missing" and path_of(detail["loc"], root) in replaced
        if not is_replaced and not _is_shortened(detail, details):
            findings.append(_finding(detail, root, base))
    return _once_a_list(findings)


def unknown_key(key: str, tables: Iterable[Table], home: Choice | None = None) -> tuple[str, str]:
    """Return rule and remedy for a key that the tables at its place do not have.

    home        the choice of kinds that a table was taken from
    """
    known = [name for table in tables for name in table.fields]
    other_unit = in_another_unit(key, known)
    if other_unit is not None:
        unit = unit_of(other_unit)
        return f"is unknown: here this is stated in {unit}", f"write {other_unit}, in {unit}"
    if "." in key:
        return "is unknown", "write the dots of a key outside quotes"
    others = [] if home is None else _kinds_with(key, home)
    alike = nearest(key, known)
    if others:
        only = f"is unknown here: only {home.tag} = {' or '.join(others)} has it"  # type: ignore[union-attr]
        return only, f"choose that, or write {alike}" if alike else "choose that, or remove it"
    if alike is not None:
        return "is unknown", f"did you mean {alike}?"
    elsewhere = _places_of(key)
    if elsewhere:
        return "is unknown here", f"move it to {elsewhere[0]}"
    return "is unknown", f"keys here are {', '.join(known)}"


def _finding(detail: Detail, root: Node, base: KeyPath) -> Finding:
    kind, given = detail["type"], detail["input"]
    path = (*base, *path_of(detail["loc"], root))
    node = node_at(detail["loc"], root)
    if kind == "value_error" and isinstance(detail["ctx"]["error"], BadValue):
        return _broken_relation(detail["ctx"]["error"], path)
    around = node_at(detail["loc"][:-1], root)
    if kind == "missing" and isinstance(around, Row):
        return Finding(path[:-1], *_entries_wanted(around.size or len(given)), given)
    if kind == "missing":
        rule, remedy = _missing(detail["loc"], root)
        return Finding(path, rule, remedy, ABSENT)
    if kind == "extra_forbidden":
        table, home = _surroundings(detail["loc"], root)
        return Finding(path, *unknown_key(str(path[-1]), [table], home))
    if kind == "union_tag_not_found" and isinstance(node, Choice):
        return _no_choice(node, path, given)
    if kind == "union_tag_invalid" and isinstance(node, Choice):
        return _unknown_choice(node, path, given)
    if kind == "string_pattern_mismatch":
        return Finding(
            path,
            "is no name for a strategy",
            "use letters, digits, blanks, '_', '+' and '-', at most 60, no dots or quotes",
            ABSENT,
        )
    if kind in _FORMS:
        return Finding(path, *_FORMS[kind](node), given)
    if kind in ("too_short", "too_long"):
        return Finding(path, *_wrong_length(detail["ctx"], node), given)
    if isinstance(node, Leaf):
        return Finding(path, *wrong_value(str(_last_name(path)), node, given), given)
    return Finding(path, detail["msg"][:1].lower() + detail["msg"][1:], "correct it", STATED)


def wrong_value(key: str, leaf: Leaf, given: Any) -> tuple[str, str]:
    """Return rule and remedy for a value that is not what a leaf takes."""
    choices = [value for value in get_args(leaf.type) if isinstance(value, str)]
    if choices:
        alike = nearest(given, choices) if isinstance(given, str) else None
        remedy = f"did you mean {alike}?" if alike else "choose one of them"
        return f"must be {' or '.join(choices)}", remedy
    if leaf.type is str:
        return ("must not be empty", "write some words") if given == "" else _TEXT
    noun = "a whole number" if leaf.type is int else "a number"
    if isinstance(given, bool):
        return f"must be {noun}, not true or false", _number_wanted(key, leaf)
    if isinstance(given, str):
        return f"must be {noun}, not text", _number_in(given, key, leaf)
    if not isinstance(given, int | float):
        return f"must be {noun}", _number_wanted(key, leaf)
    if leaf.type is int and not isinstance(given, int):
        return "must be a whole number", "write it without a decimal point or exponent"
    if leaf.type is float and not abs(given) <= sys.float_info.max:
        return "must be finite", _number_wanted(key, leaf)
    return f"must {_broken_limit(leaf, given)}", _number_wanted(key, leaf, given)


def _broken_limit(leaf: Leaf, given: float) -> str:
    low, is_low_in = _limit(leaf, "ge", "gt")
    high, is_high_in = _limit(leaf, "le", "lt")
    if leaf.type is int:  # their upper limits are those of the machine
        return f"be at least {low}" if given < low else f"be at most {high - (not is_high_in)}"
    if high is not None:
        return f"lie in {'[' if is_low_in else '('}{low:g}, {high:g}{']' if is_high_in else ')'}"
    return f"be at least {low:g}" if is_low_in else f"be above {low:g}"


def _limit(leaf: Leaf, closed: str, open_: str) -> tuple[Any, bool]:
    """Return the tightest limit on a side, None without one, and whether it is itself allowed."""
    limits = [
        (getattr(limit, name), name == closed)
        for limit in leaf.limits
        for name in (closed, open_)
        if hasattr(limit, name)
    ]
    tightest = max if closed == "ge" else min
    return tightest(limits, key=lambda limit: limit[0], default=(None, False))


def _number_wanted(key: str, leaf: Leaf, given: float = 0.0) -> str:
    if "probability" in key:
        percent = f", {given / 100:g} for {given:g} %" if 2 <= given <= 100 else ""
        return f"give a probability{percent}"
    low, is_low_in = _limit(leaf, "ge", "gt")
    high, _ = _limit(leaf, "le", "lt")
    is_open = leaf.type is float and high is None
    sign = "positive " if is_open and low == 0 and not is_low_in else ""
    zero = "0 or a positive " if is_open and low == 0 and is_low_in else f"a {sign}"
    unit = unit_of(key)
    noun = "whole number" if leaf.type is int else "number"
    return f"give {zero}{noun}" + (f", in {unit}" if unit else "")


def _number_in(text: str, key: str, leaf: Leaf) -> str:
    try:
        float(text)
    except ValueError:
        return _number_wanted(key, leaf)
    return "write it without quotes"


_TEXT = ("must be text", "put it in quotes")
_TABLE = ("must be a table", "give its keys under a [table] or in { }")


def _list_wanted(node: Node | None) -> tuple[str, str]:
    entry = node.entry if isinstance(node, Row) else None
    if isinstance(entry, Row):
        return "must be a list of lists", "write it as [[..., ...], [..., ...]]"
    if isinstance(entry, Leaf):
        return "must be a list of numbers", "write it as [..., ...]"
    if isinstance(entry, Named | Table):
        return "must be a list of tables", "write each under [[ ]]"
    return "must be a list", "write it as [..., ...]"


_FORMS: dict[str, Callable[[Node | None], tuple[str, str]]] = {
    "tuple_type": _list_wanted,
    "list_type": _list_wanted,
    "dict_type": lambda node: _TABLE,
    "model_type": lambda node: _TABLE,
    "model_attributes_type": lambda node: _TABLE,
    "invalid_key": lambda node: ("must have text for a key", "name keys by text"),
}


def _wrong_length(limits: Mapping[str, Any], node: Node | None) -> tuple[str, str]:
    least, most = limits.get("min_length"), limits.get("max_length")
    if isinstance(node, Named | Table):
        return "is empty", "name at least one"
    if limits["actual_length"] == 0:
        return "is empty", "give at least one value"
    if isinstance(node, Row) and node.size is not None:
        return _entries_wanted(node.size)
    number = f"at least {least}" if least is not None else f"at most {most}"
    return f"must have {number} entries", f"it has {limits['actual_length']}"


def _entries_wanted(size: int) -> tuple[str, str]:
    return f"must have {size} entries", f"give {size} numbers"


def _missing(location: tuple[str | int, ...], root: Node) -> tuple[str, str]:
    key = str(location[-1])
    table, _ = _surroundings(location, root)
    meaning = table.meanings.get(key, "").rstrip(".")
    is_table = isinstance(table.fields.get(key), Table | Named | Choice)
    thing = f"the table [{'.'.join(map(str, path_of(location, root)))}]" if is_table else "it"
    return "is missing", f"add {thing}: {meaning[:1].lower()}{meaning[1:]}" if meaning else "add it"


def _broken_relation(error: BadValue, path: KeyPath) -> Finding:
    place = (*path, *_parts(error.key))
    return Finding(place, error.rule, error.remedy)


def _parts(key: str) -> KeyPath:
    """Split a key such as 'sensor.region_m[0]'."""
    parts: KeyPath = ()
    for name in key.split("."):
        field, *places = name.replace("]", "").split("[")
        parts = (*parts, field, *map(int, places))
    return parts


def _no_choice(choice: Choice, path: KeyPath, given: Any) -> Finding:
    if choice.tag is None:
        return Finding(
            path,
            "must be a list of values or a range",
            "write [..., ...] or { from = ..., to = ..., count = ... }",
            given,
        )
    alike = nearest(choice.tag, map(str, given)) if isinstance(given, Mapping) else None
    place = (*path, alike or choice.tag)
    remedy = f"give {choice.tag}, one of {', '.join(choice.options)}"
    if alike:
        return Finding(place, "is unknown", f"did you mean {choice.tag}?")
    return Finding(place, "is missing", remedy, ABSENT)


def _unknown_choice(choice: Choice, path: KeyPath, given: Any) -> Finding:
    said = given.get(choice.tag) if isinstance(given, Mapping) else getattr(given, str(choice.tag))
    alike = nearest(said, choice.options) if isinstance(said, str) else None
    meant = f"did you mean {alike}? " if alike else ""
    remedy = f"{meant}there are {', '.join(choice.options)}"
    return Finding((*path, str(choice.tag)), "is unknown", remedy, said)


def _surroundings(location: tuple[str | int, ...], root: Node) -> tuple[Table, Choice | None]:
    """Return the table in which a location's last key stands, and the choice it is taken from."""
    table = node_at(location[:-1], root)
    before = node_at(location[:-2], root) if len(location) > 1 else None
    assert isinstance(table, Table)
    return table, before if isinstance(before, Choice) else None


def _replaced_keys(details: Iterable[Detail], root: Node) -> set[KeyPath]:
    """Return the keys in whose place an unknown one stands, close in name or of another unit."""
    replaced = set()
    for detail in details:
        if detail["type"] == "extra_forbidden":
            path = path_of(detail["loc"], root)
            fields = _surroundings(detail["loc"], root)[0].fields
            key = str(path[-1])
            meant = in_another_unit(key, fields) or nearest(key, fields)
            replaced.add((*path[:-1], meant or ""))
    return replaced


def _is_shortened(detail: Detail, details: Iterable[Detail]) -> bool:
    """Whether a list is too short only because its entries are wrong, which is reported."""
    location = detail["loc"]
    return detail["type"] == "too_short" and any(
        other["loc"][: len(location)] == location and len(other["loc"]) > len(location)
        for other in details
    )


def _once_a_list(findings: list[Finding]) -> list[Finding]:
    """Keep one finding of each rule among the entries of a list: they have one cause."""
    kept: dict[Any, Finding] = {}
    for finding in findings:
        is_entry = isinstance(finding.path[-1], int) if finding.path else False
        place = finding.path[:-1] if is_entry else finding.path
        kept.setdefault((place, finding.rule, is_entry), finding)
    return list(kept.values())


def _kinds_with(key: str, home: Choice) -> list[str]:
    return [
        kind
        for kind, table in home.options.items()
        if isinstance(table, Table) and key in table.fields
    ]


def _places_of(key: str, node: Node = STUDY, path: str = "") -> list[str]:
    """Return the tables of a study that have a key, for keys that stand in the wrong one."""
    if isinstance(node, Choice):
        return [
            place for option in node.options.values() for place in _places_of(key, option, path)
        ]
    if isinstance(node, Named):
        return []
    if not isinstance(node, Table):
        return []
    here = [f"[{path}]" if path else "the top of the file"] if key in node.fields else []
    deeper = [
        place
        for name, child in node.fields.items()
        for place in _places_of(key, child, f"{path}.{name}".lstrip("."))
    ]
    return here + deeper


def _last_name(path: KeyPath) -> str | int:
    return next((part for part in reversed(path) if isinstance(part, str)), "")
