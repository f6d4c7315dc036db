"""What the checks of the records found, in words for the one who wrote the study."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from typing import Any

from pydantic import ValidationError

from filters.models.record import BadValue
from harness.study.keys import Choice, Leaf, Named, Node, Row, Table, node_at, path_of
from harness.study.mistakes import ABSENT, STATED, Finding, KeyPath, key_text
from harness.study.names import nearest
from harness.study.unknown_keys import meant_key, unknown_key
from harness.study.wrong_values import wrong_value

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


def _finding(detail: Detail, root: Node, base: KeyPath) -> Finding:
    kind, given = detail["type"], detail["input"]
    path = (*base, *path_of(detail["loc"], root))
    node = node_at(detail["loc"], root)
    if kind == "value_error" and isinstance(detail["ctx"]["error"], BadValue):
        broken = detail["ctx"]["error"]
        return Finding((*path, *_parts(broken.key)), broken.rule, broken.remedy)
    if kind == "missing":
        return _missing(detail, path, root)
    if kind == "extra_forbidden":
        table, home = _surroundings(detail["loc"], root)
        return Finding(path, *unknown_key(str(path[-1]), [table], home))
    if kind == "union_tag_not_found" and isinstance(node, Choice):
        if node.tag is not None and not isinstance(given, Mapping):
            return Finding(path, *_TABLE, given)
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


def _missing(detail: Detail, path: KeyPath, root: Node) -> Finding:
    around = node_at(detail["loc"][:-1], root)
    if isinstance(around, Row):
        return Finding(path[:-1], *_entries_wanted(around.size or 0), detail["input"])
    table, _ = _surroundings(detail["loc"], root)
    key = str(path[-1])
    meaning = table.meanings.get(key, "").rstrip(".")
    is_table = isinstance(table.fields.get(key), Table | Named | Choice)
    thing = f"the table [{key_text(path)}]" if is_table else "it"
    told = f"add {thing}: {meaning[:1].lower()}{meaning[1:]}" if meaning else f"add {thing}"
    return Finding(path, "is missing", told, ABSENT)


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
            table, _ = _surroundings(detail["loc"], root)
            replaced.add((*path[:-1], meant_key(str(path[-1]), table.fields) or ""))
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


def _last_name(path: KeyPath) -> str | int:
    return next((part for part in reversed(path) if isinstance(part, str)), "")
