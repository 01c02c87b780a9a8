"""From parsed tables to validated ones, one at a time.

Of a table with errors the sound keys are kept, so that what they name can be checked all the same; its
errors are collected, and no design is built.
"""

from __future__ import annotations

import difflib
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Annotated, Any, TypeVar

from pydantic import TypeAdapter, ValidationError

from rulecheck.design.fields import Table, did_you_mean, shown
from rulecheck.design.nets import INPUT_TABLES, NET_TABLES, ROLES, NetTable
from rulecheck.design.parts import PART_TABLES, PartTable
from rulecheck.design.source import Problems
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
from rulecheck.design.wording import report, unknown_key

MOST_PARTS = 20_000
FORMAT = 1

T = TypeVar("T", bound=Table)
Path = tuple[str | int, ...]
Choice = Callable[[Mapping[str, Any], Path, Problems], type[T] | None]


@dataclass(frozen=True)
class Tables:
    """The tables of a design file, by name or in their order; keys with errors are None."""

    head: Head = field(default_factory=Head)
    environment: Environment = field(default_factory=Environment)
    nets: Mapping[str, NetTable] = field(default_factory=dict)
    parts: Mapping[str, PartTable] = field(default_factory=dict)
    packages: Mapping[str, PackageTable] = field(default_factory=dict)
    thermal_links: Mapping[str, ThermalLinkTable] = field(default_factory=dict)
    matching: Mapping[str, MatchingTable] = field(default_factory=dict)
    requirements: Mapping[str, RequirementTable] = field(default_factory=dict)
    concessions: Mapping[str, ConcessionTable] = field(default_factory=dict)
    rules: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)


def read_tables(data: Mapping[str, Any], problems: Problems) -> Tables:
    """Validate all tables of a design file."""
    check_format(data, problems, needed=True)
    _check_top_level(data, problems)
    return Tables(
        head=_one(data, "design", Head, problems),
        environment=_one(data, "environment", Environment, problems),
        nets=by_name(data, "nets", _net_table, problems),
        parts=by_name(data, "parts", _part_table, problems),
        packages=by_name(data, "packages", _always(PackageTable), problems),
        thermal_links=_listed(data, "thermal_links", ThermalLinkTable, problems),
        matching=by_name(data, "matching", _always(MatchingTable), problems),
        requirements=by_name(data, "requirements", _always(RequirementTable), problems),
        concessions=_listed(data, "concessions", ConcessionTable, problems),
        rules=_rule_settings(data, problems),
    )


def check_format(data: Mapping[str, Any], problems: Problems, *, needed: bool) -> None:
    """Check the version of the format that a file names."""
    if "format" not in data:
        if needed:
            problems.add(["format"], "'format' is missing; a design file says which format it has", "format = 1")
    elif data["format"] != FORMAT or isinstance(data["format"], bool | float):
        problems.add(["format"], f"format {shown(data['format'])} is not known; this version reads format = {FORMAT}")


def _check_top_level(data: Mapping[str, Any], problems: Problems) -> None:
    for name in data:
        if name not in TOP_LEVEL:
            message, hint = unknown_key(name, list(TOP_LEVEL), "a design file")
            if name == "models":
                hint = "models stand in a file of their own that catalogues names"
            problems.add([name], message, hint, of_key=True)
    parts = data.get("parts")
    if isinstance(parts, Mapping) and len(parts) > MOST_PARTS:
        problems.add(["parts"], f"there are {len(parts)} parts; at most {MOST_PARTS} are read")


def read_table(value: object, table: type[T], path: Path, problems: Problems) -> T | None:
    """A table that stands at `path`, None where there is no table; keys with errors are None, and given."""
    try:
        return table.model_validate(value)
    except ValidationError as error:
        report(error, table, path, problems)
        faulty = {item["loc"][0] for item in error.errors(include_url=False) if item["loc"]}
        return _sound_keys(value, table, faulty) if isinstance(value, Mapping) else None


def _sound_keys(value: Mapping[str, Any], table: type[T], faulty: set[str | int]) -> T:
    fields: dict[str, Any] = {}
    for name, field_ in table.model_fields.items():
        key = field_.alias or name
        if key in faulty:
            fields[name] = None
        elif key in value:
            kind: Any = field_.annotation
            for annotation in field_.metadata:
                kind = Annotated[kind, annotation]
            fields[name] = TypeAdapter[Any](kind).validate_python(value[key])
    given = {name for name in fields if (table.model_fields[name].alias or name) in value}
    return table.model_construct(given, **{**dict.fromkeys(table.model_fields), **_defaults(table), **fields})


def _defaults(table: type[Table]) -> dict[str, Any]:
    return {name: field_.default for name, field_ in table.model_fields.items() if not field_.is_required()}


def _one(data: Mapping[str, Any], name: str, table: type[T], problems: Problems) -> T:
    return read_table(data.get(name, {}), table, (name,), problems) or table()


def by_name(data: Mapping[str, Any], key: str, choose: Choice[T], problems: Problems) -> dict[str, T]:
    """Tables of ``[key.NAME]``."""
    tables: dict[str, T] = {}
    for name, entry in _table(data, key, problems).items():
        if not isinstance(entry, Mapping):
            problems.add([key, name], f"{shown(entry)} is given; a table is expected, [{key}.NAME] with its keys")
        elif table := choose(entry, (key, name), problems):
            read = read_table(entry, table, (key, name), problems)
            if read is not None:
                tables[name] = read
    return tables


def _table(data: Mapping[str, Any], key: str, problems: Problems) -> Mapping[str, Any]:
    value = data.get(key, {})
    if isinstance(value, Mapping):
        return value
    problems.add([key], f"{shown(value)} is given; tables [{key}.NAME] are expected")
    return {}


def _listed(data: Mapping[str, Any], key: str, table: type[T], problems: Problems) -> dict[str, T]:
    """Tables of ``[[key]]`` by their index."""
    value = data.get(key, [])
    if not isinstance(value, list):
        problems.add([key], f"{shown(value)} is given; a list of tables is expected, each under [[{key}]]")
        return {}
    read = {str(index): read_table(entry, table, (key, index), problems) for index, entry in enumerate(value)}
    return {index: entry for index, entry in read.items() if entry is not None}


def _always(table: type[T]) -> Choice[T]:
    return lambda _entry, _path, _problems: table


def chosen(
    entry: Mapping[str, Any], key: str, tables: Mapping[str, type[T]], path: Path, problems: Problems,
    allowed: Sequence[str] = (),
) -> type[T] | None:  # fmt: skip
    """The table that the word at `key` of `entry` asks for."""
    words = allowed or list(tables)
    expected = f"one of {', '.join(map(repr, words))}"
    if key not in entry:
        near = difflib.get_close_matches(key, entry, n=1)
        hint = f"is {near[0]!r} meant to be {key!r}?" if near else ""
        problems.add([*path, near[0] if near else key], f"{key!r} is missing; {expected} is expected", hint)
        return None
    word = entry[key]
    if isinstance(word, str) and word in tables:
        return tables[word]
    problems.add([*path, key], f"there is no {key} {shown(word)}; {expected} is expected", did_you_mean(word, words))
    return None


def _part_table(entry: Mapping[str, Any], path: Path, problems: Problems) -> type[PartTable] | None:
    return chosen(entry, "kind", PART_TABLES, path, problems)


def _net_table(entry: Mapping[str, Any], path: Path, problems: Problems) -> type[NetTable] | None:
    if entry.get("role") == "input":
        return chosen(entry, "drive", INPUT_TABLES, path, problems)
    return chosen(entry, "role", NET_TABLES, path, problems, ROLES)


def _rule_settings(data: Mapping[str, Any], problems: Problems) -> dict[str, Mapping[str, Any]]:
    rules = _table(data, "rules", problems)
    for name, settings in rules.items():
        if not isinstance(settings, Mapping):
            problems.add(["rules", name], f"{shown(settings)} is given; a table of settings is expected")
    return {name: settings for name, settings in rules.items() if isinstance(settings, Mapping)}
