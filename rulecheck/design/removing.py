"""Keys, tables and elements taken out of the text of a design file, with the comments that are theirs."""

from __future__ import annotations

from collections.abc import Iterator

from rulecheck.design.document import Document
from rulecheck.design.inline import remove_item
from rulecheck.design.keypath import KeyPath
from rulecheck.design.locate import Entry, Range


def remove(document: Document, path: KeyPath) -> str:
    """Give the text of `document` without what is at and below `path`."""
    holder = document.container(path[:-1])
    if holder is not None:
        return _remove_inline(document, holder, path)
    text = document.text
    for start, end in reversed([_lines(document, run) for run in _runs(document, path)]):
        text = text[:start] + text[end:]
    return text


def _remove_inline(document: Document, holder: KeyPath, path: KeyPath) -> str:
    """Remove the items of `holder` at or below `path`: several where dotted keys make up a table."""
    items = document.spans.children[holder]
    found = [index for index, item in enumerate(items) if item.path[: len(path)] == path]
    for index in reversed(found):
        document = Document(remove_item(document, holder, index))
    return document.text


def _runs(document: Document, path: KeyPath) -> Iterator[list[Entry]]:
    """Group the entries at or below `path` into runs that follow on one another."""
    run: list[Entry] = []
    for entry in document.spans.entries:
        if entry.path[: len(path)] == path:
            run.append(entry)
        elif run:
            yield run
            run = []
    if run:
        yield run


def _lines(document: Document, run: list[Entry]) -> Range:
    """Find the whole lines of `run`, its own comments, and the blank lines that would be doubled."""
    headed = any(entry.kind != "pair" for entry in run)
    end = document.comments_below(run[-1].end) if headed else document.next_line(run[-1].end)
    if run[0].kind != "pair" or not _heads_a_group(document, run):
        start = document.comments_above(run[0].start)
    else:
        start = document.line_start(run[0].start)
    if document.blank_before(start) and document.blank_at(end):
        while end < len(document.text) and document.blank_at(end):
            end = document.next_line(end)
        while end == len(document.text) and start > 0 and document.blank_before(start):
            start = document.line_start(start - 1)
    return start, end


def _heads_a_group(document: Document, run: list[Entry]) -> bool:
    """Whether the comment above `run` opens a group of keys that goes on after it, and so is not its own."""
    above = document.comments_above(run[0].start)
    opens = document.blank_before(above) or document.line(above - 1).startswith("[")
    after = document.next_line(run[-1].end)
    return opens and not document.blank_at(after) and not document.line(after).startswith(("#", "["))
