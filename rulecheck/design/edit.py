"""Edits of a design file that keep its comments, its order and its way of writing.

Each edit changes the text where it must and nowhere else. The result is parsed again and compared with the
data that the edit means; a text that does not say just that is never given back.
"""

from __future__ import annotations

import codecs
import contextlib
import copy
import os
import stat
import tempfile
from collections.abc import Sequence
from pathlib import Path

import tomli

from rulecheck.design.document import Document
from rulecheck.design.inserting import insert
from rulecheck.design.keypath import KeyPath, join_key, split_key, value_at
from rulecheck.design.locate import BYTE_ORDER_MARK
from rulecheck.design.removing import remove
from rulecheck.design.toml_text import Toml, plain, to_toml
from rulecheck.errors import EditError
from rulecheck.findings import Add, Edit, Move, Remove, Set

__all__ = ["apply_edits", "to_toml", "write_atomically"]

_ARRAYS = frozenset({("thermal_links",), ("concessions",)})
"""Tables that are one of many without a name, to which adding means appending."""


def apply_edits(text: str, edits: Sequence[Edit]) -> str:
    """Give `text` with `edits` made, in order, each on the result of the one before.

    Raises
    ------
    EditError
        An edit does not fit the text, two of them are for the same place, or the outcome would not be what
        they mean.
    """
    mark = BYTE_ORDER_MARK if text.startswith(BYTE_ORDER_MARK) else ""
    text = text.removeprefix(BYTE_ORDER_MARK)
    paths = [_path(edit) for edit in edits]
    _refuse_overlaps(edits, paths)
    for edit, path in zip(edits, paths, strict=True):
        text = _apply(text, edit, path)
    return mark + text


def _path(edit: Edit) -> KeyPath:
    try:
        return split_key(edit.key)
    except ValueError as error:
        raise EditError(str(error)) from None


def _refuse_overlaps(edits: Sequence[Edit], paths: Sequence[KeyPath]) -> None:
    """Refuse two edits of which one is at or below the other; what is added is new, and may be changed."""
    made: dict[KeyPath, Edit] = {}
    for edit, path in zip(edits, paths, strict=True):
        if isinstance(edit, Add):
            made = {other: former for other, former in made.items() if other[: len(path)] != path}
            continue
        for other, former in made.items():
            shared = min(len(path), len(other))
            if path[:shared] == other[:shared]:
                raise EditError(f"{_name(edit)} overlaps with {_name(former)}", "make one edit of the two")
        made[path] = edit


def _name(edit: Edit) -> str:
    return f"{type(edit).__name__} {edit.key}"


def _apply(text: str, edit: Edit, path: KeyPath) -> str:
    """Make one edit and check what it came to."""
    try:
        document = Document(text)
    except (tomli.TOMLDecodeError, RecursionError) as error:
        raise EditError(f"the file cannot be edited, it is not TOML: {error}") from None
    changed, intended = _make(document, edit, path)
    _check(changed, intended, edit, _line(document, path))
    return changed


def _make(document: Document, edit: Edit, path: KeyPath) -> tuple[str, list[Toml]]:
    """Give the text with `edit` made, and the data that it may come to."""
    match edit:
        case Set():
            return _set(document, path, plain(edit.to))
        case Add():
            return _add(document, path, plain(edit.table))
        case Move():
            if not isinstance(_existing(document, path, edit), str):
                raise EditError(f"{_name(edit)}: line {_line(document, path)} is not a pin with a net")
            return _set(document, path, plain(edit.to))
        case Remove():
            _existing(document, path, edit)
            return remove(document, path), _without(document.data, path)


def _existing(document: Document, path: KeyPath, edit: Edit) -> object:
    """Look up what `edit` is to change; EditError where there is nothing."""
    try:
        return value_at(document.data, path)
    except KeyError:
        nearest, span = document.spans.nearest(path)
        place = f"{join_key(nearest)} (line {span.line})" if nearest else "the file"
        raise EditError(f"{_name(edit)}: {place} has no {join_key(path[len(nearest) :])}") from None


def _line(document: Document, path: KeyPath) -> int:
    return document.spans.nearest(path)[1].line


def _set(document: Document, path: KeyPath, value: Toml) -> tuple[str, list[Toml]]:
    return _put(document, path, value), [_with(document.data, path, value)]


def _put(document: Document, path: KeyPath, value: Toml) -> str:
    """Give the text with `value` at `path`, in place of what is there or new."""
    if not document.has(path):
        return insert(document, path, value)
    old = value_at(document.data, path)
    if _same(old, value):
        return document.text
    span = document.spans[path]
    if span.kind == "value":
        start, end = span.value
        return document.text[:start] + to_toml(value, like=document.text[start:end]) + document.text[end:]
    if not isinstance(value, dict) and isinstance(value_at(document.data, path[:-1]), list):
        raise EditError(f"{join_key(path[:-1])} holds tables, not values")
    if not isinstance(old, dict) or not isinstance(value, dict):
        return insert(Document(remove(document, path)), path, value)
    for key, inner in value.items():
        document = Document(_put(document, (*path, key), inner))
    for key in old.keys() - value.keys():
        document = Document(remove(document, (*path, key)))
    return document.text


def _add(document: Document, path: KeyPath, table: Toml) -> tuple[str, list[Toml]]:
    """Add `table` at `path`, or append it to the tables that have no names of their own."""
    if not document.has(path):
        value = [table] if path in _ARRAYS else table
        return insert(document, path, value), [_with(document.data, path, value)]
    old = value_at(document.data, path)
    tables = isinstance(old, list) and (path in _ARRAYS or (old and all(isinstance(one, dict) for one in old)))
    if not isinstance(old, list) or not tables or any(_same(table, one) for one in old):
        raise EditError(f"Add {join_key(path)}: it is there already (line {_line(document, path)})")
    path = (*path, str(len(old)))
    return insert(document, path, table), [_with(document.data, path, table)]


def _with(data: dict[str, Toml], path: KeyPath, value: Toml) -> dict[str, Toml]:
    """Copy `data` with `value` at `path`; tables missing on the way are made."""
    result = copy.deepcopy(data)
    holder: Toml = result
    for segment, following in zip(path, (*path[1:], None), strict=True):
        new = value if following is None else {}
        if isinstance(holder, list):
            if int(segment) == len(holder):
                holder.append(new)
            elif following is None:
                holder[int(segment)] = value
            holder = holder[int(segment)]
        else:
            holder[segment] = value if following is None else holder.get(segment, new)
            holder = holder[segment]
    return result


def _without(data: dict[str, Toml], path: KeyPath) -> list[Toml]:
    """Copy `data` without what is at `path`; then also without each table that this leaves empty, outwards.

    A table that only its keys make known goes with the last of them; one with a header stays.
    """
    outcomes: list[Toml] = []
    data = copy.deepcopy(data)
    for length in range(len(path) - 1, -1, -1):
        holder: Toml = value_at(data, path[:length])
        del holder[int(path[length]) if isinstance(holder, list) else path[length]]
        outcomes.append(copy.deepcopy(data))
        if holder:
            break
    return outcomes


def _same(one: Toml, other: Toml) -> bool:
    """Whether two values are the same to TOML: of one type, and nan like nan."""
    if type(one) is not type(other):
        return False
    if isinstance(one, dict):
        return one.keys() == other.keys() and all(_same(one[key], other[key]) for key in one)
    if isinstance(one, list):
        return len(one) == len(other) and all(map(_same, one, other))
    return bool(one == other or (one != one and other != other))


def _check(text: str, intended: Sequence[Toml], edit: Edit, line: int) -> None:
    """Refuse a text that does not say what `edit` means."""
    try:
        outcome = tomli.loads(text)
    except tomli.TOMLDecodeError as error:
        raise EditError(f"{_name(edit)}: it would spoil the file near line {line}: {error}") from None
    if not any(_same(outcome, data) for data in intended):
        raise EditError(f"{_name(edit)}: it would change something else near line {line}", "edit it by hand")


def write_atomically(path: Path | str, text: str, expected: str) -> None:
    """Write `text` to the file at `path`, all of it or nothing.

    A link is followed to its file. The byte-order mark and the mode of the file stay.

    Raises
    ------
    EditError
        The file no longer says `expected`, the text that the change was worked out on, or cannot be written.
    """
    try:
        target = Path(path).resolve(strict=True)
        old = target.read_bytes()
        if old.removeprefix(codecs.BOM_UTF8) != expected.removeprefix(BYTE_ORDER_MARK).encode():
            raise EditError(f"{path} was changed by someone else in the meantime; nothing was written", "read it again")
        mark = codecs.BOM_UTF8 if old.startswith(codecs.BOM_UTF8) else b""
        _replace(target, mark + text.removeprefix(BYTE_ORDER_MARK).encode())
    except (OSError, UnicodeError) as error:
        raise EditError(f"{path} cannot be written: {error}") from error


def _replace(target: Path, content: bytes) -> None:
    """Put a new file with `content` and the mode of `target` in its place."""
    handle, temporary = tempfile.mkstemp(dir=target.parent, prefix=f".{target.name}.")
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        os.chmod(temporary, stat.S_IMODE(target.stat().st_mode))
        os.replace(temporary, target)
    except BaseException:
        with contextlib.suppress(FileNotFoundError):
            os.unlink(temporary)
        raise
    if hasattr(os, "O_DIRECTORY"):  # elsewhere a folder cannot be opened, and the renaming needs no more
        folder = os.open(target.parent, os.O_RDONLY | os.O_DIRECTORY)
        try:
            os.fsync(folder)
        finally:
            os.close(folder)
