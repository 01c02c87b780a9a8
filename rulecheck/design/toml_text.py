"""Values and tables as text of TOML, in the style of the design files."""

from __future__ import annotations

import datetime as dt
import math
import re
from collections.abc import Mapping, Sequence
from numbers import Integral, Real
from typing import Any

from rulecheck.design.keypath import KeyPath, basic_string, join_key, quote
from rulecheck.errors import EditError

NAMED_BLOCKS = frozenset({"models", "parts", "packages", "matching", "requirements", "rules"})
"""Top tables whose keys are names, each written as a block with a header of its own."""

Toml = Any
"""What tomli gives: text, numbers, dates, and lists and tables of them."""

_LITERAL = re.compile(r"[^'\x00-\x08\x0a-\x1f\x7f]*")


def plain(value: object) -> Toml:
    """Give `value` in the types that tomli gives, so that it compares with parsed data.

    Raises
    ------
    EditError
        TOML cannot hold it.
    """
    if isinstance(value, str):
        try:
            value.encode()
        except UnicodeEncodeError:
            raise EditError(f"{value!r} cannot be written: it is not valid Unicode") from None
        return str(value)
    if isinstance(value, bool | dt.date | dt.time):
        return value
    if isinstance(value, Integral):
        return int(value)
    if isinstance(value, Real):
        return float(value)
    if isinstance(value, Mapping):
        return {str(key): plain(inner) for key, inner in value.items()}
    if isinstance(value, Sequence) and not isinstance(value, bytes | bytearray):
        return [plain(inner) for inner in value]
    raise EditError(f"{value!r} cannot be written in TOML", "give text, a number, a date, a list or a table")


def to_toml(value: object, like: str = "") -> str:
    """Write `value` as TOML on one line; a string in the quotation marks of the text `like` where it can."""
    return _text(plain(value), like)


def _text(value: Toml, like: str = "") -> str:
    """Write what `plain` gave."""
    match value:
        case bool():
            return "true" if value else "false"
        case str():
            return f"'{value}'" if like.startswith("'") and _LITERAL.fullmatch(value) else basic_string(value)
        case float() if math.isnan(value):
            return "nan"
        case int() | float():
            return repr(value)
        case dict():
            inner = ", ".join(f"{quote(key)} = {_text(item)}" for key, item in value.items())
            return f"{{ {inner} }}" if inner else "{}"
        case list():
            return f"[{', '.join(map(_text, value))}]"
    return str(value.isoformat())


def block(written: KeyPath, table: Mapping[str, Toml], *, array: bool = False, equals: str = " = ") -> list[str]:
    """Lines of `table` under the header `written`: keys on lines of their own, inner tables inline.

    A table of named blocks becomes one block for each of them.
    """
    if not array and len(written) == 1 and written[0] in NAMED_BLOCKS and _holds_tables(table):
        lines: list[str] = []
        for name, inner in table.items():
            lines += ([""] if lines else []) + block((*written, name), inner, equals=equals)
        return lines
    header = f"[[{join_key(written)}]]" if array else f"[{join_key(written)}]"
    return [header, *(f"{quote(key)}{equals}{to_toml(value)}" for key, value in table.items())]


def _holds_tables(table: Mapping[str, Toml]) -> bool:
    return bool(table) and all(isinstance(inner, Mapping) for inner in table.values())
