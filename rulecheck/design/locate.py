"""Where every key and value of a TOML text stands.

tomli judges and parses a text; it gives no places. This scanner runs behind it on text that tomli
accepts, and finds the span of each key, value, header and array element of TOML 1.1.
Offsets count characters of the text as given, line ends included as they are.
"""

from __future__ import annotations

import re
from bisect import bisect_right
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

from rulecheck.design.keypath import KeyPath, unquote

Range = tuple[int, int]
"""Offsets of the first character and of the one after the last."""

BYTE_ORDER_MARK = "\ufeff"

_BASIC = r'"(?:[^"\\\n]++|\\.)*+"'
_LITERAL = r"'[^'\n]*'"
_BLANKS = re.compile(r"[ \t]*")
_TRIVIA = re.compile(r"(?:[ \t\r\n]++|#[^\n]*+)*+")
_KEY = re.compile(rf"[A-Za-z0-9_-]+|{_BASIC}|{_LITERAL}")
_SCALAR = re.compile(
    # up to two quotation marks may stand before the closing three
    r'"""(?:[^"\\]++|\\.|"{1,2}(?!"))*+"""(?:"{0,2})'
    r"|'''(?:[^']++|'{1,2}(?!'))*+'''(?:'{0,2})"
    rf"|{_BASIC}|{_LITERAL}"
    # a blank may part date and time
    r"|(?:\d{4}-\d{2}-\d{2} (?=\d))?[^\s,\]}#\"']+",
    re.DOTALL,
)


@dataclass(frozen=True, slots=True)
class Span:
    """Where one key path stands in the text.

    Parameters
    ----------
    key : Range
        The path's own segment of the key; for an array element, the element.
    value : Range
        The value or element. A table that has no value of its own has the header, or the dotted key, that
        it is first named in; its own header wins over those of its sub-tables.
    line, column : int
        Start of `value`, from 1; the column counts characters.
    kind : str
        ``"value"`` for a value or element, ``"header"`` for a table with a header of its own,
        ``"implied"`` where only longer paths name it.
    """

    key: Range
    value: Range
    line: int
    column: int
    kind: Literal["value", "header", "implied"]


@dataclass(frozen=True, slots=True)
class Entry:
    """One thing written: a header, a ``key = value``, or an element of an array.

    Parameters
    ----------
    kind : str
        ``"table"`` for ``[x]``, ``"array"`` for ``[[x]]``, ``"pair"`` or ``"element"``.
    path : KeyPath
        Full path of what it defines, with the indices of arrays.
    context : int
        How many leading segments of `path` come from the header or container around it.
    start, end : int
        The whole entry without a comment; for a pair from the first key to the end of the value.
    keys : tuple of Range
        The segments as written, one for each of ``path[context:]``. The index of an array is not written; it
        has the range of the name before it in a header, and that of the element in an array.
    value : Range
        The value; for a header the whole header.
    """

    kind: Literal["table", "array", "pair", "element"]
    path: KeyPath
    context: int
    start: int
    end: int
    keys: tuple[Range, ...]
    value: Range


class Spans(Mapping[KeyPath, Span]):
    """Spans of all key paths of a text.

    Attributes
    ----------
    entries : tuple of Entry
        Headers and pairs that stand on lines of their own, in the order of the text.
    children : mapping of KeyPath to tuple of Entry
        Per array or inline table, its elements or pairs.
    """

    def __init__(self, text: str, entries: Sequence[Entry], children: Mapping[KeyPath, tuple[Entry, ...]]) -> None:
        self.entries = tuple(entries)
        self.children = children
        self._line_starts = [0, *(match.end() for match in re.finditer("\n", text))]
        if text.startswith(BYTE_ORDER_MARK):
            self._line_starts[0] = 1
        self._spans: dict[KeyPath, Span] = {}
        for entry in entries:
            self._enter(entry)

    def _enter(self, entry: Entry) -> None:
        """Enter the spans of `entry`, of the tables it implies and of what it contains."""
        whole = (entry.start, entry.keys[-1][1]) if entry.kind == "pair" else entry.value
        for length, key in enumerate(entry.keys[:-1], entry.context + 1):
            if entry.path[:length] not in self._spans:
                self._spans[entry.path[:length]] = self._span(key, whole, "implied")
        known = self._spans.get(entry.path)
        if known is None or known.kind == "implied":
            kind: Literal["value", "header"] = "header" if entry.kind in ("table", "array") else "value"
            self._spans[entry.path] = self._span(entry.keys[-1], entry.value, kind)
        for child in self.children.get(entry.path, ()):
            self._enter(child)

    def _span(self, key: Range, value: Range, kind: Literal["value", "header", "implied"]) -> Span:
        line, column = self.position(value[0])
        return Span(key, value, line, column, kind)

    def position(self, offset: int) -> tuple[int, int]:
        """Line and column of `offset`, from 1; a byte-order mark takes no column."""
        line = max(bisect_right(self._line_starts, offset), 1)
        return line, max(offset - self._line_starts[line - 1], 0) + 1

    def nearest(self, path: Sequence[str | int]) -> tuple[KeyPath, Span]:
        """Find the longest leading part of `path` that the text has, and its span.

        At worst that is the empty path, at the start of the text.
        """
        segments = tuple(map(str, path))
        for length in range(len(segments), 0, -1):
            if segments[:length] in self._spans:
                return segments[:length], self._spans[segments[:length]]
        return (), self._span((0, 0), (0, 0), "implied")

    def __getitem__(self, path: Sequence[str | int]) -> Span:
        return self._spans[tuple(map(str, path))]

    def __iter__(self) -> Iterator[KeyPath]:
        return iter(self._spans)

    def __len__(self) -> int:
        return len(self._spans)


def skip_trivia(text: str, at: int) -> int:
    """Pass over the blanks, line ends and comments at `at`."""
    match = _TRIVIA.match(text, at)
    return match.end() if match else at


def scan(text: str) -> Spans:
    """Find all keys and values of `text`, which tomli accepts; a byte-order mark is passed over.

    Raises
    ------
    ValueError
        The text is not TOML.
    """
    return _Scanner(text).scan()


class _Scanner:
    """One pass over a text."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.entries: list[Entry] = []
        self.children: dict[KeyPath, tuple[Entry, ...]] = {}
        self.header: KeyPath = ()
        self.last_index: dict[KeyPath, int] = {}  # of each array of tables so far

    def scan(self) -> Spans:
        at = skip_trivia(self.text, int(self.text.startswith(BYTE_ORDER_MARK)))
        while at < len(self.text):
            entry = self.header_at(at) if self.text[at] == "[" else self.pair_at(at, self.header)
            self.entries.append(entry)
            at = skip_trivia(self.text, entry.end)
        return Spans(self.text, self.entries, self.children)

    def header_at(self, start: int) -> Entry:
        """Read the header ``[x]`` or ``[[x]]`` at `start`, which later pairs come under."""
        brackets = 2 if self.text.startswith("[[", start) else 1
        ranges, at = self.keys_at(start + brackets)
        end = self.expect("]" * brackets, at)
        path: KeyPath = ()
        keys: list[Range] = []
        for number, key in enumerate(ranges, 1):
            path += (unquote(self.text[slice(*key)]),)
            keys.append(key)
            if brackets == 2 and number == len(ranges):
                self.last_index[path] = self.last_index.get(path, -1) + 1
            if path in self.last_index:
                path += (str(self.last_index[path]),)
                keys.append(key)
        self.header = path
        return Entry("array" if brackets == 2 else "table", path, 0, start, end, tuple(keys), (start, end))

    def pair_at(self, start: int, context: KeyPath) -> Entry:
        """Read the ``key = value`` at `start` in the table `context`."""
        keys, at = self.keys_at(start)
        path = context + tuple(unquote(self.text[slice(*key)]) for key in keys)
        value = self.value_at(self.blanks(self.expect("=", at)), path)
        return Entry("pair", path, len(context), start, value[1], keys, value)

    def keys_at(self, at: int) -> tuple[tuple[Range, ...], int]:
        """Read the segments of a dotted key, and where the text goes on after it."""
        keys: list[Range] = []
        while True:
            match = _KEY.match(self.text, self.blanks(at))
            if not match:
                raise self.error("a key", at)
            keys.append(match.span())
            at = self.blanks(match.end())
            if not self.text.startswith(".", at):
                return tuple(keys), at
            at += 1

    def value_at(self, start: int, path: KeyPath) -> Range:
        """Find the end of the value at `start`; `children` takes up what it contains."""
        if self.text.startswith(("[", "{"), start):
            return start, self.container_at(start, path)
        match = _SCALAR.match(self.text, start)
        if not match:
            raise self.error("a value", start)
        return match.span()

    def container_at(self, start: int, path: KeyPath) -> int:
        """Find the end of the array or inline table at `start`."""
        closing = "]" if self.text[start] == "[" else "}"
        found: list[Entry] = []
        at = skip_trivia(self.text, start + 1)
        while not self.text.startswith(closing, at):
            if closing == "}":
                entry = self.pair_at(at, path)
            else:
                own = (*path, str(len(found)))
                value = self.value_at(at, own)
                entry = Entry("element", own, len(path), *value, (value,), value)
            found.append(entry)
            at = skip_trivia(self.text, entry.end)
            if not self.text.startswith(closing, at):
                at = skip_trivia(self.text, self.expect(",", at))
        self.children[path] = tuple(found)
        return at + 1

    def expect(self, token: str, at: int) -> int:
        if not self.text.startswith(token, at):
            raise self.error(repr(token), at)
        return at + len(token)

    def blanks(self, at: int) -> int:
        match = _BLANKS.match(self.text, at)
        return match.end() if match else at

    def error(self, due: str, at: int) -> ValueError:
        return ValueError(f"not TOML: {due} is due at character {at + 1}, not {self.text[at : at + 1]!r}")
