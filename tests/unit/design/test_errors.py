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


def net(text: str) -> str:
    """A net table after the tables of the head."""
    return f"[nets.N]\n{text}\n"


def part(text: str) -> str:
    """A part table after the tables of the head."""
    return f"[parts.X1]\n{text}\n"


RESISTOR = 'kind = "resistor"\npins = ["VIN", "VOUT"]\n'
NPN = 'kind = "npn"\nmodel = "monolithic-pair-npn"\npins = {}\n'
AMPLIFIER = 'kind = "op-amp"\nmodel = "bifet-precision"\npins = {}\n'
POTENTIOMETER = 'kind = "potentiometer"\nvalue = "10 kohm"\npins = {}\n'
SOURCE = 'kind = "voltage-source"\nvalue = "1 V"\npins = ["VIN", "GND"]\n'
LAW = '[requirements.A]\noutput = "VOUT"\nlaw = "VIN"\n'

# Each case: text behind the head, the mark standing where the error is; its key; pieces of its message.
CASES: dict[str, tuple[str, str, tuple[str, ...]]] = {
    # unknown keys, words and names
    "top-level key": (f"[{MARK}requirement.A]\n", "requirement", ("'requirement'", "did you mean 'requirements'?")),
    "models in the design": (f"[{MARK}models.A]\n", "models", ("'models'", "a file of their own", "catalogues")),
    "title key": (f'[design]\n{MARK}titel = "x"\n', "design.titel", ("'titel'", "'title'", "revision, purpose")),
    "environment key": (f'[environment]\n{MARK}ambiant = "1 degC"\n', "environment.ambiant", ("'ambient'?",)),
    "net role": (net(f'role = {MARK}"suply"'), "nets.N.role", ("'suply'", "did you mean 'supply'?", "'reference'")),
    "net role missing": (f'{MARK}[nets.N]\nload = "1 ohm"\n', "nets.N.role", ("'role' is missing", "'ground'")),
    "input drive": (net(f'role = "input"\ndrive = {MARK}"volt"'), "nets.N.drive", ("'volt'", "'voltage'?", "'current'")),
    "input drive missing": (f'{MARK}[nets.N]\nrole = "input"\n', "nets.N.drive", ("'drive' is missing", "'voltage'")),
    "key of the other drive": (
        net(f'role = "input"\ndrive = "voltage"\nrange = ["0 V", "1 V"]\n{MARK}compliance = "3 V"'),
        "nets.N.compliance", ("no key 'compliance' in a voltage input", "source_resistance"),
    ),
    "net key": (net(f'role = "output"\n{MARK}laod = "1 kohm"'), "nets.N.laod", ("did you mean 'load'?", "load_capacitance")),
    "spacing word": (
        net(f'role = "input"\ndrive = "voltage"\nrange = ["1 V", "2 V"]\nspacing = {MARK}"log10"'),
        "nets.N.spacing", ("'log10'", "did you mean 'log'?", "'linear'"),
    ),
    "part kind": (part(f'kind = {MARK}"resitor"'), "parts.X1.kind", ("'resitor'", "did you mean 'resistor'?", "'op-amp'")),
    "part kind by case": (part(f'kind = {MARK}"NPN"'), "parts.X1.kind", ("did you mean 'npn'?",)),
    "part kind missing": (f'{MARK}[parts.X1]\npins = []\n', "parts.X1.kind", ("'kind' is missing", "'connector'")),
    "part key": (part(RESISTOR + f'value = "1 ohm"\n{MARK}vale = "1 ohm"'), "parts.X1.vale", ("did you mean 'value'?",)),
    "parameter": (part(NPN + f"{MARK}forward_bata = 3"), "parts.X1.forward_bata", ("'forward_beta'?", "log_range")),
    "word of a parameter": (
        part(AMPLIFIER + f'input_clamps = {MARK}"rail"'), "parts.X1.input_clamps", ("'rail'", "'rails'?", "'differential'"),
    ),
    "model": (
        part(f'kind = "npn"\npins = {{}}\nmodel = {MARK}"monolithic-par-npn"'),
        "parts.X1.model", ("'monolithic-par-npn'", "did you mean 'monolithic-pair-npn'?"),
    ),
    "model of another kind": (
        part(f'kind = "npn"\npins = {{}}\nmodel = {MARK}"monolithic-pair-pnp"'),
        "parts.X1.model", ("'monolithic-pair-pnp' is of kind pnp", "kind npn is expected"),
    ),
    "model of a kind that has none": (
        part(RESISTOR + f'value = "1 ohm"\n{MARK}model = "x"'), "parts.X1.model", ("no key 'model' in a resistor",),
    ),
    "pin": (
        part(f'kind = "npn"\nmodel = "monolithic-pair-npn"\npins = {{ C = "A", D = {MARK}"B" }}'),
        "parts.X1.pins.D", ("no pin 'D'", "C, B, E"),
    ),
    "pin with a near one": (
        part(f'kind = "op-amp"\nmodel = "bifet-precision"\npins = {{ "IN_" = {MARK}"B" }}'),
        "parts.X1.pins.IN_", ("no pin 'IN_'", "did you mean 'IN", "OUT"),
    ),
    "supply of a reference": (
        net(f'role = "reference"\nvoltage = "1 V"\nfrom = {MARK}"V15Q"'), "nets.N.from", ("no supply 'V15Q'", "'V15P'?"),
    ),
    "supply of a source": (part(SOURCE + f'from = {MARK}"VREF"'), "parts.X1.from", ("no supply 'VREF'", "V15P")),
    "requirement of a trim": (
        part(POTENTIOMETER + f'adjusts = {MARK}"rot"') + LAW.replace(".A", ".root"),
        "parts.X1.adjusts", ("no requirement 'rot'", "did you mean 'root'?"),
    ),
    "output": (LAW.replace('"VOUT"', f'{MARK}"VUOT"'), "requirements.A.output", ("no net 'VUOT'", "did you mean 'VOUT'?")),
    "net in a law": (LAW.replace('"VIN"', f'{MARK}"VINN / 2"'), "requirements.A.law", ("'VINN'", "character 1", "'VIN'")),
    "law syntax": (LAW.replace('"VIN"', f'{MARK}"VIN ^ 2"'), "requirements.A.law", ("character 5", "**")),
    "supply in a law": (LAW.replace('"VIN"', f'{MARK}"V15P"'), "requirements.A.law", ("unknown names", "'V15P'")),
    "input of a range": (
        LAW + f'range = {{ {MARK}VREF = ["1 V", "2 V"] }}', "requirements.A.range.VREF", ("no input 'VREF'", "VIN"),
    ),
    "input of a bandwidth": (
        LAW + f'bandwidth = {{ min = "1 kHz", input = {MARK}"VIM" }}',
        "requirements.A.bandwidth.input", ("no input 'VIM'", "did you mean 'VIN'?"),
    ),
    "name of a point": (
        LAW + f'bandwidth = {{ min = "1 kHz", at = {{ {MARK}VIM = "1 V" }} }}',
        "requirements.A.bandwidth.at.VIM", ("'VIM'", "did you mean 'VIN'?"),
    ),
    "key of an accuracy": (
        LAW + f'accuracy = {{ {MARK}readin = "1 %" }}', "requirements.A.accuracy.readin", ("'reading'?", "absolute"),
    ),
    "part of a group": (f'[matching.A]\nparts = ["Q1", {MARK}"Q3"]\n', "matching.A.parts.1", ("no part 'Q3'", "'Q1'?")),
    "package of a link": (
        f'[[thermal_links]]\nbetween = ["M1", {MARK}"M3"]\ntheta = "1 K/W"\n',
        "thermal_links.0.between.1", ("no package 'M3'", "did you mean 'M1'?"),
    ),
    # quantities
    "dimension": (part(RESISTOR + f'value = {MARK}"10 kHz"'), "parts.X1.value", ("'10 kHz' is a frequency", "ohm", "4.7")),
    "no unit": (part(RESISTOR + f"value = {MARK}10"), "parts.X1.value", ("10 is a number without a unit", "ohm")),
    "no unit in quotes": (part(RESISTOR + f'value = {MARK}"10"'), "parts.X1.value", ("'10' is a number without a unit",)),
    "unit": (part(RESISTOR + f'value = {MARK}"10 KOHM"'), "parts.X1.value", ("'KOHM'", "did you mean 'kohm'")),
    "not finite": (part(NPN + f"forward_beta = {MARK}nan"), "parts.X1.forward_beta", ("nan is not finite",)),
    "infinite": (part(RESISTOR + f'value = {MARK}"inf ohm"'), "parts.X1.value", ("'inf ohm' is not finite",)),
    "end of a spread": (
        part(RESISTOR + f'value = {{ min = "1 ohm", max = {MARK}"3 V" }}'), "parts.X1.value.max", ("'3 V' is a voltage",),
    ),
    "key of a spread": (
        part(RESISTOR + f'value = {{ min = "1 ohm", mx = {MARK}"3 ohm" }}'), "parts.X1.value.mx", ("'max'", "min, typ, max"),
    ),
    "spread out of order": (
        part(RESISTOR + f'value = {MARK}{{ min = "3 ohm", max = "1 ohm" }}'), "parts.X1.value", ("out of order", "3 ohm"),
    ),
    "negative resistance": (part(RESISTOR + f'value = {MARK}"-1 ohm"'), "parts.X1.value", ("'-1 ohm'", "not be negative")),
    "nothing in a parameter": (
        part(NPN + f'early_voltage = {MARK}"0 V"'), "parts.X1.early_voltage", ("'0 V'", "greater than zero"),
    ),
    "tolerance": (part(RESISTOR + f'value = "1 ohm"\ntolerance = {MARK}"100 %"'), "parts.X1.tolerance", ("'100 %'", "below")),
    "position": (
        part(POTENTIOMETER + f"position = {MARK}{{ min = 0.5, max = 1.5 }}"), "parts.X1.position", ("max = 1.5", "0 to 1"),
    ),
    "range upside down": (
        net(f'role = "input"\ndrive = "current"\nrange = {MARK}["1 mA", "1 uA"]'), "nets.N.range", ("1 mA is above", "1 uA"),
    ),
    "range of one": (
        net(f'role = "input"\ndrive = "current"\nrange = {MARK}["1 mA"]'), "nets.N.range", ("a list of 1", "[low, high]"),
    ),
    "end of a range": (
        net(f'role = "input"\ndrive = "current"\nrange = ["1 mA", {MARK}"3 V"]'), "nets.N.range.1", ("'3 V' is a voltage",),
    ),
    "range of a requirement": (
        LAW + f'range = {{ VIN = ["1 V", {MARK}"1 A"] }}', "requirements.A.range.VIN.1", ("'1 A' is a current",),
    ),
    "value of a point": (
        LAW + f'bandwidth = {{ min = "1 kHz", at = {{ VIN = {MARK}"1 A" }} }}',
        "requirements.A.bandwidth.at.VIN", ("'1 A' is a current", "voltage"),
    ),
    "constant": (LAW + f"constants = {{ k = {MARK}true }}", "requirements.A.constants.k", ("true is no quantity", "10 V")),
    "headroom of one end": (
        part(AMPLIFIER + f'input_headroom = {MARK}{{ low = "1 V" }}'),
        "parts.X1.input_headroom.high", ("'high' is missing", "V+"),
    ),
    "supply without its greatest value": (
        part(AMPLIFIER + f'supply = {MARK}{{ min = "3 V" }}'), "parts.X1.supply", ("max, is missing",),
    ),
    "logarithmic spacing through zero": (
        net(f'role = "input"\ndrive = "voltage"\nrange = ["-1 V", "1 V"]\nspacing = {MARK}"log"'),
        "nets.N.spacing", ("'log'", "one sign", "'linear'"),
    ),
    # what must be there
    "value": (f"{MARK}[parts.X1]\n{RESISTOR}", "parts.X1.value", ("'value' is missing", "a resistor")),
    "voltage": (f'{MARK}[nets.N]\nrole = "supply"\n', "nets.N.voltage", ("'voltage' is missing", "a supply")),
    "parameter of a part": (
        f'{MARK}[parts.X1]\nkind = "diode"\npins = {{}}\n', "parts.X1.saturation_current", ("is missing", "no model"),
    ),
    "pins": (f'{MARK}[parts.X1]\nkind = "resistor"\nvalue = "1 ohm"\n', "parts.X1.pins", ("'pins' is missing",)),
    "pins of two": (
        part(f'kind = "resistor"\nvalue = "1 ohm"\npins = {MARK}["A"]'), "parts.X1.pins", ("1 net", "two pins"),
    ),
    "reason": (f'{MARK}[[concessions]]\nrule = "noise"\n', "concessions.0.reason", ("'reason' is missing",)),
    "empty reason": (
        f'[[concessions]]\nrule = "noise"\nreason = {MARK}"  "\n', "concessions.0.reason", ("the reason is empty",),
    ),
    "rule or finding": (
        f'{MARK}[[concessions]]\nreason = "x"\n', "concessions.0.rule", ("'rule' is missing", "id of a finding"),
    ),
    "input of several": (
        net('role = "input"\ndrive = "voltage"\nrange = ["1 V", "2 V"]') + LAW + f'bandwidth = {MARK}{{ min = "1 kHz" }}',
        "requirements.A.bandwidth.input", ("'input' is missing", "VIN, N"),
    ),
    "a requirement that asks nothing": (
        f'{MARK}[requirements.A]\noutput = "VOUT"\n', "requirements.A", ("asks for nothing", "bandwidth"),
    ),
    "an accuracy of no law": (
        f'[requirements.A]\noutput = "VOUT"\nphase_margin = "55 deg"\n{MARK}accuracy = {{}}',
        "requirements.A.accuracy", ("belongs to a law",),
    ),
    # what contradicts
    "group of one": (f'[matching.A]\nparts = {MARK}["Q1"]\n', "matching.A.parts", ("two transistors or more",)),
    "group with a resistor": (
        f'[matching.A]\nparts = ["Q1", {MARK}"R1"]\n', "matching.A.parts.1", ("'R1' is of kind resistor", "npn, pnp"),
    ),
    "group with one part twice": (
        f'[matching.A]\nparts = ["Q1", {MARK}"Q1"]\n', "matching.A.parts.1", ("'Q1' stands twice",),
    ),
    "link of a package to itself": (
        f'[[thermal_links]]\nbetween = ["M1", {MARK}"M1"]\ntheta = "1 K/W"\n',
        "thermal_links.0.between.1", ("two packages",),
    ),
    "link of three": (
        f'[[thermal_links]]\nbetween = {MARK}["M1", "Q2", "R1"]\ntheta = "1 K/W"\n',
        "thermal_links.0.between", ("a list of 3", "2 names"),
    ),
    "potentiometer named as a net": (
        f'[parts.{MARK}VIN]\n{POTENTIOMETER}', "parts.VIN", ("'VIN' is the name of a net too",),
    ),
    "photodiode named as an ordinary net": (
        f'[parts.{MARK}S]\nkind = "photodiode"\nphotocurrent = ["0 A", "1 uA"]\npins = {{ A = "S", K = "GND" }}\n',
        "parts.S", ("'S' is the name of a net too",),
    ),
    "net named ambient": (f'[nets.{MARK}ambient]\nrole = "output"\n', "nets.ambient", ("ambient temperature",)),
    "pin on a net named ambient": (
        part(f'kind = "resistor"\nvalue = "1 ohm"\npins = ["GND", {MARK}"ambient"]'),
        "parts.X1.pins.1", ("ambient temperature",),
    ),
    "potentiometer named ambient": (
        f"[parts.{MARK}ambient]\n{POTENTIOMETER}", "parts.ambient", ("ambient temperature", "another name"),
    ),
    "constant named as an input": (
        LAW + f'constants = {{ {MARK}VIN = "1 V" }}', "requirements.A.constants.VIN", ("the name of an input",),
    ),
    # things of another type
    "part that is no table": (f"[parts]\nX1 = {MARK}3\n", "parts.X1", ("3 is given", "a table is expected")),
    "flag in quotes": (part(RESISTOR + f'value = "1 ohm"\nmounted = {MARK}"no"'), "parts.X1.mounted", ("'no'", "true or false")),
    "text without quotes": (f"[design]\nrevision = {MARK}2\n", "design.revision", ("2 is given", "text in quotes")),
    "date in quotes": (
        f'[[concessions]]\nrule = "noise"\nreason = "x"\nexpires = {MARK}"2027-06-30"\n',
        "concessions.0.expires", ("'2027-06-30' is no date", "without quotes"),
    ),
    "time in place of a date": (
        f'[[concessions]]\nrule = "noise"\nreason = "x"\nexpires = {MARK}2027-06-30T10:00:00\n',
        "concessions.0.expires", ("is no date",),
    ),
    "net that is no text": (
        part(f'kind = "resistor"\nvalue = "1 ohm"\npins = ["A", {MARK}3]'), "parts.X1.pins.1", ("3 is no net",),
    ),
    "pins of another form": (
        part(f'kind = "npn"\nmodel = "monolithic-pair-npn"\npins = {MARK}["A", "B", "C"]'),
        "parts.X1.pins", ("a list is given", "C, B, E"),
    ),
    "settings that are no table": (f"[rules]\nnoise = {MARK}false\n", "rules.noise", ("false is given", "settings")),
    "links that are no list": (f"{MARK}[thermal_links]\n", "thermal_links", ("a table is given", "[[thermal_links]]")),
}  # fmt: skip


def place_of_mark(text: str) -> tuple[int, int]:
    """Line and column of the mark."""
    before = text[: text.index(MARK)]
    return before.count("\n") + 1, len(before) - before.rfind("\n")


@pytest.mark.parametrize(("text", "key", "pieces"), CASES.values(), ids=CASES.keys())
@pytest.mark.parametrize("line_end", ["\n", "\r\n"])
def test_error(text: str, key: str, pieces: tuple[str, ...], line_end: str) -> None:
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
    design = load_text(HEAD + part('kind = "op-amp"\nmodel = "bifet-precision"\npins = { OUT = "VOUT" }'), "board.toml")
    assert dict(design.parts["X1"].pins) == {"OUT": "VOUT"}


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
        assert error.problems
        for problem in error.problems:
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
