"""Dotted key paths of a design file: text such as ``parts.U1.pins."IN+"`` and the tuple of its segments.

The index of an array element is a segment like any other, a bare number: ``parts.R4.pins.0``.
Nothing in a file can be both an array and a table, so that a path means one thing in a given file.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Mapping

KeyPath = tuple[str, ...]

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_QUOTED = re.compile(r'"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\'')


def split_key(key: str) -> KeyPath:
    """Split the dotted `key` into its segments.

    Segments may be quoted as in TOML. What stands between two dots without quotation marks is taken
    as it is, so that ``parts.U1.pins.IN+`` is understood too.

    Raises
    ------
    ValueError
        A segment is empty, a quotation mark is not closed, or something follows the closing one.
    """
    segments: list[str] = []
    at = 0
    while True:
        start = at + len(key[at:]) - len(key[at:].lstrip())
        if key[start : start + 1] in ('"', "'"):
            segment, at = _quoted_segment(key, start)
        else:
            dot = key.find(".", start)
            at = len(key) if dot < 0 else dot
            segment = key[start:at].strip()
            if not segment:
                raise ValueError(f"key path {key!r}: segment {len(segments) + 1} is empty")
        segments.append(segment)
        if at >= len(key):
            return tuple(segments)
        at += 1  # over the dot


def _quoted_segment(key: str, start: int) -> tuple[str, int]:
    """Read the quoted segment at `start`, and where the dot behind it (or the end) is."""
    match = _QUOTED.match(key, start)
    if not match:
        raise ValueError(f"key path {key!r}: the quotation mark at character {start + 1} is not closed")
    end = match.end()
    end += len(key[end:]) - len(key[end:].lstrip())
    if end < len(key) and key[end] != ".":
        raise ValueError(f"key path {key!r}: a dot is due at character {end + 1}, not {key[end]!r}")
    return unquote(match.group()), end


def join_key(path: Iterable[str | int]) -> str:
    """Join `path` to dotted text; segments that are not bare keys of TOML are quoted."""
    return ".".join(quote(str(segment)) for segment in path)


def quote(segment: str) -> str:
    """Write `segment` as a key of TOML: as it is where it may stand bare, else as a basic string."""
    return segment if _BARE.fullmatch(segment) else basic_string(segment)


def unquote(text: str) -> str:
    """Read `text`, a bare or quoted key of TOML."""
    if text[0] == "'" or (text[0] == '"' and "\\" not in text):
        return text[1:-1]
    if text[0] != '"':
        return text
    import tomli

    return str(tomli.loads(f"key = {text}")["key"])


def basic_string(text: str) -> str:
    """Write `text` as a basic string of TOML, on one line."""
    # JSON's escapes are all escapes of TOML; TOML wants one control character more escaped.
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def value_at(data: object, path: KeyPath) -> object:
    """Look up what stands at `path` in the parsed `data`; KeyError where there is nothing."""
    for segment in path:
        if isinstance(data, Mapping) and segment in data:
            data = data[segment]
        elif isinstance(data, list) and segment in map(str, range(len(data))):
            data = data[int(segment)]
        else:
            raise KeyError(join_key(path))
    return data
