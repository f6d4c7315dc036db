"""Study files as JSON Schema (draft 2020-12), by which editors complete and check them."""

from __future__ import annotations

from typing import Any

from filters.models.sensor.own import OWN_KIND
from harness.study.keys import ASSUMABLE, Choice, Node, Table, is_numeric, tables_of
from harness.study.schema import OWN, Scene, StudyDocument

Schema = dict[str, Any]

_DIALECT = "https://json-schema.org/draft/2020-12/schema"
_FACTOR: Schema = {
    "type": "object",
    "properties": {
        "factor": {"type": "number", "description": "Times what the scene says.", "title": "factor"}
    },
    "required": ["factor"],
    "additionalProperties": False,
}


def study_json_schema() -> Schema:
    """Return the schema of a study file.

    It knows keys, types and limits of single values; relations between keys, and the names of swept
    keys, are left to the reader of studies. A key that a sweep states need not stand in its table
    for the reader, but must for this schema.
    """
    schema = _tidied(StudyDocument.model_json_schema(by_alias=True))
    definitions = schema["$defs"]
    schema["properties"]["strategies"]["additionalProperties"] = False
    for name in ("sweep", "sweep_together"):
        _take_single_values(schema["properties"][name])
    assumes = _assumes(definitions)
    for definition in definitions.values():
        stated = definition.get("properties", {}).get("assumes")
        if stated is not None:
            definition["properties"]["assumes"] = {
                "$ref": "#/$defs/Assumes",
                "title": "assumes",
                "description": stated["description"],
            }
    return {
        "$schema": _DIALECT,
        **schema,
        "title": "trackassay study",
        "$defs": {**definitions, "Assumes": assumes},
    }


def _tidied(schema: Any) -> Any:
    """Leave out what study files have no use for: null, and how the records tell kinds apart."""
    if isinstance(schema, list):
        return [_tidied(entry) for entry in schema]
    if not isinstance(schema, dict):
        return schema
    options = schema.get("anyOf", [])
    if {"type": "null"} in options:
        (only,) = (option for option in options if option != {"type": "null"})
        schema = {**only, **{key: entry for key, entry in schema.items() if key != "anyOf"}}
    tidy = {
        key: _tidied(entry)
        for key, entry in schema.items()
        if key != "discriminator" and not (key == "default" and not _is_scalar(entry))
    }
    if isinstance(tidy.get("description"), str):
        tidy["description"] = " ".join(tidy["description"].split())
    for name, property_ in tidy.get("properties", {}).items():
        property_["title"] = name
    return tidy


def _is_scalar(value: Any) -> bool:
    return isinstance(value, str | int | float)


def _take_single_values(swept: Schema) -> None:
    """Say that lists of swept values hold numbers or text."""
    table = swept.get("items", swept)
    for form in table["additionalProperties"]["oneOf"]:
        if form.get("type") == "array":
            form["items"] = {"type": ["number", "string"]}


def _assumes(definitions: Schema) -> Schema:
    """Return the schema of `assumes`: any key of any kind, each as such or as a factor."""
    roles = {
        role: {
            **_changeable(Table(Scene).fields[role], definitions),
            "title": role,
            "description": f"What differs from the scene's {role}.",
        }
        for role in ASSUMABLE
    }
    return {"type": "object", "properties": roles, "additionalProperties": False}


def _changeable(node: Node, definitions: Schema) -> Schema:
    """Return the schema of a table of which any keys, of any kind, are given anew or multiplied."""
    keys: Schema = {}
    for table in tables_of(node, None):
        for key, child in table.fields.items():
            stated = definitions[table.record.__name__]["properties"][key]
            if isinstance(child, Table | Choice):
                notes = {name: stated[name] for name in _NOTES if name in stated}
                keys[key] = {**_changeable(child, definitions), **notes}
            else:
                keys[key] = _or_factor(stated, child)
    if isinstance(node, Choice):
        keys[str(node.tag)] = _kinds(node)
    return {"type": "object", "properties": keys, "additionalProperties": False}


def _kinds(choice: Choice) -> Schema:
    kinds: Schema = {"enum": [kind for kind in choice.options if kind != OWN]}
    if OWN in choice.options:
        kinds = {"anyOf": [kinds, {"type": "string", "pattern": OWN_KIND}]}
    return {**kinds, "title": choice.tag, "description": "Which kind it is."}


def _or_factor(stated: Schema, node: Node) -> Schema:
    if not is_numeric(node):
        return stated
    value = {key: entry for key, entry in stated.items() if key not in _NOTES}
    notes = {key: stated[key] for key in _NOTES if key in stated and key != "default"}
    return {**notes, "anyOf": [value, _FACTOR]}


_NOTES = ("title", "description", "default")
