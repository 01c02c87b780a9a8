"""The text of a design file with its data and places, and the questions that edits ask of it."""

from __future__ import annotations

from typing import Any

import tomli

from rulecheck.design.keypath import KeyPath, value_at
from rulecheck.design.locate import Entry, scan


class Document:
    r"""A text that tomli accepts, without a byte-order mark.

    Attributes
    ----------
    data : dict
        As tomli gives it.
    spans : Spans
    newline : str
        Line end of the file, ``"\n"`` or ``"\r\n"``.
    equals : str
        How the file writes the sign between key and value, ``" = "`` or ``"="``.
    """

    def __init__(self, text: str) -> None:
        self.text = text
        self.data: dict[str, Any] = tomli.loads(text)
        self.spans = scan(text)
        first = text.find("\n")
        self.newline = "\r\n" if first > 0 and text[first - 1] == "\r" else "\n"
        pairs = [entry for entry in self.spans.entries if entry.kind == "pair"]
        self.equals = "=" if pairs and text[pairs[0].keys[-1][1]] == "=" else " = "

    def has(self, path: KeyPath) -> bool:
        """Whether there is anything at `path`."""
        try:
            value_at(self.data, path)
        except KeyError:
            return False
        return True

    def within(self, path: KeyPath) -> list[Entry]:
        """Find the entries on lines of their own that lie at or below `path`."""
        return [entry for entry in self.spans.entries if entry.path[: len(path)] == path]

    def container(self, path: KeyPath) -> KeyPath | None:
        """Find the innermost array or inline table that is at `path` or holds it."""
        for length in range(len(path), 0, -1):
            if path[:length] in self.spans.children:
                return path[:length]
        return None

    def written(self, path: KeyPath) -> KeyPath:
        """Give `path` as headers write it: without the indices of arrays of tables."""
        elements = {entry.path for entry in self.spans.entries if entry.kind == "array"}
        return tuple(segment for number, segment in enumerate(path, 1) if path[:number] not in elements)

    def line_start(self, offset: int) -> int:
        """Find the start of the line that `offset` is in."""
        return self.text.rfind("\n", 0, offset) + 1

    def line_end(self, offset: int) -> int:
        """Find the end of the line that `offset` is in, before its line end."""
        end = self.text.find("\n", offset)
        if end < 0:
            return len(self.text)
        return end - 1 if end > offset and self.text[end - 1] == "\r" else end

    def next_line(self, offset: int) -> int:
        """Find the start of the line after that of `offset`, or the end of the text."""
        return self.text.find("\n", offset) + 1 or len(self.text)

    def line(self, offset: int) -> str:
        """Give the line that `offset` is in, without blanks around it."""
        return self.text[self.line_start(offset) : self.line_end(offset)].strip()

    def blank_before(self, start: int) -> bool:
        """Whether a blank line, or nothing, comes before the line that begins at `start`."""
        return start == 0 or not self.line(start - 1)

    def blank_at(self, start: int) -> bool:
        """Whether a blank line, or nothing, begins at `start`."""
        return start >= len(self.text) or not self.line(start)

    def comments_above(self, offset: int) -> int:
        """Find the start of the comment lines directly above the line of `offset`, else of that line."""
        start = self.line_start(offset)
        ends = [entry.end for entry in self.spans.entries if entry.end <= start]
        floor = self.next_line(ends[-1]) if ends else 0  # a multi-line string may have lines like comments
        while start > floor and self.line(start - 1).startswith("#"):
            start = self.line_start(start - 1)
        return start

    def comments_below(self, offset: int) -> int:
        """Find the start of the line after that of `offset` and the comments directly below it.

        Comments directly above something else belong to that, and are left.
        """
        after = end = self.next_line(offset)
        while end < len(self.text) and self.line(end).startswith("#"):
            end = self.next_line(end)
        return end if self.blank_at(end) else after
