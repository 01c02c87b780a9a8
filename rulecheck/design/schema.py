"""JSON Schema of the design file, for editors."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from pydantic.json_schema import GenerateJsonSchema, models_json_schema

from rulecheck.design.fields import Table
from rulecheck.design.nets import INPUT_TABLES, NET_TABLES, ROLES
from rulecheck.design.parts import PART_TABLES
from rulecheck.design.tables import (
    TOP_LEVEL,
    ConcessionTable,
    Environment,
    Head,
    MatchingTable,
    PackageTable,
    RequirementTable,
    ThermalLinkTable,
)

DIALECT = "https://json-schema.org/draft/2020-12/schema"
Schema = dict[str, Any]

_NAMED: dict[str, type[Table]] = {"packages": PackageTable, "matching": MatchingTable, "requirements": RequirementTable}
_LISTED: dict[str, type[Table]] = {"thermal_links": ThermalLinkTable, "concessions": ConcessionTable}
_SINGLE: dict[str, type[Table]] = {"design": Head, "environment": Environment}
_RULE_SETTINGS: Schema = {
    "type": "object",
    "properties": {
        "enabled": {"type": "boolean", "description": "false leaves the rule out"},
        "severity": {"enum": ["major", "minor", "observation"], "description": "greatest severity of its findings"},
    },
}


class _Generator(GenerateJsonSchema):
    """Leaves out defaults, which the descriptions name, and null, which TOML does not have."""

    def default_schema(self, schema: Any) -> Schema:  # noqa: ANN401
        return self.generate_inner(schema["schema"])

    def nullable_schema(self, schema: Any) -> Schema:  # noqa: ANN401
        return self.generate_inner(schema["schema"])


def json_schema() -> Schema:
    """JSON Schema (draft 2020-12) of a design file.

    Kinds of parts, roles of nets and drives of inputs choose the keys of their tables, so that an editor
    offers those of the kind at hand and points at the one key that is wrong.
    """
    groups: list[Mapping[str, type[Table]]] = [PART_TABLES, NET_TABLES, INPUT_TABLES, _NAMED, _LISTED, _SINGLE]
    unique = list(dict.fromkeys(table for group in groups for table in group.values()))
    references, definitions = models_json_schema(
        [(table, "validation") for table in unique], by_alias=True, schema_generator=_Generator
    )
    by_table = {table: references[table, "validation"] for table in unique}
    return {
        "$schema": DIALECT,
        "title": "Design file of rulecheck",
        "type": "object",
        "properties": _top_level(by_table),
        "required": ["format"],
        "additionalProperties": False,
        "$defs": _tidy(definitions["$defs"]),
    }


def _top_level(by_table: Mapping[type[Table], Schema]) -> Schema:
    properties: Schema = {
        "format": {"const": 1},
        "catalogues": {"type": "array", "items": {"type": "string"}, "uniqueItems": True},
        "nets": {"type": "object", "additionalProperties": _net(by_table)},
        "parts": {"type": "object", "additionalProperties": _chosen("kind", PART_TABLES, by_table)},
        "rules": {"type": "object", "additionalProperties": _RULE_SETTINGS},
    }
    properties |= {key: dict(by_table[table]) for key, table in _SINGLE.items()}
    properties |= {key: {"type": "object", "additionalProperties": by_table[t]} for key, t in _NAMED.items()}
    properties |= {key: {"type": "array", "items": by_table[table]} for key, table in _LISTED.items()}
    return {key: {"description": words, **properties[key]} for key, words in TOP_LEVEL.items()}


def _chosen(key: str, tables: Mapping[str, type[Table]], by_table: Mapping[type[Table], Schema]) -> Schema:
    """Schema of a table whose word at `key` chooses its other keys."""
    return _by_word(key, tables, {word: by_table[table] for word, table in tables.items()})


def _by_word(key: str, words: Iterable[str], schemas: Mapping[str, Schema]) -> Schema:
    return {
        "type": "object",
        "required": [key],
        "properties": {key: {"enum": list(words)}},
        "allOf": [
            {"if": {"properties": {key: {"const": word}}, "required": [key]}, "then": schema}
            for word, schema in schemas.items()
        ],
    }


def _net(by_table: Mapping[type[Table], Schema]) -> Schema:
    schemas = {role: by_table[table] for role, table in NET_TABLES.items()}
    return _by_word("role", ROLES, {**schemas, "input": _chosen("drive", INPUT_TABLES, by_table)})


def _tidy(definitions: Mapping[str, Schema]) -> Schema:
    """Definitions with one description a key, and without the titles that are made from names."""
    for definition in definitions.values():
        definition.pop("title", None)
        for schema in definition.get("properties", {}).values():
            schema.pop("title", None)
    return dict(definitions)
