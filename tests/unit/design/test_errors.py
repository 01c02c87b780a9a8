"""Errors of a design file: place, key, what was found, what is allowed, the nearest right word; all at once."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rulecheck.design.load import load_text
from rulecheck.design.locate import scan
from rulecheck.errors import DesignError, Problem

HEAD = """format = 1
[nets]
GND = { role = "ground" }
V15P = { role = "supply", voltage = "15 V" }
VREF = { role = "reference", voltage = "5 V" }
VIN = { role = "input", drive = "voltage", range = ["0.1 V", "10 V"] }
VOUT = { role = "output" }
[parts.R1]
kind = "resistor"
value = "10 kohm"
pins = ["VIN", "VOUT"]
[parts.Q1]
kind = "npn"
model = "monolithic-pair-npn"
package = "M1"
pins = { C = "VREF", B = "GND", E = "VOUT" }
[parts.Q2]
kind = "npn"
model = "monolithic-pair-npn"
pins = { C = "VREF", B = "GND", E = "VOUT" }
"""
MARK = "«"


def problems_of(text: str) -> tuple[Problem, ...]:
    """Problems of a text, which must have some."""
    with pytest.raises(DesignError, match=r"board\.toml") as caught:
        load_text(text, "board.toml")
    return caught.value.problems


def read_cases() -> dict[str, tuple[str, str, list[str]]]:
    """Faulty pieces of files by name: text with the mark where the problem is, its key, pieces of its message."""
    cases = {}
    for block in Path(__file__).with_name("errors.txt").read_text().split("\n=== ")[1:]:
        name, body = block.split("\n", 1)
        text, expected = body.rsplit("\n--- ", 1)
        key, *pieces = expected.strip().split(" | ")
        cases[name] = text + "\n", key, pieces
    return cases


CASES = read_cases()
LAW = '[requirements.A]\noutput = "VOUT"\nlaw = "VIN"\n'


def place_of_mark(text: str) -> tuple[int, int]:
    """Line and column of the mark."""
    before = text[: text.index(MARK)]
    return before.count("\n") + 1, len(before) - before.rfind("\n")


@pytest.mark.parametrize(("text", "key", "pieces"), CASES.values(), ids=CASES.keys())
@pytest.mark.parametrize("line_end", ["\n", "\r\n"])
def test_error(text: str, key: str, pieces: list[str], line_end: str) -> None:
    """One fault gives one problem, at its place, with what was found and what is allowed."""
    marked = HEAD + text
    problems = problems_of(marked.replace(MARK, "").replace("\n", line_end))
    assert [problem.key for problem in problems] == [key]
    assert (problems[0].line, problems[0].column) == place_of_mark(marked)
    assert [piece for piece in pieces if piece not in problems[0].message] == []


WHOLE = {
    "no format": ("[nets]\nGND = { role = 'ground' }\n", "format", 1, 1, ("'format' is missing", "format = 1")),
    "format of the future": (HEAD.replace("format = 1", "format = 2"), "format", 1, 10, ("format 2", "format = 1")),
    "format that is no number": (HEAD.replace("format = 1", "format = true"), "format", 1, 10, ("true", "format = 1")),
    "no ground": (HEAD.replace('"ground"', '"output"'), "nets", 2, 1, ("ground", 'GND = { role = "ground" }')),
    "no nets at all": ("format = 1\n", "nets", 1, 1, ('GND = { role = "ground" }',)),
    "table twice": (HEAD + "[parts.R1]\n", "parts.R1", 21, 1, ("twice",)),
    "key twice": (HEAD + 'kind = "npn"\n', "kind", 21, 1, ("twice",)),
    "inline key twice": (HEAD + "x = { a = 1, a = 2 }\n", "x", 21, 19, ("'a'", "twice")),
    "no closing quote": (HEAD + 'title = "x\n', "title", 21, 11, ("closing quotation mark",)),
    "value without quotes": (HEAD + "value = 4K7\n", "value", 21, 10, ("follows the value",)),
    "no closing bracket": (HEAD + "[parts.R2\n", "parts.R2", 21, 10, ("closing bracket",)),
    "no equals sign": (HEAD + "title\n", "", 21, 6, ("= and a value",)),
    "no value": (HEAD + "title =\n", "title", 21, 8, ("a value is expected",)),
    "escape": (HEAD + 'title = "\\q"\n', "title", 21, 12, ("backslash",)),
    "control character": (HEAD + 'title = "\x00"\n', "title", 21, 10, ("may not stand here",)),
    "endless number": (HEAD + "x = 1" + "0" * 5000 + "\n", "x", 21, 5, ("5001 digits", "too long")),
}  # fmt: skip


@pytest.mark.parametrize(("text", "key", "line", "column", "pieces"), WHOLE.values(), ids=WHOLE.keys())
def test_error_of_the_file(text: str, key: str, line: int, column: int, pieces: tuple[str, ...]) -> None:
    """A text that is no TOML, or lacks what every design has, says where and how to mend it."""
    (problem,) = problems_of(text)
    assert (problem.key, problem.line, problem.column) == (key, line, column)
    assert [piece for piece in pieces if piece not in problem.message] == []


def test_all_errors_are_reported_in_the_order_of_the_file() -> None:
    """Faults of values, names and groups come together, by line, those of one table too."""
    text = HEAD.replace('"10 kohm"', '"10 kV"').replace("model = ", "modle = ", 1).replace('"M1"', "1")
    text += '[matching.A]\nparts = ["Q1", "Q9"]\nvbe_mismatch = "1 A"\n' + LAW.replace("VIN", "WIN")
    keys = [problem.key for problem in problems_of(text)]
    assert keys == [
        "parts.R1.value",
        "parts.Q1.saturation_current",
        "parts.Q1.forward_beta",
        "parts.Q1.modle",
        "parts.Q1.package",
        "matching.A.parts.1",
        "matching.A.vbe_mismatch",
        "requirements.A.law",
    ]


def test_a_fault_is_not_reported_again_where_its_name_is_used() -> None:
    """A net, part or package whose table has an error is known all the same."""
    text = HEAD.replace('range = ["0.1 V", "10 V"]', 'range = "all"').replace('kind = "npn"', 'kind = "npn"\nx = 1', 1)
    text += LAW + '[matching.A]\nparts = ["Q1", "Q2"]\n[[thermal_links]]\nbetween = ["M1", "Q2"]\ntheta = "1 K/W"\n'
    assert [problem.key for problem in problems_of(text)] == ["nets.VIN.range", "parts.Q1.x"]


def test_absent_pins_are_no_error() -> None:
    """A pin that is not connected is for the rules to judge."""
    design = load_text(HEAD.replace('B = "GND", ', ""), "board.toml")
    assert dict(design.parts["Q1"].pins) == {"C": "VREF", "E": "VOUT"}


def test_a_law_of_the_wrong_dimension_is_no_error() -> None:
    """Dimensions are for a rule to judge."""
    assert load_text(HEAD + LAW.replace('"VIN"', '"VIN ** 2"'), "board.toml").requirements["A"].law is not None


FOREIGN = re.compile(r"pydantic|Input should|Field required|https?:|Traceback|type=|\bdict\b|\bNone\b", re.IGNORECASE)
CASE_FILES = sorted((Path(__file__).parents[2] / "published" / "cases").glob("*.toml"))
GOOD = [HEAD + LAW, *(file.read_text() for file in CASE_FILES if "[models." not in file.read_text())]
VALUES = st.sampled_from(
    ['""', '"x"', "3", "-1.5", "true", "nan", "[]", "{}", '["A"]', '["1 V", "2 V"]', "{ min = 1 }", "1979-05-27",
     '"5 V"', '"-3 ohm"', '"GND"', '"ambient"', '"input"', '"npn"', '"monolithic-pair-pnp"', '"{}"', '"1e999 V"']
)  # fmt: skip
SCRAPS = st.sampled_from(list("\"'{}[]=.,#-\\\n\r\t\0é\ufeff ")) | st.text(
    st.characters(exclude_categories=["Cs"]), max_size=4
)


def check_that_only_design_errors_are_raised(text: str) -> None:
    """Load a text that may have errors; each must be told in our words."""
    try:
        load_text(text, CASE_FILES[0].with_name("mutant.toml"))
    except DesignError as error:
        problems = error.problems
    else:
        return
    assert problems
    for problem in problems:
        assert problem.message
        assert FOREIGN.search(problem.message.partition("'")[0]) is None, problem.message


@given(st.data())
@settings(max_examples=300, deadline=None)
def test_no_scrap_of_text_breaks_the_reader(data: st.DataObject) -> None:
    """A good file with anything put into it or taken out loads, or fails with plain problems."""
    text = data.draw(st.sampled_from(GOOD))
    for _ in range(data.draw(st.integers(1, 3))):
        start = data.draw(st.integers(0, len(text)))
        text = text[:start] + data.draw(SCRAPS) + text[start + data.draw(st.integers(0, 8)) :]
    check_that_only_design_errors_are_raised(text)


@given(st.data())
@settings(max_examples=300, deadline=None)
def test_no_value_in_the_wrong_place_breaks_the_reader(data: st.DataObject) -> None:
    """A good file with any value replaced by any other loads, or fails with plain problems."""
    text = data.draw(st.sampled_from(GOOD))
    for _ in range(data.draw(st.integers(1, 3))):
        spans = [
            span for span in scan(text).values() if text[slice(*span.value)].strip("[]") == text[slice(*span.value)]
        ]
        start, end = data.draw(st.sampled_from(spans)).value
        changed = text[:start] + data.draw(VALUES) + text[end:]
        try:
            scan(changed)
        except ValueError:
            continue
        text = changed
    check_that_only_design_errors_are_raised(text)
