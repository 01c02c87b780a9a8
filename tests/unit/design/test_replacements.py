"""The least replacements that make one text of another."""

import itertools

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rulecheck.design.replacements import Lines, Replacement, replacements

TEXTS = st.lists(st.sampled_from(["a = 1\n", "b = 2\n", "\n", "c = '😀'\r\n", "d", "", "# ä\n"])).map("".join)


def applied(text, changes):
    """A text with replacements made, the last first, so that the places of the others stay."""
    for change in reversed(changes):
        text = text[: change.start] + change.text + text[change.end :]
    return text


@given(TEXTS, TEXTS)
def test_replacements_make_the_new_text(old, new):
    """Whatever was added, removed and changed; in order, and none within another."""
    changes = replacements(old, new)
    assert applied(old, changes) == new
    assert all(one.end <= other.start for one, other in itertools.pairwise(changes))


@pytest.mark.parametrize(
    ("old", "new", "changes"),
    [
        ("a = 1\n", "a = 1\n", []),
        ("a = 1\nb = 10\nc = 3\n", "a = 1\nb = 20\nc = 3\n", [Replacement(10, 11, "2")]),
        ("a = 1\r\nb = 2\r\n", "a = 9\r\nb = 8\r\n", [Replacement(4, 5, "9"), Replacement(11, 12, "8")]),
        ("a = 1\nc = 3\n", "a = 1\nb = 2\nc = 3\n", [Replacement(6, 6, "b = 2\n")]),
        ("a = 1\nb = 2\nc = 3\n", "a = 1\nc = 3\n", [Replacement(6, 12, "")]),
        ("a = 1", "a = 1\nb = 2\n", [Replacement(5, 5, "\nb = 2\n")]),
        ("", "a = 1\n", [Replacement(0, 0, "a = 1\n")]),
    ],
)
def test_nothing_is_replaced_that_stays(old, new, changes):
    """Only the characters that differ, worked out by hand."""
    assert replacements(old, new) == changes


def test_places_count_lines_and_characters_from_one():
    """Signs beyond the basic plane are one character; the end of the text has a place."""
    lines = Lines("a\n😀b\r\nc\n")
    assert [lines.position(offset) for offset in (0, 1, 2, 3, 4, 6, 8)] == [
        (1, 1), (1, 2), (2, 1), (2, 2), (2, 3), (3, 1), (4, 1),
    ]  # fmt: skip
