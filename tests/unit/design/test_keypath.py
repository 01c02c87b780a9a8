"""Key paths as text and as segments."""

import pytest
import tomli
from hypothesis import given
from hypothesis import strategies as st

from rulecheck.design.keypath import basic_string, join_key, split_key, unquote, value_at

segments = st.text(st.characters(exclude_categories=["Cs"]))


@given(st.lists(segments, min_size=1))
def test_joining_and_splitting_give_the_path_back(path):
    """What `join_key` writes, `split_key` reads."""
    assert split_key(join_key(path)) == tuple(path)


@given(st.lists(segments, min_size=1, max_size=5))
def test_a_joined_key_is_a_key_of_toml(path):
    """The text of a path is read by tomli as that path."""
    data = tomli.loads(f"{join_key(path)} = 1")
    assert value_at(data, tuple(path)) == 1


@pytest.mark.parametrize(
    ("text", "path"),
    [
        ("parts.R1.value", ("parts", "R1", "value")),
        ("parts.R4.pins.0", ("parts", "R4", "pins", "0")),
        ('parts.U1.pins."IN+"', ("parts", "U1", "pins", "IN+")),
        ("parts.U1.pins.IN+", ("parts", "U1", "pins", "IN+")),
        ("parts.U1.pins.'V-'", ("parts", "U1", "pins", "V-")),
        ('nets."5 V".role', ("nets", "5 V", "role")),
        ("nets.5 V.role", ("nets", "5 V", "role")),
        ('nets."a.b" . "c\\"\\u00e9"', ("nets", "a.b", 'c"é')),
        ('nets.""', ("nets", "")),
    ],
)
def test_quoted_and_unquoted_segments_are_read(text, path):
    """Pins with signs in their names may stand with or without quotation marks."""
    assert split_key(text) == path


@pytest.mark.parametrize(
    ("text", "fault"),
    [
        ("", "segment 1 is empty"),
        ("parts..value", "segment 2 is empty"),
        ("parts.", "segment 2 is empty"),
        ('nets."VIN', "at character 6 is not closed"),
        ('nets."VIN"x', "a dot is due at character 11, not 'x'"),
    ],
)
def test_a_malformed_key_is_refused(text, fault):
    """The message says what is wrong and where."""
    with pytest.raises(ValueError, match=fault):
        split_key(text)


def test_only_what_needs_it_is_quoted():
    """Bare keys and indices stay as they are."""
    assert join_key(("parts", "R-1_a", "pins", 0)) == "parts.R-1_a.pins.0"
    assert join_key(("nets", "IN+", "a.b", "", "Ω")) == 'nets."IN+"."a.b".""."Ω"'


@given(segments)
def test_a_basic_string_stands_for_its_text(text):
    """The string is on one line, and tomli and `unquote` both read it as the text."""
    written = basic_string(text)
    assert "\n" not in written
    assert tomli.loads(f"key = {written}")["key"] == text == unquote(written)


def test_values_are_looked_up_in_tables_and_arrays():
    """Indices find elements, keys find values, and nothing else finds anything."""
    data = {"a": [{"b": 1}], "0": 2}
    assert value_at(data, ("a", "0", "b")) == 1
    assert value_at(data, ("0",)) == 2
    assert value_at(data, ()) is data
    for path in [("c",), ("a", "1"), ("a", "-1"), ("a", "00"), ("a", "0", "b", "c")]:
        with pytest.raises(KeyError):
            value_at(data, path)
