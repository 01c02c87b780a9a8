"""Places of keys and values in TOML text."""

import pytest
import tomli
from hypothesis import given, settings
from toml_documents import TRICKY, documents, walk

from rulecheck.design.keypath import unquote, value_at
from rulecheck.design.locate import BYTE_ORDER_MARK, scan


def check_spans(text):
    """Check that every path of the parsed text, and no other, has spans that read as what tomli read there."""
    data = tomli.loads(text.removeprefix(BYTE_ORDER_MARK))
    spans = scan(text)
    paths = dict(walk(data))
    assert set(spans) == set(paths)
    for path, value in paths.items():
        span = spans[path]
        written = text[slice(*span.value)]
        if span.kind == "value":
            assert repr(tomli.loads(f"key = {written}")["key"]) == repr(value)
        else:
            names = names_of(written if written.startswith("[") else f"{written} = 0")
            # the header has the names of the path without indices; a dotted key has the last of them
            own = tuple(path[n] for n in range(len(path)) if not isinstance(value_at(data, path[:n]), list))
            assert names == own if span.kind == "header" else own[-1] in names
        if not isinstance(value_at(data, path[:-1]), list):
            assert unquote(text[slice(*span.key)]) == path[-1]
        assert character_at(text, span.line, span.column) == text[span.value[0] : span.value[0] + 1]


def names_of(line):
    """Read the names in the header or dotted key that `line` consists of."""
    deepest = tomli.loads(line)
    names = []
    while isinstance(deepest, dict | list) and deepest:
        if isinstance(deepest, dict):
            names += deepest
            (deepest,) = deepest.values()
        else:
            (deepest,) = deepest
    return tuple(names)


def character_at(text, line, column):
    """Find the character at a line and column, counted as an editor does."""
    return text.removeprefix(BYTE_ORDER_MARK).split("\n")[line - 1][column - 1]


@pytest.mark.parametrize("text", TRICKY.values(), ids=TRICKY)
def test_every_path_of_tricky_documents_is_found(text):
    """The spans of every path hold what tomli reads."""
    check_spans(text)


@pytest.mark.parametrize("text", TRICKY.values(), ids=TRICKY)
def test_line_ends_of_two_characters_change_no_line_or_column(text):
    """A file written with CRLF has all its places where the same file with LF has them."""
    text = text.replace("\r\n", "\n")
    one, two = scan(text), scan(text.replace("\n", "\r\n"))
    assert {path: (span.line, span.column) for path, span in one.items()} == {
        path: (span.line, span.column) for path, span in two.items()
    }
    check_spans(text.replace("\n", "\r\n"))


@settings(max_examples=150, deadline=None)
@given(documents())
def test_every_path_of_any_document_is_found(text):
    """The spans of every path hold what tomli reads, whatever the document."""
    check_spans(text)


DESIGN = """\
# pressure to flow
[nets]
VIN  = { role = "input", range = ["0.1 V", "10 V"] }

[parts.R1]
kind = "resistor"
pins = ["VIN", "SUM1"]

[parts.U1]
pins = { "IN+" = "GND", OUT = "X" }
offset.typ = "1 mV"

[[thermal_links]]
theta = "10 K/W"
[[thermal_links]]
theta = "20 K/W"
"""


@pytest.mark.parametrize(
    ("path", "line", "column", "kind"),
    [
        (("nets",), 2, 1, "header"),
        (("nets", "VIN"), 3, 8, "value"),
        (("nets", "VIN", "range", 1), 3, 44, "value"),
        (("parts",), 5, 1, "implied"),
        (("parts", "R1"), 5, 1, "header"),
        (("parts", "R1", "pins"), 7, 8, "value"),
        (("parts", "R1", "pins", 0), 7, 9, "value"),
        (("parts", "U1", "pins", "IN+"), 10, 18, "value"),
        (("parts", "U1", "offset"), 11, 1, "implied"),
        (("parts", "U1", "offset", "typ"), 11, 14, "value"),
        (("thermal_links",), 13, 1, "implied"),
        (("thermal_links", 0), 13, 1, "header"),
        (("thermal_links", 1, "theta"), 16, 9, "value"),
    ],
)
def test_lines_and_columns_are_those_an_editor_shows(path, line, column, kind):
    """A value is at its first character, a table at its header, an implied table at the first key that names it."""
    span = scan(DESIGN)[path]
    assert (span.line, span.column, span.kind) == (line, column, kind)


def test_keys_have_places_of_their_own():
    """The key span of a path is its own segment of a dotted key or header."""
    spans = scan(DESIGN)
    for path in [("parts",), ("parts", "U1"), ("parts", "U1", "offset"), ("parts", "U1", "offset", "typ")]:
        assert DESIGN[slice(*spans[path].key)] == path[-1]
    assert spans.position(spans["parts", "U1", "offset", "typ"].key[0]) == (11, 8)


def test_a_header_of_its_own_wins_over_those_below_it():
    """A table that is named by a longer header first is still found at its own."""
    assert scan("[a.b]\nx = 1\n[a]\ny = 2\n")["a",].line == 3


def test_a_byte_order_mark_takes_no_column():
    """The first key of a file with a byte-order mark is at column 1."""
    spans = scan(f"{BYTE_ORDER_MARK}a = 1\nb = 2\n")
    assert spans.position(spans["a",].key[0]) == (1, 1)
    assert (spans["a",].line, spans["a",].column) == (1, 5)
    assert (spans["b",].line, spans["b",].column) == (2, 5)


def test_columns_count_characters():
    """A character that takes several bytes or two units of UTF-16 counts once."""
    assert scan('a = { "Ω\U0001f600" = 1, b = 2 }')["a", "b"].column == 21


def test_an_absent_path_is_placed_at_its_nearest_ancestor():
    """What is not in the file is found where it would be; at worst at the start."""
    spans = scan(DESIGN)
    path, span = spans.nearest(("parts", "R1", "pins", 2))
    assert (path, span.line) == (("parts", "R1", "pins"), 7)
    path, span = spans.nearest(("matching", "pair"))
    assert (path, span.line, span.column) == ((), 1, 1)


def test_headers_and_pairs_are_listed_in_order():
    """The entries name all that stands on lines of its own, with array indices resolved."""
    entries = [(entry.kind, entry.path) for entry in scan(DESIGN).entries]
    assert entries[:2] == [("table", ("nets",)), ("pair", ("nets", "VIN"))]
    assert entries[-2:] == [("array", ("thermal_links", "1")), ("pair", ("thermal_links", "1", "theta"))]


@pytest.mark.parametrize("text", ["a", "a = ", "[a", "a = [1", "a = {b = 1", 'a = "x', "= 1", "a = [1 2]"])
def test_what_is_not_toml_is_refused(text):
    """The scanner stops with an error where tomli would, and never runs on."""
    with pytest.raises(tomli.TOMLDecodeError):
        tomli.loads(text)
    with pytest.raises(ValueError, match=r"not TOML: .* is due at character \d+"):
        scan(text)


def test_all_values_are_reachable_by_their_paths():
    """The paths of the spans are those that look values up in the parsed data."""
    data = tomli.loads(DESIGN)
    for path in scan(DESIGN):
        value_at(data, path)
