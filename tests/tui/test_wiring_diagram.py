"""The circuit around a finding, drawn."""

from rulecheck.testing import design_from
from rulecheck.tui.wiring_diagram import around, diagram

CHAIN = """\
format = 1
[design]
title = "Chain"
[nets]
GND = { role = "ground" }
IN = { role = "input", drive = "voltage", range = ["1 V", "10 V"] }
OUT = { role = "output" }
[parts]
R1 = { kind = "resistor", value = "1 kohm", pins = ["IN", "A"] }
R2 = { kind = "resistor", value = "2.2 kohm", pins = ["A", "B"] }
R3 = { kind = "resistor", value = "3 kohm", pins = ["B", "C"] }
R4 = { kind = "resistor", value = "4 kohm", pins = ["C", "OUT"] }
R5 = { kind = "resistor", value = "5 kohm", pins = ["OUT", "GND"] }
R6 = { kind = "resistor", value = "6 kohm", pins = ["A", "C"] }
R7 = { kind = "resistor", value = "7 kohm", pins = ["IN", "GND"] }
"""


def test_what_is_two_steps_away_is_there_and_what_is_farther_is_not():
    """From R1 to the parts at its nets; ground does not lead on."""
    refs, nets = around(design_from(CHAIN), ["R1"], [])
    assert refs == ["R1", "R2", "R6", "R7"]
    assert nets == ["IN", "A"]


def test_a_finding_about_a_net_begins_with_the_parts_at_it():
    """R4 and R5 are at OUT, and their neighbours follow."""
    refs, _ = around(design_from(CHAIN), [], ["OUT"])
    assert refs[:2] == ["R4", "R5"]
    assert set(refs) == {"R3", "R4", "R5", "R6"}


def test_a_part_joins_its_nets_and_crosses_those_between():
    """The sign of a joint stands in the column of the wire, a crossing where there is none."""
    drawn = diagram(design_from(CHAIN), ["R6", "R3"], [])
    names = [head.partition("┌ ")[2] for head, _ in drawn.heads]
    margin = len(drawn.rows[0].head) + 1
    columns = {name: head.index("┌") - margin for name, (head, _) in zip(names, drawn.heads, strict=True)}
    lines = {row.ref: row.line for row in drawn.rows}
    for ref, pins in (("R6", "AC"), ("R3", "BC"), ("R2", "AB")):
        assert [name for name in names if lines[ref][columns[name]] == "●"] == [n for n in names if n in pins]
    assert [n for n in names if lines["R2"][columns[n]] == "┼"] == ["C"]
    assert [row.ref for row in drawn.rows if row.culprit] == ["R6", "R3"]


def test_pins_at_nets_that_are_not_drawn_are_named():
    """Value and net stand in words."""
    drawn = diagram(design_from(CHAIN), ["R2"], [])
    row = next(row for row in drawn.rows if row.ref == "R1")
    assert row.head.strip() == "R1 1 kΩ"
    assert row.elsewhere == "IN"
