"""The schema is a valid JSON Schema, closed and described throughout, and in step with the registry."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import Any

from jsonschema import Draft202012Validator
from refresh_schema import SCHEMA, fresh

from outspread.laws.registry import FAMILIES
from outspread.reading.parameters import PARAMETERS, STRUCTURED
from outspread.reading.shape import _SAY, schema

#: words of JSON Schema that are no rules about values
NO_RULES = {"$schema", "$id", "$defs", "$ref", "title", "description", "properties", "items", "propertyNames"}


def parts(value: Any) -> Iterator[dict[str, Any]]:
    """Every subschema, the branches of oneOf and anyOf apart."""
    yield value
    for key in ("items", "propertyNames", "additionalProperties"):
        if isinstance(value.get(key), dict):
            yield from parts(value[key])
    for group in ("properties", "$defs"):
        for part in value.get(group, {}).values():
            yield from parts(part)


def test_it_is_a_valid_schema_of_draft_2020_12() -> None:
    """Judged by the metaschema that jsonschema ships."""
    assert schema()["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    Draft202012Validator.check_schema(schema())


def test_every_group_is_closed() -> None:
    """An object either lists its keys and allows no other, or says what every key's value is."""
    for part in parts(schema()):
        if "properties" in part:
            assert part["additionalProperties"] is False, part
        elif part.get("type") == "object":
            assert isinstance(part["additionalProperties"], dict), part


def test_every_key_is_described() -> None:
    for part in parts(schema()):
        for key, value in part.get("properties", {}).items():
            assert value.get("description"), key
    for key, value in schema()["$defs"].items():
        assert value.get("description"), key


def test_every_reference_leads_somewhere() -> None:
    for part in parts(schema()):
        if "$ref" in part:
            assert part["$ref"].removeprefix("#/$defs/") in schema()["$defs"]


def test_every_rule_has_a_message() -> None:
    """No rule of the schema lacks its words, so no message of the validator itself is ever shown."""
    for part in parts(schema()):
        assert set(part) - NO_RULES <= set(_SAY), part


def test_every_value_that_can_be_wrong_says_what_is_right() -> None:
    """Messages end in the title of the rule that failed."""
    for part in parts(schema()):
        if "type" in part or "enum" in part or "const" in part:
            assert part.get("title"), part


def test_families_and_parameters_are_exactly_the_registry_s() -> None:
    listed = schema()["$defs"]["distribution"]["properties"]
    assert set(listed) == set(FAMILIES) | set(STRUCTURED)
    for key, family in FAMILIES.items():
        if key not in STRUCTURED:
            names = {name for candidate in family.parameter_sets for name in candidate.names}
            assert set(schema()["$defs"][f"family_{key}"]["properties"]) == names, key
            assert names <= set(PARAMETERS), key


def test_the_file_is_fresh() -> None:
    """To refresh it: python tests/reading/refresh_schema.py."""
    assert SCHEMA.read_text(encoding="utf-8") == fresh()
    assert json.loads(SCHEMA.read_text(encoding="utf-8")) == schema()
