"""Junctions reversed and ratings exceeded in faults. The circuits are invented."""

from pathlib import Path

import pytest
from rulecheck_rules.junction_reverse import JunctionReverse

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, design_from, findings_of

ONE_AMBIENT = ('{ min = "0 degC", typ = "25 degC", max = "50 degC" }', '"25 degC"')
CLAMPS = {
    "vapour": (
        ('D1 = { kind = "diode", model = "low-leakage-diode", pins = { A = "O1", K = "S1" } }\n', ""),
        ('D2 = { kind = "diode", model = "low-leakage-diode", pins = { A = "S2", K = "L" } }\n', ""),
    ),
    "turbidity": (('D1 = { kind = "diode", model = "low-leakage-diode", pins = { A = "S1", K = "O1" } }\n', ""),),
}


@pytest.mark.parametrize("name", ["vapour", "turbidity", "column", "beam", "probe", "strip"])
def test_sound_designs(board, name):
    """Clamped npn and pnp stages survive a reversed input and absent supplies, as do stages without junctions."""
    assert_clean(JunctionReverse, board(name))


@pytest.mark.parametrize(("name", "parts"), [("vapour", ["Q1", "Q2"]), ("turbidity", ["Q1"])])
def test_reversed_input_without_clamps(board, name, parts):
    """The amplifier runs to its rail and takes the emitter along, in the second against the load on it.

    There the slight reversal (0.3 V, 50 degC) is the worse: the independent solver of `tests/oracle` gives 8.490 V,
    and 7.729 V at 15 V, 0 degC.
    """
    finding = assert_finds(JunctionReverse, board(name, *CLAMPS[name]), parts=parts)
    assert finding.severity is Severity.MAJOR
    assert "VIN at" in finding.scenario
    breakdown, reverse = {"vapour": (6.5, 29.96), "turbidity": (6.0, 8.49)}[name]
    assert finding.evidence[0].limit == pytest.approx(0.8 * breakdown)
    assert finding.evidence[0].value == pytest.approx(reverse, abs=0.01)


def test_figures_of_an_independent_solution():
    """A cube root with its input reversed: figures of an independent solver of the same equations.

    Base-emitter voltages of case `cube_root` at X = -12 V, 25 degC, in `tests/published/cases`.
    """
    cases = Path(__file__).parents[1] / "published" / "cases"
    text = (cases / "cube_root.toml").read_text(encoding="utf-8")
    text = text.replace('range = ["50 mV", "5 V"]', 'range = ["50 mV", "5 V"]\nsurvives = ["-12 V", "5 V"]')
    text = text.replace("[nets.GND]", '[environment]\nambient = "25 degC"\n\n[nets.GND]')
    design = design_from(text, (cases / "case_parts.toml").read_text(encoding="utf-8"))
    finding = assert_finds(JunctionReverse, design, parts=["Q1", "Q2", "Q4"])
    figures = [evidence.value for evidence in finding.evidence]
    assert figures == pytest.approx([27.552607659840564, 13.799999999943926, 12.462408475325391], abs=1e-3)


def test_breakdown_that_the_model_does_not_say(board):
    """5 V are assumed, the least that makers of small transistors state, and the message says so."""
    unknown = board("turbidity", *CLAMPS["turbidity"], ('"close-pnp", package = "M1"', '"quiet-pnp", package = "M1"'))
    finding = assert_finds(JunctionReverse, unknown, parts=["Q1"])
    assert finding.evidence[0].limit == pytest.approx(4.0)
    assert "assumed" in finding.message


def test_input_that_does_not_say_what_it_survives(board):
    """Without `survives` the rule observes that it cannot know, and judges the range alone."""
    finding = assert_finds(JunctionReverse, board("vapour", *CLAMPS["vapour"], (', survives = ["-15 V", "15 V"]', "")))
    assert finding.severity is Severity.OBSERVATION
    assert finding.nets == ("VIN",)
    assert "nets.VIN.survives" in finding.remedies[0].title


def test_photodiode_that_does_not_say_what_it_survives(board):
    """A photodiode is an input too."""
    finding = assert_finds(JunctionReverse, board("beam", (', survives = ["0 A", "1 mA"]', "")), parts=["PD1"])
    assert finding.severity is Severity.OBSERVATION


@pytest.mark.parametrize("name", ["vapour", "turbidity"])
def test_clamps_and_diodes_cure(board, cures, name):
    """Clamps from output to summing node, and diodes across the junctions turned for npn or pnp, each cure it."""
    left = cures(board(name, ONE_AMBIENT, *CLAMPS[name]), JunctionReverse)
    assert next(wrong for title, wrong in left.items() if title.startswith("clamp U1")) == []
    way = "emitter to base" if name == "vapour" else "base to emitter"
    assert next(wrong for title, wrong in left.items() if way in title) == []


@pytest.mark.parametrize(("name", "survives"), [("probe", '["0 V", "24 V"]'), ("strip", '["-24 V", "0 V"]')])
def test_collector_current(board, cures, name, survives):
    """24 V at 1 kohm drive 24 mA through a transistor of 20 mA; a resistor at the amplifier's output limits it."""
    design = board(name, ('["-15 V", "15 V"]', survives))
    finding = assert_finds(JunctionReverse, design, parts=["Q1"])
    assert finding.evidence[0].value == pytest.approx(24e-3, rel=0.02)
    assert finding.evidence[0].limit == pytest.approx(20e-3)
    left = cures(design, JunctionReverse)
    assert next(wrong for title, wrong in left.items() if "in series with OUT of U1" in title) == []


@pytest.mark.parametrize("name", ["probe", "strip"])
def test_output_current(board, cures, name):
    """15 V at 1 kohm ask 15 mA of an output of 10 mA; a resistor in series or a stronger amplifier cures it."""
    design = board(name, ("both-rails", "short-swing"))
    finding = assert_finds(JunctionReverse, design, parts=["U1"])
    assert finding.evidence[0].value == pytest.approx(15e-3, rel=0.05)
    left = cures(design, JunctionReverse)
    assert next(wrong for title, wrong in left.items() if "in series with OUT of U1" in title) == []
    assert next(wrong for title, wrong in left.items() if title.startswith("take both-rails for U1")) == []


@pytest.mark.parametrize("name", ["probe", "strip"])
def test_forward_current_of_a_clamp(board, cures, name):
    """The clamp carries the 15 mA of the reversed input, and is rated for 10 mA."""
    design = board(name, ("low-leakage-diode", "weak-diode"))
    finding = next(f for f in findings_of(design, JunctionReverse) if f.subject == "forward current")
    assert finding.parts == ("D1",)
    assert finding.evidence[0].value == pytest.approx(14.4e-3, rel=0.05)
    assert cures(design, JunctionReverse)["take low-leakage-diode for D1"] == []


ABSENT = ('range = ["10 mV", "0.1 V"]', 'range = ["10 mV", "10 V"]'), ('value = "1 kohm"', 'value = "100 kohm"')


def test_voltage_ratings(board, cures):
    """With VN absent the summing node follows the input to 10 V: too much for an 8 V transistor, a 5 V diode."""
    weak = ("monolithic-pair-npn-tight", "low-voltage-npn"), ("low-leakage-diode", "weak-diode")
    design = board("probe", *ABSENT, *weak)
    found = {f.subject: f for f in findings_of(design, JunctionReverse)}
    assert found["reverse voltage"].parts == ("D1",)
    assert found["reverse voltage"].evidence[0].value == pytest.approx(10, abs=0.2)
    assert found["collector-emitter voltage"].parts == ("Q1",)
    assert found["collector-emitter voltage"].evidence[0].value == pytest.approx(10, abs=0.2)
    left = cures(design, JunctionReverse)
    assert left["take low-leakage-diode for D1"] == []
    assert next(wrong for title, wrong in left.items() if title.startswith("take monolithic-pair-npn")) == []


def test_reverse_voltage_in_another_loop(board, cures):
    """The clamps of a pair on one emitter line see the same, and are given a better model."""
    weak = ('D1 = { kind = "diode", model = "low-leakage-diode"', 'D1 = { kind = "diode", model = "weak-diode"')
    design = board("vapour", ONE_AMBIENT, weak)
    assert_finds(JunctionReverse, design, parts=["D1"])
    assert cures(design, JunctionReverse)["take low-leakage-diode for D1"] == []


def test_what_comes_with_a_reversal_is_one_finding(board):
    """The output current that a saturated amplifier drives into the emitter line is told of with the reversal."""
    small = ('"10 kohm", tolerance = "1 %", pins = ["O1"', '"47 ohm", tolerance = "1 %", pins = ["O1"')
    drain = ("D2 = {", 'R9 = { kind = "resistor", value = "330 ohm", pins = ["T1", "GND"] }\nD2 = {')
    found = findings_of(board("vapour", small, drain, *CLAMPS["vapour"]), JunctionReverse)
    assert [f.parts for f in found if f.severity is Severity.MAJOR] == [("Q1", "Q2")]
    assert {"emitter-base reverse voltage of Q1", "output current of U1"} <= {e.quantity for e in found[0].evidence}


def test_what_is_usual_is_another_matter(board):
    """A current that is over its rating in normal operation too is left to the rules about that."""
    heavy = ('load = "10 kohm"', 'load = "100 ohm"'), ("both-rails", "short-swing")
    found = findings_of(board("column", *heavy, ('["4 V", "8 V"]', '["4 V", "7.5 V"]')), JunctionReverse)
    assert not [f for f in found if f.parts == ("U2",)]
