"""Edits within an array or an inline table: a new item, and one less."""

from __future__ import annotations

from rulecheck.design.document import Document
from rulecheck.design.keypath import KeyPath, join_key
from rulecheck.design.locate import skip_trivia
from rulecheck.design.toml_text import Toml, to_toml


def append(document: Document, parent: KeyPath, name: str, value: Toml) -> str:
    """Give the text with `name` = `value` as last item of the array or inline table that holds `parent`."""
    text, holder = document.text, document.container(parent) or ()
    start, end = document.spans[holder].value
    items = document.spans.children[holder]
    item = to_toml(value)
    if text[start] == "{":
        tight = bool(items) and text[items[-1].keys[-1][1]] == "="
        item = join_key((*parent[len(holder) :], name)) + ("=" if tight else " = ") + item
    if not items:
        return text[:start] + _only(item, text[start:end]) + text[end:]
    last = items[-1].end
    comma = skip_trivia(text, last)
    trailing = text[comma] == ","
    at = comma + 1 if trailing else last
    lead, tail = " ", "," if trailing else ""
    if "\n" in text[items[-2].end if len(items) > 1 else start : items[-1].start]:
        line = text[document.line_start(items[-1].start) : items[-1].start]
        lead = document.newline + line[: len(line) - len(line.lstrip())]
        if _nothing_but_comment(text[at : document.line_end(at)]):
            at = document.line_end(at)
    between = text[last:at] if trailing else "," + text[last:at]
    return text[:last] + between + lead + item + tail + text[at:]


def _only(item: str, holder: str) -> str:
    """Put `item` into the empty array or inline table `holder`, whose comments stay."""
    inner = holder[1:-1]
    if inner.strip():
        return f"{holder[0]} {item} {inner.lstrip(' ')}{holder[-1]}"
    return f"{{ {item} }}" if holder[0] == "{" else f"[{item}]"


def remove_item(document: Document, holder: KeyPath, index: int) -> str:
    """Give the text without item `index` of the array or inline table `holder`, and without its comma."""
    text, items = document.text, document.spans.children[holder]
    start, end = document.spans[holder].value
    item = items[index]
    comma = skip_trivia(text, item.end)
    after = comma + 1 if text[comma] == "," else item.end
    if len(items) == 1 and not (text[start + 1 : item.start] + text[after : end - 1]).strip():
        return text[: start + 1] + text[end - 1 :]
    line_start, line_end = document.line_start(item.start), document.line_end(after)
    if not text[line_start : item.start].strip() and _nothing_but_comment(text[after:line_end]):
        cut = (line_start, document.next_line(after))
    elif not text[after:line_end].strip():
        cut = (len(text[: item.start].rstrip(" \t")), after)
    else:
        blanks = len(text[after:line_end]) - len(text[after:line_end].lstrip()) if after > item.end else 0
        cut = (item.start, after + blanks)
    text = text[: cut[0]] + text[cut[1] :]
    if after == item.end and index:  # the last one, without a comma: the comma before it goes
        before = skip_trivia(text, items[index - 1].end)
        blanks = 1 if "\n" in text[before : cut[0]] else max(cut[0] - before, 1)
        text = text[:before] + text[before + blanks :]
    return text


def _nothing_but_comment(rest: str) -> bool:
    return not rest.strip() or rest.lstrip().startswith("#")
