"""Help with misspelt names."""

from __future__ import annotations

import difflib
from collections.abc import Iterable


def did_you_mean(word: str, known: Iterable[str]) -> str:
    """Words that offer the known name nearest to `word`; empty where none is near."""
    near = difflib.get_close_matches(word, list(known), n=1)
    return f"did you mean {near[0]!r}?" if near else ""
