"""The schema is checked with a validator of the few keywords that it uses.

Meaning of the keywords: JSON Schema, draft 2020-12 (core and validation), an open standard.
"""

import re
import tomllib
from pathlib import Path

import pytest

from harness.study.json_schema import study_json_schema

STUDIES = Path(__file__).parents[3] / "studies"
SCHEMA = study_json_schema()
TYPES = {
    "object": dict,
    "array": list,
    "string": str,
    "integer": int,
    "number": (int, float),
}
NOTES = {"title", "description", "default", "$defs", "$schema"}
KEYWORDS = {
    "type": lambda schema, value: any(
        isinstance(value, TYPES[name]) and not isinstance(value, bool)
        for name in ([schema["type"]] if isinstance(schema["type"], str) else schema["type"])
    ),
    "const": lambda schema, value: value == schema["const"],
    "enum": lambda schema, value: value in schema["enum"],
    "minimum": lambda schema, value: value >= schema["minimum"],
    "maximum": lambda schema, value: value <= schema["maximum"],
    "exclusiveMinimum": lambda schema, value: value > schema["exclusiveMinimum"],
    "exclusiveMaximum": lambda schema, value: value < schema["exclusiveMaximum"],
    "minLength": lambda schema, value: len(value) >= schema["minLength"],
    "maxLength": lambda schema, value: len(value) <= schema["maxLength"],
    "pattern": lambda schema, value: re.search(schema["pattern"], value) is not None,
    "minItems": lambda schema, value: len(value) >= schema["minItems"],
    "maxItems": lambda schema, value: len(value) <= schema["maxItems"],
    "minProperties": lambda schema, value: len(value) >= schema["minProperties"],
    "maxProperties": lambda schema, value: len(value) <= schema["maxProperties"],
    "propertyNames": lambda schema, value: all(fits(schema["propertyNames"], key) for key in value),
    "required": lambda schema, value: set(schema["required"]) <= set(value),
    "anyOf": lambda schema, value: any(fits(option, value) for option in schema["anyOf"]),
    "oneOf": lambda schema, value: sum(fits(option, value) for option in schema["oneOf"]) == 1,
    "items": lambda schema, value: all(fits(schema["items"], entry) for entry in value),
    "prefixItems": lambda schema, value: all(map(fits, schema["prefixItems"], value)),
    "$ref": lambda schema, value: fits(SCHEMA["$defs"][schema["$ref"].split("/")[-1]], value),
}
OF_KEYS = {"properties", "patternProperties", "additionalProperties"}


def fits(schema, value):
    """Whether a value fits a schema; a keyword that is not known here is an error."""
    if isinstance(schema, bool):
        return schema
    assert set(schema) <= NOTES | set(KEYWORDS) | OF_KEYS
    if "type" in schema and not KEYWORDS["type"](schema, value):
        return False
    return all(
        KEYWORDS[keyword](schema, value) for keyword in schema if keyword in KEYWORDS
    ) and all(fits(of_key(schema, key), entry) for key, entry in entries(schema, value))


def entries(schema, value):
    return value.items() if isinstance(value, dict) and set(schema) & OF_KEYS else ()


def of_key(schema, key):
    if key in schema.get("properties", {}):
        return schema["properties"][key]
    for pattern, entry in schema.get("patternProperties", {}).items():
        if re.search(pattern, key):
            return entry
    return schema.get("additionalProperties", True)


def every_property(schema, path=""):
    """Yield the place and the schema of each key."""
    if isinstance(schema, dict):
        for name, entry in schema.get("properties", {}).items():
            yield f"{path}/{name}", entry
        for name, entry in schema.items():
            yield from every_property(entry, f"{path}/{name}")
    elif isinstance(schema, list):
        for entry in schema:
            yield from every_property(entry, path)


def test_the_schema_names_its_dialect():
    assert SCHEMA["$schema"] == "https://json-schema.org/draft/2020-12/schema"


@pytest.mark.parametrize("path", sorted(STUDIES.glob("*.toml")), ids=lambda path: path.stem)
def test_studies_that_ship_fit_the_schema(path):
    assert fits(SCHEMA, tomllib.loads(path.read_text(encoding="utf-8")))


def test_every_key_has_its_name_and_a_meaning():
    nameless = [place for place, entry in every_property(SCHEMA) if "title" not in entry]
    assert nameless == []
    unclear = [
        place
        for place, entry in every_property(SCHEMA)
        if "description" not in entry and "enum" not in entry
    ]
    assert unclear == []


def test_nothing_in_the_schema_allows_null_which_study_files_cannot_say():
    assert "null" not in str(SCHEMA)


ASSUMES = 'kind = "pda"\nassumes.sensor'
LAW = (
    'detection = { kind = "range-table", probability_over_range = [[0.0, 0.8]], '
    "blind_range_rate_m_per_s = 2 }"
)
LEG = '[[scene.legs]]\nkind = "straight"\nduration_s = 3'


@pytest.mark.parametrize(
    ("old", "new", "is_right"),
    [
        ("noise_sd_m = 4.0", "noise_sd_m = 4", True),
        ("noise_sd_m = 4.0", "noise_sd_km = 4", False),
        ("noise_sd_m = 4.0", "noise_sd_m = -4", False),
        ("noise_sd_m = 4.0", "noise_sd_m = true", False),
        ("= 0.9", "= 1.7", False),
        ("seed = 12", "seed = 1.5", False),
        ("seed = 12\n", "", False),
        ('kind = "pda"', 'kind = "pdas"', False),
        ('kind = "pda"', 'kind = "pda"\nmax_components = 3', False),
        ("[strategies.pda]", '[strategies."a.b"]', False),
        ("[[-400.0, 400.0], [-400.0, 400.0]]", "[[-400.0, 400.0], [-400.0]]", False),
        ('kind = "pda"', f"{ASSUMES}.noise_sd_m = 3", True),
        ('kind = "pda"', f"{ASSUMES}.noise_sd_m.factor = 3", True),
        ('kind = "pda"', f'{ASSUMES}.kind = "position"', True),
        ('kind = "pda"', f"{ASSUMES}.noise_sd_m.fctor = 3", False),
        ('kind = "pda"', f"{ASSUMES}.nose_sd_m = 3", False),
        ('kind = "pda"', f"{ASSUMES}.detection_probability = 3", False),
        ('kind = "pda"', f"{ASSUMES}.detection.snr_db = 3", True),
        ('kind = "pda"', f"{ASSUMES}.detection.snr_db.factor = 3", True),
        ('kind = "pda"', f"{ASSUMES}.detection.snr = 3", False),
        ('kind = "pda"', f"{ASSUMES}.measurement_bias = [3]", False),
        ("detection_probability = 0.9", LAW, True),
        ("detection_probability = 0.9", LAW.replace("0.8", "1.8"), False),
        ("detection_probability = 0.9", LAW.replace("rate_m", "rates_m"), False),
        ("scans = 30\nscan_interval_s = 2.0", "scan_times_s = [0.0, 3]", True),
        ("scans = 30\nscan_interval_s = 2.0", "scan_times_s = []", False),
        ("[strategies.pda]", f"{LEG}\n[strategies.pda]", True),
        ("[strategies.pda]", f"{LEG.replace('straight', 'loop')}\n[strategies.pda]", False),
        ("[strategies.pda]", "[scene.unmodelled]\nclutter_factor_sd = 1\n[strategies.pda]", True),
        ('kind = "pda"', f'{ASSUMES}.kind = "own.py:sonar"', True),
        ('kind = "pda"', f'{ASSUMES}.kind = "own.txt"', False),
        ("[2.0, 4.0]", "[]", False),
        ("[2.0, 4.0]", "[true]", False),
        ("[2.0, 4.0]", "{ from = 1, to = 2, count = 3 }", True),
        ("[2.0, 4.0]", "{ from = 1, to = 2, cnt = 3 }", False),
        ("[track_loss]", '[[sweep_together]]\n"gospa.order" = [1, 2]\n[track_loss]', True),
        ("[track_loss]", "[[sweep_together]]\n[track_loss]", False),
    ],
)
def test_the_schema_tells_right_studies_from_wrong_ones(study_text, old, new, is_right):
    assert fits(SCHEMA, tomllib.loads(study_text((old, new)))) == is_right
