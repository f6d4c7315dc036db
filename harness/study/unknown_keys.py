"""Keys that a study cannot have where they stand, and what was meant by them."""

from __future__ import annotations

from collections.abc import Iterable

from harness.study.keys import STUDY, Choice, Node, Table
from harness.study.names import in_another_unit, nearest, unit_of


def unknown_key(key: str, tables: Iterable[Table], home: Choice | None = None) -> tuple[str, str]:
    """Return rule and remedy for a key that the tables at its place do not have.

    home        the choice of kinds that a table was taken from
    """
    known = [name for table in tables for name in table.fields]
    other_unit = in_another_unit(key, known)
    if other_unit is not None:
        unit = unit_of(other_unit)
        return f"is unknown: here this is stated {unit}", f"write {other_unit}, {unit}"
    if "." in key:
        return "is unknown", "write the dots of a key outside quotes"
    alike = nearest(key, known)
    kinds = _kinds_with(key, home)
    if kinds:
        remedy = f"choose that, or write {alike}" if alike else "choose that, or remove it"
        return f"is unknown here: only {' or '.join(kinds)} has it", remedy
    if alike is not None:
        return "is unknown", f"did you mean {alike}?"
    elsewhere = _tables_with(key)
    if elsewhere:
        return "is unknown here", f"move it to {elsewhere[0]}"
    return "is unknown", f"keys here are {', '.join(known)}"


def meant_key(key: str, known: Iterable[str]) -> str | None:
    """Return the known key that an unknown one stands for, None if there is none."""
    known = list(known)
    return in_another_unit(key, known) or nearest(key, known)


def _kinds_with(key: str, home: Choice | None) -> list[str]:
    return [
        f"{home.tag} = {kind}"
        for kind, table in (home.options.items() if home else ())
        if home and isinstance(table, Table) and key in table.fields
    ]


def _tables_with(key: str, node: Node = STUDY, path: str = "") -> list[str]:
    """Return the tables of a study that have a key, but for those of strategies."""
    if isinstance(node, Choice):
        return [place for table in node.tables({}) for place in _tables_with(key, table, path)]
    if not isinstance(node, Table):
        return []
    here = [f"[{path}]" if path else "the top of the file"] if key in node.fields else []
    deeper = [
        place
        for name, child in node.fields.items()
        for place in _tables_with(key, child, f"{path}.{name}".lstrip("."))
    ]
    return here + deeper
