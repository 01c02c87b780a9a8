"""New keys, tables and elements in the text of a design file, in the style of what stands beside them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rulecheck.design.document import Document
from rulecheck.design.inline import append
from rulecheck.design.keypath import KeyPath, join_key, quote, value_at
from rulecheck.design.locate import Entry
from rulecheck.design.toml_text import NAMED_BLOCKS, Toml, block, to_toml
from rulecheck.errors import EditError


def insert(document: Document, path: KeyPath, value: Toml) -> str:
    """Give the text of `document` with `value` at `path`, where nothing is yet.

    Tables that are missing on the way are made. `value` is as `plain` gives it.
    """
    depth = len(path) - 1
    while not document.has(path[:depth]):
        depth -= 1
    for segment in reversed(path[depth + 1 :]):
        value = {segment: value}
    parent, name = path[:depth], path[depth]
    holder = value_at(document.data, parent)
    if not isinstance(holder, dict | list):
        line = document.spans[parent].line
        raise EditError(f"{join_key(path)}: {join_key(parent)} (line {line}) is a value, not a table")
    if isinstance(holder, list) and name != str(len(holder)):
        raise EditError(f"{join_key(path)}: the next element of {join_key(parent)} is number {len(holder)}")
    if document.container(parent) is not None:
        return append(document, parent, name, value)
    if isinstance(holder, list):
        return append_tables(document, parent, [value])
    if isinstance(value, dict):
        return _insert_table(document, parent, name, value)
    if not parent and isinstance(value, list) and value and all(isinstance(item, dict) for item in value):
        return append_tables(document, path, value)
    return _insert_pair(document, parent, name, value)


def append_tables(document: Document, path: KeyPath, tables: Sequence[Mapping[str, Toml]]) -> str:
    """Append `tables` as ``[[path]]`` blocks after those that are there, else at the end."""
    if not all(isinstance(table, Mapping) for table in tables):
        raise EditError(f"{join_key(path)} holds tables, not values")
    lines: list[str] = []
    for table in tables:
        lines += [""] if lines else []
        lines += block(document.written(path), table, array=True, equals=document.equals)
    others = document.within(path)
    return _insert_block(document, others[-1] if others else None, lines)


def _insert_table(document: Document, parent: KeyPath, name: str, table: Mapping[str, Toml]) -> str:
    """Insert `table` after the last table of its kind in `parent`, written as that is."""
    sibling = _sibling(document, parent, table)
    if sibling is None:
        if parent and not _takes_blocks(document, parent):
            return _insert_pair(document, parent, name, table)
        sibling = document.within(parent)[-1] if parent else None
    elif sibling.kind == "pair" and sibling.context <= len(parent):
        if len(sibling.path) == len(parent) + 1 or not table:
            return _insert_after(document, sibling, parent, {quote(name): table})
        dotted = {join_key((name, key)): inner for key, inner in table.items()}
        return _insert_after(document, sibling, parent, dotted)
    lines = block(document.written((*parent, name)), table, equals=document.equals)
    return _insert_block(document, sibling, lines)


def _takes_blocks(document: Document, parent: KeyPath) -> bool:
    """Whether the first table in `parent` is to be a block with a header of its own."""
    last = document.within(parent)[-1]
    under_header = last.kind != "pair" or last.context >= len(parent)
    return len(parent) == 1 and parent[0] in NAMED_BLOCKS and under_header


def _sibling(document: Document, parent: KeyPath, table: Mapping[str, Toml]) -> Entry | None:
    """Find the last entry of the last table in `parent`, of those of the same ``kind`` if any are."""
    tables: Toml = value_at(document.data, parent)
    last: dict[str, Entry] = {}
    for entry in document.within(parent):
        name = entry.path[len(parent)] if len(entry.path) > len(parent) else None
        if name is not None and isinstance(tables[name], dict):
            last[name] = entry
    kind = table.get("kind")
    same = [entry for name, entry in last.items() if kind and tables[name].get("kind") == kind]
    return max(same or last.values(), key=lambda entry: entry.start, default=None)


def _insert_pair(document: Document, parent: KeyPath, name: str, value: Toml) -> str:
    """Insert the key `name` after the last key of the table `parent`, whose header is made if it has none."""
    within = document.within(parent)
    siblings = [entry for entry in within if entry.kind == "pair" and entry.context <= len(parent)]
    if siblings:
        return _insert_after(document, siblings[-1], parent, {quote(name): value})
    line = quote(name) + document.equals + to_toml(value)
    header = next((entry for entry in within if entry.path == parent and parent), None)
    if header:
        return _insert_lines(document, document.line_end(header.end), [line])
    if not within:
        return _insert_block(document, None, [line])
    lines = [*([f"[{join_key(document.written(parent))}]"] if parent else []), line, "", ""]
    at = document.comments_above(within[0].start)
    return document.text[:at] + document.newline.join(lines) + document.text[at:]


def _insert_after(document: Document, sibling: Entry, parent: KeyPath, pairs: Mapping[str, Toml]) -> str:
    """Insert `pairs`, whose keys are quoted, after the line of `sibling`, a pair in the table `parent`."""
    text = document.text
    shared = len(parent) - sibling.context
    prefix = text[sibling.start : sibling.keys[shared - 1][1]] + "." if shared else ""
    indent = text[document.line_start(sibling.start) : sibling.start]
    lines = [indent + _assignment(document, prefix + name, sibling) + to_toml(value) for name, value in pairs.items()]
    return _insert_lines(document, document.line_end(sibling.end), lines)


def _assignment(document: Document, key: str, sibling: Entry) -> str:
    """Write `key` and the sign after it, in one column with the lines above where those keep to one."""
    text = document.text
    run = _lines_above(document, sibling)
    columns = {text.index("=", entry.keys[-1][1]) - entry.start for entry in run}
    if len(columns) == 1 and len({entry.keys[-1][1] - entry.start for entry in run}) > 1:
        key = f"{key} ".ljust(columns.pop())
    elif text[sibling.keys[-1][1]] != "=":
        key += " "
    sign = text.index("=", sibling.keys[-1][1])
    return key + text[sign : sibling.value[0]]


def _lines_above(document: Document, last: Entry) -> list[Entry]:
    """Find the pairs on the lines directly above `last`, and `last`."""
    entries = document.spans.entries
    number = entries.index(last)
    first = number
    while first and entries[first - 1].kind == "pair":
        if document.next_line(entries[first - 1].end) != document.line_start(entries[first].start):
            break
        first -= 1
    return list(entries[first : number + 1])


def _insert_lines(document: Document, at: int, lines: Sequence[str]) -> str:
    """Insert `lines` after the line that ends at `at`."""
    return document.text[:at] + "".join(document.newline + line for line in lines) + document.text[at:]


def _insert_block(document: Document, after: Entry | None, lines: Sequence[str]) -> str:
    """Insert `lines` below `after` and the comments that are its own, else at the end.

    They are set off by blank lines unless the block of `after` is not.
    """
    text = document.text
    stop = document.comments_below(after.end) if after else len(text)
    at = len(text[:stop].rstrip(" \t\r\n"))
    if not at:
        return "".join(line + document.newline for line in lines) + text
    headers = [entry for entry in document.spans.entries if entry.kind != "pair"]
    above = [header for header in headers if after and header.start <= after.start]
    if above and not document.blank_before(document.comments_above(above[-1].start)):
        return _insert_lines(document, at, lines)
    below = [] if stop == len(text) or document.blank_at(stop) else [""]
    return _insert_lines(document, at, ["", *lines, *below])
