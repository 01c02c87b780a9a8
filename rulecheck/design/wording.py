"""Errors of validation in plain words: what was found, what is allowed, the nearest right word."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from typing import TYPE_CHECKING, Any, get_args

from pydantic import ValidationError

from rulecheck.design.fields import FAULT, OUT_OF_BOUNDS, Table, did_you_mean, shown

if TYPE_CHECKING:
    from rulecheck.design.source import Problems

_EXPECTED = {
    "string_type": "a text in quotes",
    "bool_type": "true or false, without quotes,",
    "dict_type": "a table",
    "model_type": "a table",
    "list_type": "a list",
}


def report(error: ValidationError, table: type[Table], path: Sequence[str | int], problems: Problems) -> None:
    """Add every error of a table that stands at `path` to `problems`."""
    for item in error.errors(include_url=False):
        location = item["loc"]
        message, hint = _explain(item, table)
        problems.add([*path, *location], message, hint, of_key=item["type"] == "extra_forbidden")


def _explain(item: Mapping[str, Any], table: type[Table]) -> tuple[str, str]:
    kind, location, found = item["type"], item["loc"], item["input"]
    if kind in (FAULT, "quantity"):
        return str(item["ctx"]["message"]), ""
    if kind == OUT_OF_BOUNDS:
        return f"{_written(found)} is out of bounds: {item['ctx']['message']}", ""
    inner = table_at(table, location[:-1])
    name = str(location[-1]) if location else ""
    if kind == "missing":
        return f"{name!r} is missing; {inner.called} needs it", _description(inner, name)
    if kind == "extra_forbidden":
        return unknown_key(name, keys_of(inner), inner.called)
    if kind == "literal_error":
        words = re.findall(r"'([^']*)'", str(item["ctx"]["expected"]))
        return f"{shown(found)} is not known here; {_one_of(words)} is expected", did_you_mean(found, words)
    expected = _EXPECTED.get(kind, "something else")
    return f"{shown(found)} is given; {expected} is expected", _description(inner, name)


def unknown_key(name: str, allowed: Sequence[str], called: str) -> tuple[str, str]:
    """Message and hint for a key that a table does not have."""
    keys = f"keys of {called} are {', '.join(allowed)}"
    nearest = did_you_mean(name, allowed)
    return f"there is no key {name!r} in {called}", f"{nearest} {keys}" if nearest else keys


def _one_of(words: Sequence[str]) -> str:
    quoted = [repr(word) for word in words]
    return quoted[0] if len(quoted) == 1 else f"one of {', '.join(quoted)}"


def _written(value: object) -> str:
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{key} = {shown(inner)}" for key, inner in value.items()) + " }"
    return shown(value)


def keys_of(table: type[Table]) -> list[str]:
    """Keys of a table as written in files, in the order declared."""
    return [field.alias or name for name, field in table.model_fields.items()]


def _description(table: type[Table], name: str) -> str:
    for field_name, field in table.model_fields.items():
        if name in (field_name, field.alias):
            return field.description or ""
    return ""


def table_at(table: type[Table], location: Sequence[str | int]) -> type[Table]:
    """The table that stands at a location within a table."""
    for segment in location:
        field = table.model_fields.get(str(segment))
        inner = next(_tables_in(field.annotation), None) if field is not None else None
        if inner is None:
            break
        table = inner
    return table


def _tables_in(annotation: Any) -> Iterator[type[Table]]:  # noqa: ANN401
    if isinstance(annotation, type) and issubclass(annotation, Table):
        yield annotation
    for inner in get_args(annotation):
        yield from _tables_in(inner)
