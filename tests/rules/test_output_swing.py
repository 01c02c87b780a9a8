"""Outputs at their limits, near them, and over their current. The circuits are invented."""

import pytest
from rulecheck_rules.output_swing import OutputSwing

from rulecheck.api import Review, Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of

ONE_AMBIENT = ('{ min = "0 degC", typ = "25 degC", max = "50 degC" }', '"25 degC"')
EMITTER_RESISTOR = ('"10 kohm", tolerance = "1 %", pins = ["O1"', '"200 kohm", tolerance = "1 %", pins = ["O1"')
MORE_GAIN = ('"10 kohm", tolerance = "0.1 %", pins = ["S"', '"47 kohm", tolerance = "0.1 %", pins = ["S"')


def model(ref, name):
    """The change that gives an amplifier another model."""
    return f'{ref} = {{ kind = "op-amp", model = "both-rails"', f'{ref} = {{ kind = "op-amp", model = "{name}"'


@pytest.mark.parametrize("name", ["vapour", "turbidity", "column", "beam"])
def test_sound_designs(board, name):
    """Log stages with swing to spare and stages without a logarithm have nothing to tell."""
    assert_clean(OutputSwing, board(name))


def test_output_stage_with_too_much_gain(board):
    """1 Mohm over 1 kohm makes 59 V of the 59 mV of a decade at 25 degC: the last stage has 14.5 V."""
    finding = assert_finds(OutputSwing, board("vapour", ("16.9 kohm", "1 Mohm")), parts=["U3"])
    assert finding.severity is Severity.MAJOR
    needed = finding.evidence[0]
    assert needed.value == pytest.approx(59.16, rel=0.02)  # kT/q ln 10 = 59.16 mV at 25 degC, MAT12 data sheet p. 9
    assert needed.limit == pytest.approx(14.55 - 0.02)
    assert "VOUT is" in finding.consequence


@pytest.mark.parametrize(("name", "emitter_current"), [("vapour", 110e-6), ("turbidity", 146e-6)])
def test_emitter_resistor_too_large(board, name, emitter_current):
    """The log amplifier runs out of supply, and only it is named.

    In the first both currents of the pair flow in the resistor, 100 and 10 uA; in the second 100 uA of the
    signal and 46 uA that the divider of the last stage draws.
    """
    found = findings_of(board(name, EMITTER_RESISTOR), OutputSwing)
    assert [f.parts for f in found] == [("U1",)]
    junction = 0.63
    assert abs(found[0].evidence[0].value) == pytest.approx(emitter_current * 200e3 + junction, rel=0.01)


def test_several_saturated_amplifiers_have_one_cause(board):
    """A follower that cannot go below 2 V takes the stage behind it to 12.2 V; the follower alone is named."""
    gain = ('"10 kohm", tolerance = "0.1 %", pins = ["S"', '"24 kohm", tolerance = "0.1 %", pins = ["S"')
    design = board("column", ('["4 V", "8 V"]', '["-18 V", "6 V"]'), model("U1", "short-swing"), gain)
    assert {"U1", "U2"} == {a for a in ("U1", "U2") if "high" in states(design, a) or "low" in states(design, a)}
    found = findings_of(design, OutputSwing)
    assert [f.parts for f in found] == [("U1",)]


def states(design, amplifier):
    """The states of an amplifier over the review conditions."""
    return set(Review(design).operating_points.state(amplifier))


def test_reversed_signal_is_another_matter(board):
    """A log amplifier at its limit because its signal has the wrong sign is for the rule about signals."""
    reversed_signal = board("vapour", ('["0.1 V", "10 V"]', '["-1 V", "10 V"]'), (D1, ""))
    assert_clean(OutputSwing, reversed_signal)
    assert assert_finds("signal-current", reversed_signal).severity is Severity.MAJOR


D1 = 'D1 = { kind = "diode", model = "low-leakage-diode", pins = { A = "O1", K = "S1" } }\n'


def test_below_the_cutoff_nothing_is_asked(board):
    """An input that may reach zero saturates its log amplifier there; below the cutoff that is no fault."""
    changes = ('range = ["0.1 V", "10 V"]', 'range = ["0 V", "10 V"], cutoff = "0.1 V"'), (D1, "")
    assert_clean(OutputSwing, board("vapour", *changes))


def test_outside_the_range_of_the_requirement_nothing_is_asked(board):
    """A requirement of a narrower range keeps the output inside its limits."""
    narrow = """[requirements.level]
output = "VOUT"
law = "2 * middle - VIN"
constants = { middle = "5 V" }
accuracy = { absolute = "100 mV" }
range = { VIN = ["5 V", "8 V"] }
"""
    wide = ('["4 V", "8 V"]', '["-2 V", "8 V"]')
    assert_finds(OutputSwing, board("column", wide))
    assert_clean(OutputSwing, board("column", wide, ("[parts]", narrow + "\n[parts]")))


def test_amplifiers_without_negative_feedback_are_another_matter(board):
    """Swapped inputs drive an output to its limit; the rule about feedback tells of it."""
    swapped = ('"IN+" = "MID", IN- = "S"', '"IN+" = "S", IN- = "MID"')
    assert_clean(OutputSwing, board("column", swapped))


@pytest.mark.parametrize(("low", "severity"), [("2.05 V", Severity.MINOR), ("2.25 V", None)])
def test_margin(board, low, severity):
    """On 12 V the smaller of 0.2 V and 2 % of the supply, 0.2 V, is wanted beyond an output headroom of 2 V."""
    design = board("column", model("U1", "short-swing"), ('["4 V", "8 V"]', f'["{low}", "8 V"]'))
    found = findings_of(design, OutputSwing)
    assert [f.severity for f in found] == ([severity] if severity else [])
    if severity:
        assert found[0].evidence[0].value == pytest.approx(0.05, abs=1e-3)
        assert found[0].evidence[0].limit == pytest.approx(0.2)


def test_guaranteed_headroom_counts_for_the_margin(board):
    """An output headroom of 1 V typical and 2.1 V at most leaves 2.2 V without the margin wanted."""
    spread = ("U1 = { kind", 'U1 = { output_headroom = { low = { typ = "1 V", max = "2.1 V" }, high = "1 V" }, kind')
    finding = assert_finds(OutputSwing, board("column", spread, ('["4 V", "8 V"]', '["2.2 V", "8 V"]')))
    assert finding.evidence[0].basis == "limit"
    assert finding.evidence[0].value == pytest.approx(0.1, abs=1e-3)


def test_trim_at_the_end_of_its_travel(board):
    """A trim is judged where it is set, not at the ends of its travel, where it may saturate what it trims."""
    trim = 'RV1 = { kind = "potentiometer", value = "200 kohm", position = { min = 0.02, typ = 0.05, max = 0.9 }'
    pins = 'pins = { END1 = "S", WIPER = "VOUT", END2 = "GND" }'
    plain = 'R2 = { kind = "resistor", value = "10 kohm", tolerance = "0.1 %", pins = ["S", "VOUT"] }'
    law = """[requirements.level]
output = "VOUT"
law = "2 * middle - VIN"
constants = { middle = "5 V" }
accuracy = { absolute = "100 mV" }
"""
    adjusting = board("column", (plain, f'{trim}, adjusts = "level", {pins} }}'), ("[parts]", law + "\n[parts]"))
    assert_clean(OutputSwing, adjusting)
    assert_finds(OutputSwing, board("column", (plain, f"{trim}, {pins} }}")), parts=["U2"])


def test_output_current(board):
    """8 V at 300 ohm is 27 mA, of 10 mA that the amplifier has; where no limit is stated nothing is judged."""
    heavy = ('load = "10 kohm"', 'load = "300 ohm"')
    finding = assert_finds(OutputSwing, board("column", heavy, model("U2", "short-swing")), parts=["U2"])
    assert finding.severity is Severity.MAJOR
    assert finding.evidence[0].value == pytest.approx((6 / 300) + 2 / 10e3, rel=0.01)
    assert_clean(OutputSwing, board("column", heavy, model("U2", "both-rails")))


@pytest.mark.parametrize("name", ["vapour", "turbidity"])
def test_smaller_emitter_resistor_cures(board, cures, name):
    """The emitter resistor is computed from the volts that are missing, as a preferred value."""
    left = cures(board(name, ONE_AMBIENT, EMITTER_RESISTOR), OutputSwing)
    title = next(title for title in left if title.startswith("make R2"))
    assert left[title] == []
    assert float(title.split()[2]) < 130


@pytest.mark.parametrize(("name", "ref"), [("column", "R2"), ("beam", "R1")])
def test_smaller_feedback_resistor_cures(board, cures, name, ref):
    """A gain too large is brought down by the feedback resistor."""
    left = cures(board(name, MORE_GAIN if name == "column" else ("20 kohm", "100 kohm")), OutputSwing)
    assert any(title.startswith(f"make {ref}") and not wrong for title, wrong in left.items())


FIVE_VOLTS = ('voltage = "15 V"', 'voltage = "5 V"'), ('voltage = "-15 V"', 'voltage = "-5 V"')


def test_supplies_and_model_cure_a_short_swing(board, cures):
    """At 5 V an output that stays 2 V away from the rails is short of swing: supplies of 6 V, or another model."""
    gain = ("34 kohm", "93.1 kohm")
    left = cures(board("turbidity", ONE_AMBIENT, *FIVE_VOLTS, model("U3", "short-swing"), gain), OutputSwing)
    assert left["make VP 6 V and VN -6 V"] == []
    assert left["take both-rails for U3: its output comes nearer to the rails"] == []


def test_supply_and_model_cure_a_follower(board, cures):
    """A follower for 4 to 10.5 V on 12 V with an output that goes to 2 V from the rail."""
    range_and_gain = ('["4 V", "8 V"]', '["4 V", "10.5 V"]'), ('"5 V", tolerance', '"6 V", tolerance')
    left = cures(board("column", *range_and_gain, model("U1", "short-swing")), OutputSwing)
    assert left["make VP 15 V"] == []
    assert left["take both-rails for U1: its output comes nearer to the rails"] == []


INVERTING = (
    (
        'pins = ["VIN", "IN"] }',
        """pins = ["VIN", "W"] }
R9 = { kind = "resistor", value = "93.1 kohm", pins = ["W", "BUF"] }""",
    ),
    ('"IN+" = "IN", IN- = "BUF"', '"IN+" = "MID", IN- = "W"'),
    ("C1 = {", 'C9 = { kind = "capacitor", value = "22 pF", pins = ["W", "BUF"] }\nC1 = {'),
    ('pins = ["BUF", "S"]', 'pins = ["BUF", "S"], package = "N1"'),
    ('["4 V", "8 V"]', '["4.2 V", "5.8 V"]'),
    ('R1 = { kind = "resistor", value = "10 kohm"', 'R1 = { kind = "resistor", value = "20 kohm"'),
)
ATTENUATED = (
    ('"16.9 kohm", tolerance = "0.1 %", pins = ["M", "VOUT"]', '"301 kohm", tolerance = "0.1 %", pins = ["M", "Y"]'),
    ('IN- = "M", OUT = "VOUT"', 'IN- = "M", OUT = "Y"'),
    (
        'pins = ["M", "VOUT"] }',
        """pins = ["M", "Y"] }
R9 = { kind = "resistor", value = "100 kohm", tolerance = "0.1 %", pins = ["Y", "X"] }
R10 = { kind = "resistor", value = "5.62 kohm", tolerance = "0.1 %", pins = ["X", "VOUT"] }
U9 = { kind = "op-amp", model = "both-rails",
  pins = { "IN+" = "GND", IN- = "X", OUT = "VOUT", "V+" = "VP", V- = "VN" } }
C10 = { kind = "capacitor", value = "100 nF", pins = ["VP", "GND"] }
C11 = { kind = "capacitor", value = "100 nF", pins = ["VN", "GND"] }""",
    ),
)


@pytest.mark.parametrize(("name", "changes"), [("column", INVERTING), ("vapour", (ONE_AMBIENT, *ATTENUATED))])
def test_gain_moved_to_the_next_stage_cures(board, cures, name, changes):
    """A stage of much gain before one of little: the same gain in all with less in the first."""
    left = cures(board(name, *changes), OutputSwing)
    assert any(title.startswith("move gain to the next stage") and not wrong for title, wrong in left.items())


LOW_RESISTANCES = (
    model("U2", "short-swing"),
    ('["4 V", "8 V"]', '["4 V", "7.5 V"]'),
    ('"10 kohm", tolerance = "0.1 %"', '"200 ohm", tolerance = "0.1 %"'),
)
LOW_BURDEN = (
    ONE_AMBIENT,
    model("U3", "short-swing"),
    ('survives = ["-15 V", "15 V"]', 'survives = ["0.1 V", "10 V"]'),
    ("C3 = {", 'R6 = { kind = "resistor", value = "100 ohm", tolerance = "1 %", pins = ["VOUT", "GND"] }\nC3 = {'),
)


@pytest.mark.parametrize(
    ("name", "changes", "resistors"),
    [("column", LOW_RESISTANCES, ("R1", "R2")), ("vapour", LOW_BURDEN, ("R6",))],
)
def test_resistor_and_model_cure_too_much_current(board, cures, name, changes, resistors):
    """Resistors at a summing node are scaled together, a burden alone; or the amplifier is made stronger."""
    left = cures(board(name, *changes), OutputSwing)
    scaled = next(title for title in left if all(f"make {ref} " in title for ref in resistors))
    assert left[scaled] == []
    assert next(wrong for title, wrong in left.items() if title.startswith("take both-rails")) == []
