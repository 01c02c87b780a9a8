"""From two texts of a file to the least replacements that make one of the other, with their lines and columns."""

from __future__ import annotations

import difflib
import itertools
import re
from bisect import bisect_right
from collections.abc import Iterator, Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Replacement:
    """Characters `start` up to `end` of a text, without a byte-order mark, and what stands there instead."""

    start: int
    end: int
    text: str


class Lines:
    """Lines and columns of a text, both from 1, in characters; lines end at line feeds.

    Parameters
    ----------
    text : str
        Without a byte-order mark.
    """

    def __init__(self, text: str) -> None:
        self._starts = [0, *(match.end() for match in re.finditer("\n", text))]

    def position(self, offset: int) -> tuple[int, int]:
        """Line and column of an offset, which may be the end of the text.

        Parameters
        ----------
        offset : int
        """
        line = bisect_right(self._starts, offset)
        return line, offset - self._starts[line - 1] + 1


def replacements(old: str, new: str) -> list[Replacement]:
    """Replacements, in order and apart from one another, that turn one text into another.

    Parameters
    ----------
    old, new : str
        Without byte-order marks.
    """
    before, after = _lines(old), _lines(new)
    first = _shared(before, after)
    last = _shared(before[first:][::-1], after[first:][::-1])
    middle, fresh = before[first : len(before) - last], after[first : len(after) - last]
    offsets = list(itertools.accumulate(map(len, before), initial=0))[first:]
    matcher = difflib.SequenceMatcher(None, middle, fresh, autojunk=False)
    return [
        _trimmed(offsets[i], was, becomes)
        for tag, i1, i2, j1, j2 in matcher.get_opcodes()
        if tag != "equal"
        for i, was, becomes in _pieces(i1, middle[i1:i2], fresh[j1:j2])
    ]


def _shared(one: Sequence[str], other: Sequence[str]) -> int:
    """How many lines or characters two texts begin with alike."""
    pairs = zip(one, other, strict=False)
    return next((i for i, (a, b) in enumerate(pairs) if a != b), min(len(one), len(other)))


def _lines(text: str) -> list[str]:
    return re.findall(r"[^\n]*\n|[^\n]+", text)


def _pieces(first: int, before: Sequence[str], after: Sequence[str]) -> Iterator[tuple[int, str, str]]:
    """A changed block by its lines where as many come as go, else as a whole."""
    if len(before) == len(after):
        pairs = zip(before, after, strict=True)
        yield from ((i, was, becomes) for i, (was, becomes) in enumerate(pairs, first) if was != becomes)
    else:
        yield first, "".join(before), "".join(after)


def _trimmed(start: int, before: str, after: str) -> Replacement:
    """A replacement without the characters that both texts begin or end with."""
    head = _shared(before, after)
    tail = _shared(before[head:][::-1], after[head:][::-1])
    return Replacement(start + head, start + len(before) - tail, after[head : len(after) - tail])
