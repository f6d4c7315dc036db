"""The keys that a study can have, read off the records that check it."""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from types import NoneType, UnionType
from typing import Annotated, Any, Literal, Union, get_args, get_origin

from pydantic import Discriminator, Tag
from pydantic.fields import FieldInfo

from filters.models.record import Record
from filters.strategies.strategy import Strategy
from harness.study.mistakes import KeyPath
from harness.study.schema import KindOrFile, Scene, StudyDocument

ASSUMABLE = ("target", "sensor")  # what of a scene a strategy may be told otherwise


@dataclass(frozen=True)
class Leaf:
    """A single value: its type and its limits."""

    type: Any
    limits: tuple[Any, ...] = ()


@dataclass(frozen=True)
class Row:
    """A list, and what its entries are: all alike, or each of its own in a list of fixed size."""

    entries: tuple[Node, ...]
    size: int | None = None  # None for any

    @property
    def entry(self) -> Node:
        """What its first entry is."""
        return self.entries[0]

    def at(self, place: int) -> Node:
        """What the entry at a place is."""
        return self.entries[min(place, len(self.entries) - 1)]


@dataclass(frozen=True)
class Named:
    """A table whose keys are names of the reader's choice, and what stands under each."""

    entry: Node


@dataclass(frozen=True)
class Table:
    """A table with the fields of a record."""

    record: type[Record]

    @property
    def fields(self) -> Mapping[str, Node]:
        """What stands under each key."""
        return _fields_of(self.record)

    @property
    def meanings(self) -> Mapping[str, str]:
        """What each key means, empty where nothing is written."""
        return {
            info.alias or name: " ".join((info.description or "").split())
            for name, info in self.record.model_fields.items()
        }


@dataclass(frozen=True)
class Choice:
    """One of several, told apart by a key of its own, or by its form if that is None."""

    tag: str | None
    options: Mapping[str, Node]
    choose: Callable[[Any], str | None] | None = None  # from a raw value, if not by the tag alone

    def chosen(self, raw: Any) -> Node | None:
        """What a raw value chooses, None while it chooses none of them."""
        said = raw.get(self.tag) if isinstance(raw, Mapping) else None
        option = self.choose(raw) if self.choose is not None else said
        return self.options.get(option) if isinstance(option, str) else None

    def tables(self, raw: Any) -> list[Table]:
        """The table that a raw value chooses; all, while it chooses none of them."""
        chosen = self.chosen(raw)
        nodes = self.options.values() if chosen is None else [chosen]
        return [node for node in nodes if isinstance(node, Table)]


Node = Leaf | Row | Named | Table | Choice

STUDY = Table(StudyDocument)
FACTOR = Leaf(float)


def node_of(annotation: Any, notes: tuple[Any, ...] = ()) -> Node:
    """Return what a type annotation of a record stands for."""
    origin = get_origin(annotation)
    if origin is Annotated:
        inner, *more = get_args(annotation)
        return node_of(inner, (*notes, *more))
    if origin in (Union, UnionType):
        members = [member for member in get_args(annotation) if member is not NoneType]
        return node_of(members[0], notes) if len(members) == 1 else _choice(members, notes)
    if origin is dict:
        return Named(node_of(get_args(annotation)[1]))
    if origin in (tuple, list):
        entries = get_args(annotation)
        is_fixed = origin is tuple and entries[-1] is not Ellipsis
        own = entries if is_fixed else entries[:1]
        return Row(tuple(map(node_of, own)), len(entries) if is_fixed else None)
    if isinstance(annotation, type) and issubclass(annotation, Record):
        return Table(annotation)
    limits = [note.metadata if isinstance(note, FieldInfo) else [note] for note in notes]
    return Leaf(annotation, tuple(limit for some in limits for limit in some))


def path_of(location: tuple[str | int, ...], root: Node) -> KeyPath:
    """Return the path of keys in a checker's location, which also names the choices made."""
    path: KeyPath = ()
    node: Node | None = root
    for part in location:
        if isinstance(node, Choice):
            node = node.options.get(str(part))
        elif part != "[key]":
            path = (*path, part)
            node = _child(node, part)
    return path


def node_at(location: tuple[str | int, ...], root: Node) -> Node | None:
    """Return what a checker's location stands for."""
    node: Node | None = root
    for part in location:
        node = node.options.get(str(part)) if isinstance(node, Choice) else _child(node, part)
    return node


def is_numeric(node: Node) -> bool:
    """Whether it is a number, or a list of numbers."""
    return all(map(is_numeric, node.entries)) if isinstance(node, Row) else _is_number(node)


def keys_of(document: Mapping[str, Any]) -> dict[str, Node]:
    """Return every key that this document has or could have, dotted, and what stands there.

    Kinds and motions decide which keys there are; of strategies only those in the document have
    keys. Entries of lists that the document holds go by their place, from 0. The sweeps themselves
    are left out.
    """
    return {
        ".".join(path): node
        for path, node in _below((), STUDY, document, document)
        if path and path[0] not in ("sweep", "sweep_together")
    }


def _below(
    path: tuple[str, ...], node: Node, raw: Any, document: Mapping[str, Any]
) -> Iterator[tuple[tuple[str, ...], Node]]:
    yield path, node
    if isinstance(node, Row) and isinstance(raw, list | tuple):
        for place, entry in enumerate(raw):
            yield from _below((*path, str(place)), node.at(place), entry, document)
    elif isinstance(node, Named) and isinstance(raw, Mapping):
        for name, entry in raw.items():
            if isinstance(name, str):
                yield from _below((*path, name), node.entry, entry, document)
    elif isinstance(node, Table | Choice):
        for table in [node] if isinstance(node, Table) else node.tables(raw):
            for name, child in table.fields.items():
                value = raw.get(name) if isinstance(raw, Mapping) else None
                if name == "assumes" and issubclass(table.record, Strategy):
                    yield from _assumable_keys((*path, name), child, value, document.get("scene"))
                else:
                    yield from _below((*path, name), child, value, document)


def _assumable_keys(
    path: tuple[str, ...], node: Node, assumes: Any, scene: Any
) -> Iterator[tuple[tuple[str, ...], Node]]:
    yield path, node
    said = laid_over(scene, assumes)
    for role in ASSUMABLE:
        yield from _changeable_keys((*path, role), Table(Scene).fields[role], said.get(role))


def _changeable_keys(
    path: tuple[str, ...], node: Node, raw: Any
) -> Iterator[tuple[tuple[str, ...], Node]]:
    """Yield a key and those under it, where each may be given anew or multiplied."""
    yield path, node
    if is_numeric(node):
        yield (*path, "factor"), FACTOR
    for table in tables_of(node, raw):
        for name, child in table.fields.items():
            inner = raw.get(name) if isinstance(raw, Mapping) else None
            yield from _changeable_keys((*path, name), child, inner)


def tables_of(node: Node, raw: Any) -> list[Table]:
    """Return the tables that a raw value may be, given its kind; none where it is no table."""
    if isinstance(node, Choice):
        return node.tables(raw)
    return [node] if isinstance(node, Table) else []


def laid_over(scene: Any, assumes: Any) -> dict[str, Any]:
    """Return what is said when a table is laid over another, tables in them likewise."""
    below, above = (table if isinstance(table, Mapping) else {} for table in (scene, assumes))
    return {
        **below,
        **{
            key: laid_over(below.get(key), value) if isinstance(value, Mapping) else value
            for key, value in above.items()
        },
    }


@functools.cache
def _fields_of(record: type[Record]) -> Mapping[str, Node]:
    return {
        info.alias or name: node_of(info.annotation, (info,))
        for name, info in record.model_fields.items()
    }


def _choice(members: list[Any], notes: tuple[Any, ...]) -> Node:
    inner = [one for note in notes if isinstance(note, FieldInfo) for one in note.metadata]
    tags = [
        note.discriminator
        for note in (*notes, *inner)
        if isinstance(note, FieldInfo | Discriminator)
    ]
    by_file = next((tag for tag in tags if isinstance(tag, KindOrFile)), None)
    if by_file is not None:
        return Choice(by_file.key, {_form_of(one): node_of(one) for one in members}, by_file)
    tag = next((tag for tag in tags if isinstance(tag, str)), None)
    if tag is not None:
        options = {
            value: Table(member)
            for member in members
            for value in get_args(member.model_fields[tag].annotation)
        }
        return Choice(tag, options)
    return Choice(None, {_form_of(member): node_of(member) for member in members})


def _form_of(member: Any) -> str:
    return next(str(note.tag) for note in get_args(member)[1:] if isinstance(note, Tag))


def _child(node: Node | None, part: str | int) -> Node | None:
    if isinstance(node, Table):
        return node.fields.get(str(part))
    if isinstance(node, Row) and isinstance(part, int):
        return node.at(part)
    return node.entry if isinstance(node, Row | Named) else None


def _is_number(node: Node) -> bool:
    if not isinstance(node, Leaf):
        return False
    is_literal = get_origin(node.type) is Literal
    return node.type in (int, float) or (
        is_literal and all(isinstance(value, int | float) for value in get_args(node.type))
    )
