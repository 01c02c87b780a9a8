"""Edits that change a design file where they must and nowhere else, and writing it back."""

import copy
import datetime as dt
import difflib
import math
import os
import stat

import pytest
import tomli
import tomlrt
from hypothesis import given, settings
from hypothesis import strategies as st
from toml_documents import NAMES, TRICKY, documents, walk

from rulecheck.design.edit import apply_edits, to_toml, write_atomically
from rulecheck.design.keypath import join_key, value_at
from rulecheck.design.locate import scan
from rulecheck.errors import EditError
from rulecheck.findings import Add, Move, Remove, Set

DESIGN = """\
# Flow from pressure
format = 1
catalogues = ["house.toml"]   # beside this file

[environment]
ambient = { min = "-10 degC", typ = "25 degC" }

# ---- nets ----

[nets]
GND  = { role = "ground" }   # star point
V15P = { role = "supply", voltage = "15 V" }
VIN  = { role = "input", range = ["0.1 V", "10 V"] }

# ---- parts ----

# scales the input
[parts.R1]
kind = "resistor"
# thin film
value = '100 kohm'   # matched to R2
tempco = "25 ppm/K"
pins = ["VIN", "SUM1"]

[parts.Q1]
kind = "npn"
package = "M1"
pins = { C = "SUM1", B = "LOG", E = "TAIL1" }
# E to the tail

# the output amplifier
[parts.U1]
kind = "op-amp"
pins = { "IN+" = "GND", "IN-" = "SUM1", OUT = "DRIVE1" }

[matching.pair]
parts = [
  "Q1",  # logs
  "Q2",  # takes the antilog
]

[[thermal_links]]
between = ["M1", "M2"]
theta = "10 K/W"
"""


def edited(*edits, text=DESIGN):
    """Apply `edits` to `text` and list the lines gone and come, in the order of the file."""
    after = apply_edits(text, edits)
    return [line for line in difflib.ndiff(text.splitlines(), after.splitlines()) if line[0] in "+-"]


def follows(after, *lines):
    """Whether `lines` follow on one another in the text `after`."""
    return "\n".join(lines) + "\n" in after


# ---- a value in place of another


@pytest.mark.parametrize(
    ("edit", "old", "new"),
    [
        (Set("parts.Q1.package", "M2"), 'package = "M1"', 'package = "M2"'),
        (Set("parts.R1.value", "47 kohm"), "value = '100 kohm'   # matched", "value = '47 kohm'   # matched"),
        (Set("parts.R1.value", "it's"), "value = '100 kohm'   # matched", 'value = "it\'s"   # matched'),
        (Set("nets.V15P.voltage", "12 V"), 'voltage = "15 V" }', 'voltage = "12 V" }'),
        (Set("nets.VIN.range.0", "1 V"), '["0.1 V", "10 V"]', '["1 V", "10 V"]'),
        (Set("nets.VIN.range", ["1 V", "2 V"]), '["0.1 V", "10 V"]', '["1 V", "2 V"]'),
        (
            Set("environment.ambient", {"typ": "30 degC"}),
            '{ min = "-10 degC", typ = "25 degC" }',
            '{ typ = "30 degC" }',
        ),
        (Set("thermal_links.0.theta", "12 K/W"), '"10 K/W"', '"12 K/W"'),
        (Move("parts.R1.pins.0", "VREF"), '["VIN", "SUM1"]', '["VREF", "SUM1"]'),
        (Move("parts.Q1.pins.C", "SUM2"), '{ C = "SUM1"', '{ C = "SUM2"'),
        (Move('parts.U1.pins."IN+"', "X"), '"IN+" = "GND"', '"IN+" = "X"'),
        (Move("parts.U1.pins.IN-", "X"), '"IN-" = "SUM1"', '"IN-" = "X"'),
        (Move("matching.pair.parts.1", "Q3"), '"Q2",  # takes', '"Q3",  # takes'),
    ],
)
def test_an_existing_value_is_replaced_in_its_span_alone(edit, old, new):
    """All else of the file stays, to the character."""
    assert DESIGN.count(old) == 1
    assert apply_edits(DESIGN, [edit]) == DESIGN.replace(old, new)


def test_setting_what_is_there_changes_nothing():
    """A value equal to the one there keeps its way of writing."""
    assert apply_edits("a = 1_000\nb = 'x'\n", [Set("a", 1000), Set("b", "x")]) == "a = 1_000\nb = 'x'\n"


def test_a_table_in_blocks_is_set_key_by_key():
    """Setting a whole table keeps the comments of what stays in it."""
    table = {"kind": "resistor", "value": "1 kohm", "pins": ["VIN", "SUM1"], "power": "1 W"}
    assert edited(Set("parts.R1", table)) == [
        "- value = '100 kohm'   # matched to R2",
        "+ value = '1 kohm'   # matched to R2",
        '- tempco = "25 ppm/K"',
        '+ power = "1 W"',
    ]


# ---- a new key


@pytest.mark.parametrize(
    ("text", "edit", "after"),
    [
        ("[a.b]\nx = 1 # c\n\n[c]\n", Set("a.b.y", 2), "[a.b]\nx = 1 # c\ny = 2\n\n[c]\n"),
        ("[a.b]\n[c]\n", Set("a.b.y", 2), "[a.b]\ny = 2\n[c]\n"),
        ("[a]\n  x=1\n", Set("a.y", 2), "[a]\n  x=1\n  y=2\n"),
        ("[a]\nx = 1\n[a.b]\ny = 1\n", Set("a.z", 2), "[a]\nx = 1\nz = 2\n[a.b]\ny = 1\n"),
        ("x = 1\n\n# about a\n[a]\n", Set("z", 2), "x = 1\nz = 2\n\n# about a\n[a]\n"),
        ("# about a\n[a]\n", Set("z", 2), "z = 2\n\n# about a\n[a]\n"),
        ("# c\n[a.b]\ny = 1\n", Set("a.z", 2), "[a]\nz = 2\n\n# c\n[a.b]\ny = 1\n"),
        ("[a]\nb.x = 1\nc = 3\n", Set("a.b.y", 2), "[a]\nb.x = 1\nb.y = 2\nc = 3\n"),
        ("a . b.x = 1\n", Set("a.b.y", 2), "a . b.x = 1\na . b.y = 2\n"),
        ("a = { b = 1 }", Set("a.c", 2), "a = { b = 1, c = 2 }"),
        ("a = {b=1,}", Set("a.c", 2), "a = {b=1, c=2,}"),
        ("a = {}", Set("a.c.d", 2), "a = { c = { d = 2 } }"),
        ("a = { b.c = 1 }", Set("a.b.d", 2), "a = { b.c = 1, b.d = 2 }"),
        ("a = {\n  b = 1, # c\n}\n", Set("a.c", 2), "a = {\n  b = 1, # c\n  c = 2,\n}\n"),
        ("a = {\n  b = 1 # c\n}\n", Set("a.c", 2), "a = {\n  b = 1, # c\n  c = 2\n}\n"),
        ("a = [1, 2]", Set("a.2", 3), "a = [1, 2, 3]"),
        ("a = [\n  1, # one\n  2 # two\n]", Set("a.2", 3), "a = [\n  1, # one\n  2, # two\n  3\n]"),
        ("a = [ # none\n]", Set("a.0", 3), "a = [ 3 # none\n]"),
        ("[a]\nx  = 1\nyy = 2\n", Set("a.z", 3), "[a]\nx  = 1\nyy = 2\nz  = 3\n"),
        ("[a]\nx  = 1\nyy = 2\n", Set("a.zzz", 3), "[a]\nx  = 1\nyy = 2\nzzz = 3\n"),
        ("[[a]]\nx = 1\n[[a]]\n", Set("a.0.y", 2), "[[a]]\nx = 1\ny = 2\n[[a]]\n"),
        ("", Set("a.b", 2), "[a]\nb = 2\n"),
        ("", Set("a", 2), "a = 2\n"),
        ("# c\n", Set("a", 2), "# c\n\na = 2\n"),
        ("[a]\r\nx = 1\r\n", Set("a.y", "\n"), '[a]\r\nx = 1\r\ny = "\\n"\r\n'),
        ("\ufeffx = 1\n", Set("y", 2), "\ufeffx = 1\ny = 2\n"),
        ("[a]\nx = 1", Set("a.y", 2), "[a]\nx = 1\ny = 2"),
        ('a = """\n# no comment"""\n[b]\n', Set("c", 2), 'a = """\n# no comment"""\nc = 2\n[b]\n'),
        (
            '[x]\na = """\n# no comment"""\n[b.c]\n',
            Set("b.d", 2),
            '[x]\na = """\n# no comment"""\n[b]\nd = 2\n\n[b.c]\n',
        ),
    ],
)
def test_a_new_key_comes_after_the_last_of_its_table(text, edit, after):
    """However the table is written, the key is written so too."""
    assert apply_edits(text, [edit]) == after


def test_a_key_of_a_part_not_yet_there_makes_its_block():
    """The table is made after the last of its siblings."""
    after = apply_edits(DESIGN, [Set("parts.Q2.package", "M1")])
    assert follows(after, 'OUT = "DRIVE1" }', "", "[parts.Q2]", 'package = "M1"', "", "[matching.pair]")


# ---- a new table


def test_a_part_is_added_after_the_last_of_its_kind():
    """A transistor follows the transistors and their comments, with keys on lines and pins inline."""
    part = {"kind": "npn", "package": "M1", "pins": {"C": "X", "B": "Y", "E": "Z"}}
    assert follows(
        apply_edits(DESIGN, [Add("parts.Q2", part)]),
        "# E to the tail",
        "",
        "[parts.Q2]",
        'kind = "npn"',
        'package = "M1"',
        'pins = { C = "X", B = "Y", E = "Z" }',
        "",
        "# the output amplifier",
    )


def test_a_part_of_a_new_kind_is_added_after_the_last_part():
    """Where there is none of its kind, it follows the last part."""
    part = {"kind": "capacitor", "value": "100 nF", "pins": ["V15P", "GND"]}
    after = apply_edits(DESIGN, [Add("parts.C1", part)])
    assert follows(after, 'OUT = "DRIVE1" }', "", "[parts.C1]", 'kind = "capacitor"', 'value = "100 nF"')
    assert follows(after, 'pins = ["V15P", "GND"]', "", "[matching.pair]")


def test_nets_on_lines_get_a_line():
    """A net goes below the last, its sign in the column of theirs."""
    assert edited(Add("nets.OUT", {"role": "output"})) == ['+ OUT  = { role = "output" }']
    assert edited(Add("nets.REFERENCE", {"role": "reference"})) == ['+ REFERENCE = { role = "reference" }']


def test_nets_in_blocks_get_a_block():
    """The style of the siblings decides, here blocks without blank lines between."""
    text = '[nets.A]\nrole = "input"\n[nets.B]\nrole = "input"\n[parts.R1]\n'
    assert edited(Add("nets.C", {"role": "output"}), text=text) == ["+ [nets.C]", '+ role = "output"']


def test_parts_in_dotted_keys_get_dotted_keys():
    """Under one header with dotted keys a part is added the same way."""
    text = '[parts]\nR1.kind = "resistor"\nR1.value = "1 kohm"\n\n[rules]\n'
    assert edited(Add("parts.R2", {"kind": "resistor", "pins": ["A", "B"]}), text=text) == [
        '+ R2.kind = "resistor"',
        '+ R2.pins = ["A", "B"]',
    ]


def test_the_first_package_gets_a_block():
    """A group that the file does not have yet comes after the last table."""
    after = apply_edits(DESIGN, [Add("packages.M1", {"theta_ja": "150 K/W"}), Add("packages.M2", {})])
    assert follows(
        after, "]", "", "[packages.M1]", 'theta_ja = "150 K/W"', "", "[packages.M2]", "", "[[thermal_links]]"
    )


def test_a_table_of_a_part_is_written_inline():
    """Below the blocks, tables are inline."""
    assert edited(Add("parts.U1.input_headroom", {"low": "2 V"})) == ['+ input_headroom = { low = "2 V" }']


LINK = {"between": ["M1", "M3"], "theta": "20 K/W"}


@pytest.mark.parametrize(
    ("text", "after"),
    [
        ("", '[[thermal_links]]\nbetween = ["M1", "M3"]\ntheta = "20 K/W"\n'),
        ("x = 1\n\n[a]\n", 'x = 1\n\n[a]\n\n[[thermal_links]]\nbetween = ["M1", "M3"]\ntheta = "20 K/W"\n'),
        (
            "[[thermal_links]]\nx = 1\n\n[b]\n",
            '[[thermal_links]]\nx = 1\n\n[[thermal_links]]\nbetween = ["M1", "M3"]\ntheta = "20 K/W"\n\n[b]\n',
        ),
        ("thermal_links = []\n", 'thermal_links = [{ between = ["M1", "M3"], theta = "20 K/W" }]\n'),
        (
            "thermal_links = [\n  { x = 1 },\n]\n",
            'thermal_links = [\n  { x = 1 },\n  { between = ["M1", "M3"], theta = "20 K/W" },\n]\n',
        ),
    ],
)
def test_a_thermal_link_is_appended_however_they_are_written(text, after):
    """Blocks get a block, an array gets an element, and the first link makes the first block."""
    assert apply_edits(text, [Add("thermal_links", LINK)]) == after


def test_concessions_are_appended_one_after_another():
    """Each addition is one more block, with its date as a date of TOML."""
    one = {"rule": "noise", "parts": ["R1"], "expires": dt.date(2027, 6, 30)}
    after = apply_edits(DESIGN, [Add("concessions", one), Add("concessions", one | {"rule": "budget"})])
    assert tomli.loads(after)["concessions"] == [one, one | {"rule": "budget"}]
    assert after.startswith(DESIGN)
    assert after.endswith('\n\n[[concessions]]\nrule = "budget"\nparts = ["R1"]\nexpires = 2027-06-30\n')


# ---- less


@pytest.mark.parametrize(
    ("text", "key", "after"),
    [
        ("[a]\nx = 1 # c\ny = 2\n", "a.x", "[a]\ny = 2\n"),
        ("[a]\nx = 1\n# about y\ny = 2\n", "a.y", "[a]\nx = 1\n"),
        ("[a]\n# about both\nx = 1\ny = 2\n", "a.x", "[a]\n# about both\ny = 2\n"),
        ("x = 1\n\n# about y\ny = 2\n\nz = 3\n", "y", "x = 1\n\nz = 3\n"),
        ("[a]\nb.x = 1\nb.y = 2\nc = 3\n", "a.b", "[a]\nc = 3\n"),
        ("[a]\nx = 1\n\n[a.b]\ny = 1\n\n[c]\n\n[a.d]\nz = 1\n", "a", "[c]\n"),
        ("[a]\nx = 1\n\n# about b\n[b]\ny = 1\n\n# about c\n[c]\n", "b", "[a]\nx = 1\n\n# about c\n[c]\n"),
        ("[a]\n\n# section\n\n[b]\n# in b\n\n[c]\n", "b", "[a]\n\n# section\n\n[c]\n"),
        ("[a]\nx = 1\n[b]\n", "b", "[a]\nx = 1\n"),
        ("[a]\n\n[b]\ny = 1\n# end of b\n", "b", "[a]\n"),
        ("[[a]]\nx = 1\n[[a]]\nx = 2\n[a.b]\n[[a]]\nx = 3\n", "a.1", "[[a]]\nx = 1\n[[a]]\nx = 3\n"),
        ("a = { b = 1, c = 2 }", "a.b", "a = { c = 2 }"),
        ("a = { b = 1, c = 2 }", "a.c", "a = { b = 1 }"),
        ("a = { b = 1, c = 2, }", "a.c", "a = { b = 1, }"),
        ("a = { b.x = 1, c = 2, b.y = 3 }", "a.b", "a = { c = 2 }"),
        ("a = { b = 1 }", "a.b", "a = {}"),
        ("a = [1,2,3]", "a.1", "a = [1,3]"),
        ("a = [1, 2]", "a.0", "a = [2]"),
        ("a = [\n  1, # one\n  2, # two\n]\n", "a.0", "a = [\n  2, # two\n]\n"),
        ("a = [\n  1, # one\n  2 # two\n]\n", "a.1", "a = [\n  1 # one\n]\n"),
        ("a = [\n  1, 2,\n  3, 4,\n]\n", "a.1", "a = [\n  1,\n  3, 4,\n]\n"),
        ("a = [\r\n  1,\r\n  2\r\n]\r\nb = 1\r\n", "a.1", "a = [\r\n  1\r\n]\r\nb = 1\r\n"),
        ("[a]\r\n\r\n[b]\r\nx = 1\r\n\r\n[c]\r\n", "b", "[a]\r\n\r\n[c]\r\n"),
    ],
)
def test_what_is_removed_takes_what_is_its_own(text, key, after):
    """The comments that belong to it and a doubled blank line go; all others stay."""
    assert apply_edits(text, [Remove(key)]) == after


def test_a_part_is_removed_with_its_comment():
    """The section heading above it stays."""
    assert follows(apply_edits(DESIGN, [Remove("parts.R1")]), "# ---- parts ----", "", "[parts.Q1]")


def test_an_element_is_removed_with_its_line():
    """The comment behind it goes too."""
    assert edited(Remove("matching.pair.parts.1")) == ['-   "Q2",  # takes the antilog']


def test_a_table_named_by_its_last_key_alone_goes_with_it():
    """Where no header keeps the table, it is gone; where one does, it is empty."""
    assert apply_edits("a.b = 1\nc = 2\n", [Remove("a.b")]) == "c = 2\n"
    assert apply_edits("[a]\nb = 1\n", [Remove("a.b")]) == "[a]\n"


# ---- several, and what is refused


def test_edits_are_made_in_order():
    """Each edit finds what the one before left: a part is replaced, and what was added is changed."""
    text = apply_edits(
        DESIGN,
        [
            Remove("parts.R1"),
            Add("parts.R1", {"value": "1 ohm", "pins": ["A", "B"]}),
            Move("parts.R1.pins.1", "C"),
            Set("parts.R1.power", "1 W"),
        ],
    )
    assert tomli.loads(text)["parts"]["R1"] == {"value": "1 ohm", "pins": ["A", "C"], "power": "1 W"}


@pytest.mark.parametrize(
    ("edits", "fault"),
    [
        ([Add("parts.R1", {})], r"Add parts.R1: it is there already \(line 18\)"),
        ([Add("parts.C9", {}), Add("parts.C9", {})], "Add parts.C9: it is there already"),
        ([Add("thermal_links", LINK), Add("thermal_links", LINK)], "Add thermal_links: it is there already"),
        ([Set("format", 2), Set("format", 3)], "Set format overlaps with Set format"),
        ([Set("parts.R1.value", "1 ohm"), Remove("parts.R1")], "Remove parts.R1 overlaps with Set parts.R1.value"),
        ([Remove("parts.R1"), Set("parts.R1.value", "1 ohm")], "Set parts.R1.value overlaps with Remove parts.R1"),
        ([Move("parts.R1.pins.0", "A"), Set("parts.R1.pins", [])], "Set parts.R1.pins overlaps with Move"),
        ([Remove("parts.R9")], r"Remove parts.R9: parts \(line 18\) has no R9"),
        ([Remove("nothing.at.all")], "Remove nothing.at.all: the file has no nothing.at.all"),
        ([Move("parts.R1.pins.2", "A")], r"Move parts.R1.pins.2: parts.R1.pins \(line 23\) has no 2"),
        ([Move("parts.R1.pins", "A")], "Move parts.R1.pins: line 23 is not a pin with a net"),
        ([Set("parts.R1.kind.x", 1)], r"parts.R1.kind.x: parts.R1.kind \(line 19\) is a value, not a table"),
        ([Set("parts.R1.pins.7", "A")], "the next element of parts.R1.pins is number 2"),
        ([Set("thermal_links.0", "A")], "thermal_links holds tables, not values"),
        ([Set("thermal_links.1", "A")], "thermal_links holds tables, not values"),
        ([Set("parts..x", 1)], "segment 2 is empty"),
        ([Set("format", None)], "None cannot be written in TOML"),
        ([Set("format", "\ud800")], "not valid Unicode"),
    ],
)
def test_an_edit_that_does_not_fit_is_refused(edits, fault):
    """The error says what and where."""
    with pytest.raises(EditError, match=fault):
        apply_edits(DESIGN, edits)


def test_a_text_that_is_not_toml_is_refused():
    """Nothing is edited in a file that cannot be read."""
    with pytest.raises(EditError, match=r"not TOML.*line 1"):
        apply_edits("a = \nb = 1\n", [Set("a", 1)])


@pytest.mark.parametrize("wrong", ["a = 1\nb = 3\n", "a = 2\n", "a = 1\nb = 2.0\n", "a = 1\nb = 2\n]"])
def test_a_text_that_does_not_say_what_the_edit_means_is_never_given(wrong, monkeypatch):
    """Whatever goes wrong in the making, the check behind it stops the edit."""
    monkeypatch.setattr("rulecheck.design.edit.insert", lambda *_: wrong)
    with pytest.raises(EditError, match=r"Set b: it would (change something else|spoil the file) near line 1"):
        apply_edits("a = 1\n", [Set("b", 2)])


# ---- any document, any edit

NEW = st.sampled_from(["x", "a'\"\n", 7, 1.5, False, [1, ["y"]], {"k": 1, "l m": {"n": []}}, {}, dt.date(2030, 1, 2)])


def outcome_by_oracle(text, path, value):
    """Set or, with no value, remove `path` with tomlrt, and give the data of what it writes."""
    document = tomlrt.loads(text)
    holder = document
    for segment in path[:-1]:
        holder = holder[int(segment)] if isinstance(holder, list) else holder[segment]
    last = int(path[-1]) if isinstance(holder, list) else path[-1]
    if value is None:
        del holder[last]
    elif isinstance(holder, list) and last == len(holder):
        holder.append(value)
    else:
        holder[last] = value
    return tomli.loads(tomlrt.dumps(document))


def pruned(data):
    """Leave out the tables and arrays that hold nothing."""
    if isinstance(data, dict):
        kept = {key: pruned(value) for key, value in data.items()}
        return {key: value for key, value in kept.items() if value not in ({}, [])}
    return [pruned(value) for value in data] if isinstance(data, list) else data


def is_subsequence(short, long):
    """Whether `short` comes of leaving out characters of `long`."""
    rest = iter(long)
    return all(character in rest for character in short)


@settings(max_examples=150, deadline=None)
@given(documents(), st.data())
def test_any_new_key_of_any_table_is_inserted(text, data):
    """The data are those that tomlrt comes to, and nothing of the text is lost."""
    tables = [(), *(path for path, value in walk(tomli.loads(text)) if isinstance(value, dict))]
    parent = data.draw(st.sampled_from(tables))
    table = value_at(tomli.loads(text), parent)
    name = data.draw(st.sampled_from([name for name in [*NAMES, "other"] if name not in table]))
    value = data.draw(NEW)
    after = apply_edits(text, [Set(join_key((*parent, name)), value)])
    assert repr_of(after) == repr_of(outcome_by_oracle(text, (*parent, name), copy.deepcopy(value)))
    assert is_subsequence("".join(text.split()), "".join(after.split()))
    assert ("\r\n" in after) == ("\r\n" in text) or "\n" not in text
    assert after.count("\r\n") in (0, after.count("\n"))


@settings(max_examples=150, deadline=None)
@given(documents(), st.data())
def test_any_path_of_any_document_is_removed(text, data):
    """The data are those that tomlrt comes to, but for tables left empty, and nothing comes into the text."""
    paths = [path for path, _ in walk(tomli.loads(text))]
    if not paths:
        return
    path = data.draw(st.sampled_from(paths))
    after = apply_edits(text, [Remove(join_key(path))])
    oracle = outcome_by_oracle(text, path, None)
    assert repr_of(pruned(tomli.loads(after))) == repr_of(pruned(oracle))
    assert is_subsequence(after, text)


@settings(max_examples=150, deadline=None)
@given(documents(), st.data())
def test_any_value_of_any_document_is_replaced(text, data):
    """What is before and behind the span of the value stays, to the character."""
    spans = scan(text)
    paths = [path for path in spans if spans[path].kind == "value"]
    if not paths:
        return
    path, value = data.draw(st.sampled_from(paths)), data.draw(NEW)
    after = apply_edits(text, [Set(join_key(path), value)])
    start, end = spans[path].value
    assert after.startswith(text[:start])
    assert after.endswith(text[end:])
    assert value_at(tomli.loads(after), path) == value


@pytest.mark.parametrize("text", TRICKY.values(), ids=TRICKY)
def test_every_path_of_tricky_documents_is_removed_and_set(text):
    """Each edit gives what it means or would raise; here all must succeed."""
    for path, old in list(walk(tomli.loads(text.removeprefix("\ufeff")))):
        apply_edits(text, [Remove(join_key(path))])
        if scan(text)[path].kind == "value":
            assert value_at(loaded(apply_edits(text, [Set(join_key(path), "new")])), path) == "new"
        if isinstance(old, dict):
            added = apply_edits(text, [Set(join_key((*path, "added")), {"x": 1})])
            assert value_at(loaded(added), (*path, "added", "x")) == 1


def loaded(text):
    """Parse `text` as a file with or without byte-order mark is."""
    return tomli.loads(text.removeprefix("\ufeff"))


def repr_of(data):
    """Give a text that tells types and nan apart and does not depend on the order of keys."""
    if isinstance(data, str):
        data = tomli.loads(data)
    return _sorted_repr(data)


def _sorted_repr(data):
    if isinstance(data, dict):
        return "{" + ",".join(f"{key!r}:{_sorted_repr(data[key])}" for key in sorted(data)) + "}"
    return "[" + ",".join(map(_sorted_repr, data)) + "]" if isinstance(data, list) else repr(data)


# ---- values as text


@given(
    st.recursive(
        st.text(st.characters(exclude_categories=["Cs"]))
        | st.booleans()
        | st.integers(-(2**63), 2**63 - 1)
        | st.floats(allow_nan=False)
        | st.dates()
        | st.datetimes(timezones=st.none() | st.just(dt.UTC)).map(lambda moment: moment.replace(fold=0))
        | st.times().map(lambda time: time.replace(fold=0)),
        lambda inner: st.lists(inner) | st.dictionaries(st.text(st.characters(exclude_categories=["Cs"])), inner),
    )
)
def test_a_value_is_written_as_toml_reads_it(value):
    """What was written, tomli reads as the value and of its type."""
    written = to_toml(value)
    assert repr_of(tomli.loads(f"key = {written}")) == repr_of({"key": value})
    assert "\n" not in written


def test_numbers_and_sequences_of_other_types_are_written():
    """What numpy and rules hold is written as what TOML has."""
    import numpy as np

    assert to_toml((np.float64(0.5), np.int64(3), True)) == "[0.5, 3, true]"
    assert math.isnan(tomli.loads(f"key = {to_toml(math.nan)}")["key"])


# ---- writing


@pytest.fixture
def design_file(tmp_path):
    """Make a design file with line ends and a byte-order mark as some editors leave them."""
    path = tmp_path / "design.toml"
    path.write_bytes(b"\xef\xbb\xbfa = 1\r\nb = 2\r\n")
    path.chmod(0o640)
    return path


def test_a_file_is_written_whole_and_keeps_its_form(design_file):
    """Byte-order mark, line ends and mode stay, and no other file is left."""
    text = design_file.read_bytes().decode("utf-8-sig")
    write_atomically(design_file, apply_edits(text, [Set("a", 3)]), text)
    assert design_file.read_bytes() == b"\xef\xbb\xbfa = 3\r\nb = 2\r\n"
    assert stat.S_IMODE(design_file.stat().st_mode) == 0o640
    assert os.listdir(design_file.parent) == ["design.toml"]


def test_a_file_changed_meanwhile_is_not_written(design_file):
    """What someone else wrote is never lost."""
    text = design_file.read_bytes().decode("utf-8-sig")
    design_file.write_text("a = 9\n")
    with pytest.raises(EditError, match="changed by someone else"):
        write_atomically(design_file, "a = 3\n", text)
    assert design_file.read_text() == "a = 9\n"


def test_a_link_is_followed_to_its_file(design_file):
    """The link stays a link, and its file is written."""
    link = design_file.parent / "folder" / "link.toml"
    link.parent.mkdir()
    link.symlink_to(design_file)
    text = design_file.read_bytes().decode("utf-8-sig")
    write_atomically(link, "a = 3\n", text)
    assert link.is_symlink()
    assert design_file.read_bytes() == b"\xef\xbb\xbfa = 3\n"


def test_nothing_is_left_where_writing_fails(design_file, monkeypatch):
    """The old file stays, and the temporary one goes."""
    text = design_file.read_bytes().decode("utf-8-sig")

    def full(*_):
        raise OSError("no space left")

    monkeypatch.setattr(os, "replace", full)
    with pytest.raises(EditError, match="no space left"):
        write_atomically(design_file, "a = 3\n", text)
    assert os.listdir(design_file.parent) == ["design.toml"]
    assert design_file.read_bytes().decode("utf-8-sig") == text


def test_a_file_that_is_gone_is_an_error(tmp_path):
    """A missing file is not made anew."""
    with pytest.raises(EditError, match="cannot be written"):
        write_atomically(tmp_path / "design.toml", "a = 1\n", "")
