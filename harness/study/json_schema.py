"""Study files as JSON Schema (draft 2020-12), by which editors complete and check them."""

from __future__ import annotations

from typing import Any

from harness.study.keys import ASSUMABLE, Choice, Leaf, Row, Table, is_numeric
from harness.study.schema import Scene, StudyDocument

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
    roles: Schema = {}
    for role in ASSUMABLE:
        choice = Table(Scene).fields[role]
        assert isinstance(choice, Choice)
        keys: Schema = {}
        for table in choice.tables({}):
            for key, node in table.fields.items():
                stated = definitions[table.record.__name__]["properties"][key]
                keys[key] = _or_factor(stated, node) if isinstance(node, Leaf | Row) else stated
        keys[str(choice.tag)] = {"enum": list(choice.options), "title": choice.tag}
        roles[role] = {
            "type": "object",
            "title": role,
            "description": f"What differs from the scene's {role}.",
            "properties": keys,
            "additionalProperties": False,
        }
    return {"type": "object", "properties": roles, "additionalProperties": False}


def _or_factor(stated: Schema, node: Leaf | Row) -> Schema:
    if not is_numeric(node):
        return stated
    value = {key: entry for key, entry in stated.items() if key not in _NOTES}
    notes = {key: stated[key] for key in _NOTES if key in stated and key != "default"}
    return {**notes, "anyOf": [value, _FACTOR]}


_NOTES = ("title", "description", "default")
