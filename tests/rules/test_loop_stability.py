"""Loops that are calm, that ring and that oscillate. The boards are invented."""

import re
from pathlib import Path

import numpy as np
import pytest
from rulecheck_rules.feedback_sign import FeedbackSign
from rulecheck_rules.loop_stability import LoopStability

from rulecheck.api import Severity
from rulecheck.design.load import load_text
from rulecheck.testing import assert_clean, assert_finds, design_from, findings_of, mended

CASES = Path(__file__).parents[1] / "published" / "cases"
MAJOR, MINOR = Severity.MAJOR, Severity.MINOR
LIVELY = 'gain_bandwidth = "10 MHz", second_pole = "6 MHz", pins'
STAGE = """
format = 1

[design]
title = "log stage of a textbook"

[environment]
ambient = "28.56763 degC" # kT/q is 26 mV, as the source has it

[nets]
GND = { role = "ground" }
VP = { role = "supply", voltage = "15 V" }
VN = { role = "supply", voltage = "-15 V" }
VIN = { role = "input", drive = "voltage", range = ["1 mV", "10 V"] }
VOUT = { role = "output", load = "1 Gohm" }

[parts]
R1 = { kind = "resistor", value = "10 kohm", pins = ["VIN", "S"] }
R2 = { kind = "resistor", value = "95.238095 kohm", pins = ["S", "GND"] } # 100 kohm beside 2 Mohm
RE = { kind = "resistor", value = "4.3 kohm", pins = ["O", "VOUT"] }
CF = { kind = "capacitor", value = "90 pF", pins = ["S", "O"] }

[parts.Q1]
kind = "npn"
saturation_current = "10 fA"
forward_beta = 1e9
collector_capacitance = "20 pF"
pins = { C = "S", B = "GND", E = "VOUT" }

[parts.U1]
kind = "op-amp"
open_loop_gain = 1e9
gain_bandwidth = "1 MHz"
input_headroom = { low = "1 V", high = "1 V" }
output_headroom = { low = "10 mV", high = "10 mV" }
pins = { "IN+" = "GND", IN- = "S", OUT = "O", "V+" = "VP", V- = "VN" }
"""


def without(*refs):
    """Changes of a board that leave parts out."""
    return [(f"\n{ref} = {{ ", f"\n{ref} = {{ mounted = false, ") for ref in refs]


def resistor(ref, old, new):
    """A change of a board that gives a resistor another value."""
    start = f'{ref} = {{ kind = "resistor", value = "'
    return f'{start}{old}"', f'{start}{new}"'


def driven_directly(ref, emitter, output):
    """Changes of a board that leave out the resistor `ref` from an amplifier's output to an emitter line."""
    return [*without(ref), (f'"{emitter}"', f'"{output}"')]


def lively(ref):
    """A change that gives an amplifier of a board a second pole below its gain-bandwidth."""
    return lambda text: re.sub(rf"(\n{ref} = .*?)pins", rf"\g<1>{LIVELY}", text)


def quick(name):
    """Changes of a board that leave its supplies and ambient no spread: fewer conditions, the same loops."""
    spread = 'ambient = { min = "0 degC", typ = "25 degC", max = "50 degC" }'
    supplies = {"vapour": ', tolerance = "3 %"'}.get(name, ', tolerance = "5 %" }')
    return [(spread, 'ambient = "25 degC"'), (supplies, " }" if supplies.endswith("}") else "")]


def root_without_capacitors():
    """A root stage with two loops on one emitter line, and neither of their capacitors."""
    path = CASES / "cube_root.toml"
    text = re.sub(r"\[parts\.(C1|C2)\]\n(.+\n)+", "", path.read_text(encoding="utf-8"))
    return load_text(text.replace('V"\ntolerance = "5 %"', 'V"') + '\n[environment]\nambient = "25 degC"\n', path)


def figure(finding, quantity):
    """A figure of the evidence of a finding."""
    return next(e for e in finding.evidence if e.quantity == quantity)


@pytest.mark.parametrize(
    "name",
    [
        "log_ratio", "root", "light_ratio", "gas_log", "dose_rate", "vapour", "turbidity", "probe", "strip", "beam",
        "column", "heater", "sunshine", "lamp",
    ],
)  # fmt: skip
def test_calm_loops_are_sound(board, name):
    """Log pairs on one emitter line and apart, roots, single stages, followers, photocurrents: clean."""
    assert_clean(LoopStability, board(name))


@pytest.mark.parametrize(("farad", "margin"), [("0 F", 35.74), ("20 pF", 52.19), ("90 pF", 75.47), ("200 pF", 83.68)])
def test_a_thin_margin_is_a_small_fault(farad, margin):
    """The stage of the textbook is found where its margin is below 45 degrees, which is minor.

    S. Franco, "Design with Operational Amplifiers and Analog Integrated Circuits", ch. 13, Example 13.1: inputs and
    90 pF seen, the margins recomputed from its model of the loop.
    """
    capacitor = 'CF = { kind = "capacitor", value = "90 pF"'
    change = capacitor.replace("90 pF", farad) if farad != "0 F" else capacitor.replace("{", "{ mounted = false,")
    design = design_from(STAGE.replace(capacitor, change))
    if margin > 45:
        assert_clean(LoopStability, design)
        return
    finding = assert_finds(LoopStability, design, ["U1"])
    assert finding.severity is MINOR
    assert figure(finding, "phase margin").value == pytest.approx(margin, abs=0.1)
    assert finding.conditions["VIN"] == 10.0  # the loop gain is the largest at the largest current


@pytest.mark.parametrize(("farad", "margin"), [(None, 2.88), ("90 pF", 7.50)])
def test_without_its_emitter_resistor_the_stage_rings(farad, margin):
    """With the transistor's whole gain in the loop the same stage rings, which is major.

    S. Franco, Example 13.1, margins recomputed as above with RE omitted.
    """
    text = STAGE.replace('"4.3 kohm"', '"0 ohm"')
    design = design_from(text if farad else text.replace("CF = {", "CF = { mounted = false,"))
    finding = assert_finds(LoopStability, design, ["U1"])
    assert finding.severity is MAJOR
    assert figure(finding, "phase margin of U1").value == pytest.approx(margin, abs=0.1)
    ratio = figure(finding, "damping ratio").value
    assert ratio == pytest.approx(np.sin(np.radians(margin)) / 2, rel=0.02)  # one pole beyond the crossing, textbook
    assert "rings" in finding.consequence


@pytest.mark.parametrize(
    ("name", "changes", "parts", "severity"),
    [
        ("log_ratio", without("C1"), {"U1"}, MAJOR),  # unstable
        ("vapour", without("C1", "C2"), {"U1", "U2"}, MAJOR),
        ("heater", without("C1"), {"U1", "U2"}, MAJOR),
        ("root", without("C5"), {"U5"}, MAJOR),  # damping of 0.05
        ("beam", without("C1"), {"U1"}, MAJOR),  # 0.14
        ("log_ratio", [('"2.2 nF"', '"220 pF"'), ('"330 pF"', '"220 pF"')], {"U1", "U2"}, MINOR),  # 0.28
        ("probe", without("C1"), {"U1"}, MINOR),  # margin of 36.5°
        ("root", [('value = "22 pF"', 'value = "1 pF"')], {"U5"}, MINOR),  # margin of 41°
    ],
)
def test_severity_follows_the_damping(board, name, changes, parts, severity):
    """Unstable or damped with less than 0.15 is major, with less than 0.3 or a margin below 45 degrees minor."""
    found = findings_of(board(name, *changes), LoopStability)
    assert [(set(f.parts), f.severity) for f in found] == [(parts, severity)]


def test_loops_that_share_a_node_ring_together_with_comfortable_margins(board):
    """Two equal capacitors leave margins above 70 degrees to both loops, and a mode of both that rings."""
    finding = assert_finds(LoopStability, board("log_ratio", ('"2.2 nF"', '"220 pF"'), ('"330 pF"', '"220 pF"')))
    assert all(figure(finding, f"phase margin of {amplifier}").value > 70 for amplifier in ("U1", "U2"))
    assert 0.15 < figure(finding, "damping ratio").value < 0.3
    assert finding.conditions["VIN"] == 0.1  # the smallest signal current


def test_one_cause_is_one_finding(board):
    """A ringing pair spoils the margins of the amplifier behind it, which is not found besides."""
    found = findings_of(board("log_ratio", *without("C1", "C2")), LoopStability)
    assert [set(f.parts) for f in found] == [{"U1", "U2"}]


def test_stages_that_ring_each_by_themselves_are_two_findings(board):
    """Of two stages that oscillate the slower growing one is found too, and each has its own capacitors."""
    design = board("root", *without("C1", "C2", "C4"), *quick("root"))
    pair, single = findings_of(design, LoopStability)
    assert (set(pair.parts), set(single.parts)) == ({"U1", "U2"}, {"U4"})
    assert pair.severity is single.severity is MAJOR
    for first, second in ((pair, single), (single, pair)):
        (left,) = findings_of(mended(design, first.remedies[0]), LoopStability)
        assert left.parts == second.parts
    assert_clean(LoopStability, mended(mended(design, first.remedies[0]), left.remedies[0]))


def test_a_thin_margin_beside_a_ringing_stage_is_found(board):
    """A margin that stays thin without the ringing is a fault of its own."""
    thin = ('value = "22 pF"', 'value = "1 pF"')
    found = findings_of(board("root", *without("C4"), thin, *quick("root")), LoopStability)
    assert {(f.parts, f.severity) for f in found} == {(("U4",), MAJOR), (("U5",), MINOR)}


def test_saturated_amplifiers_are_not_judged(board):
    """An amplifier that is at its limit at every condition has no loop; inside its limits the same loop rings."""
    high = ('range = ["0.1 V", "10 V"]', 'range = ["1 V", "10 V"]')
    assert_finds(LoopStability, board("root", *without("C5"), high), ["U5"])
    assert_clean(LoopStability, board("root", *without("C5"), high, resistor("R8", "316 kohm", "6.34 Mohm")))


def test_only_conditions_inside_the_limits_count(board):
    """With ten times the gain the output is inside its limits at the least input alone, and is judged there."""
    finding = assert_finds(LoopStability, board("root", *without("C5"), resistor("R8", "316 kohm", "3.16 Mohm")))
    assert finding.conditions["VIN"] < 0.2  # 31.6·sqrt(VIN·1 V) is 14 V there
    judged = np.isfinite(figure(finding, "damping ratio").over)
    assert 0 < judged.sum() < judged.size / 5


def test_positive_feedback_at_dc_is_another_rule_s_finding(board):
    """Where feedback is positive at DC that is found, and not what the loops do."""
    turned = ('pins = { "IN+" = "GND", IN- = "S2"', 'pins = { "IN+" = "S2", IN- = "GND"')
    design = board("light_ratio", turned, *without("C2"))
    assert_clean(LoopStability, design)
    assert_finds(FeedbackSign, design, ["U2"])


def test_limits_are_settings(board):
    """A design may ask for more or for less."""
    asked = "[rules.loop-stability]\nphase_margin = {}\n\n[parts]"
    assert_clean(LoopStability, board("probe", *without("C1"), ("[parts]", asked.format('"30 deg"'))))
    assert_finds(LoopStability, board("probe", ("[parts]", asked.format('"80 deg"'))), ["U1"])


@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("light_ratio", [*without("C1"), *quick("light_ratio")]),
        ("gas_log", without("C1")),
        ("beam", without("C1")),
        ("probe", without("C1")),
    ],
)
def test_a_capacitor_cures(board, cures, name, changes):
    """One capacitor from output to inverting input cures one loop."""
    (after,) = cures(board(name, *changes), LoopStability).items()
    assert re.fullmatch(r"compensate with [\d.]+ pF from OUT to IN- of U1A?( \(leaves .*\))?", after[0])
    assert after[1] == []


def test_the_bandwidth_left_is_that_at_the_least_current_in_use(board):
    """What a capacitor leaves is I/(2π·V_T·C) at the cutoff, where the range goes on to zero."""
    ranged = ('range = ["10 mV", "0.1 V"]', 'range = ["0 V", "0.1 V"], cutoff = "10 mV"')
    title = assert_finds(LoopStability, board("probe", *without("C1"), ranged)).remedies[0].title
    least = 10e-6 / (2 * np.pi * 8.617333262e-5 * 303.15 * 10e-12)  # Hz; k/q of CODATA 2018
    assert title == f"compensate with 10 pF from OUT to IN- of U1 (leaves {least / 1e6:.2f} MHz)"


@pytest.mark.parametrize("name", ["log_ratio", "vapour"])
def test_a_pair_of_capacitors_cures(board, cures, name):
    """Loops that share a node get their capacitors together."""
    (after,) = cures(board(name, *without("C1", "C2"), *quick(name)), LoopStability).items()
    assert re.fullmatch(r"compensate with .* of U1 \(leaves .* kHz\), .* of U2 \(leaves .* MHz\)", after[0])
    assert after[1] == []


def test_a_pair_of_capacitors_cures_a_root_stage():
    """The root stage of the numeric cases without its capacitors: no capacitor of one loop alone calms it."""
    design = root_without_capacitors()
    finding = assert_finds(LoopStability, design, ["U1", "U2"])
    assert finding.severity is MAJOR
    assert [type(edit).__name__ for edit in finding.remedies[0].edits] == ["Add", "Add"]
    assert_clean(LoopStability, mended(design, finding.remedies[0]))


@pytest.mark.parametrize(
    ("name", "changes", "amplifier"),
    [
        ("log_ratio", [*without("C1"), *driven_directly("R3", "T1", "O1"), *quick("log_ratio")], None),
        ("gas_log", [*without("C1"), *driven_directly("R2", "LOG1", "DRIVE1")], "U1A"),
        ("light_ratio", [*without("C1"), *driven_directly("R1", "E1", "O1"), *quick("light_ratio")], "U1"),
    ],
)
def test_an_emitter_resistor_cures_where_no_capacitor_does(board, cures, name, changes, amplifier):
    """Where the transistor's gain is too much for any capacitor, a resistor at its emitter lowers it first."""
    design = board(name, *changes)
    if amplifier:
        design = load_text(lively(amplifier)(design.text), design.path)
    (after,) = cures(design, LoopStability).items()
    assert after[0].startswith("lower the loop gain by a resistor at the emitter, and compensate with ")
    assert after[1] == []


def test_a_small_emitter_resistor_is_raised(board):
    """A resistor that is there already is given the value that lowers the loop gain."""
    design = board("gas_log", *without("C1"), resistor("R2", "10 kohm", "10 ohm"))
    design = load_text(lively("U1A")(design.text), design.path)
    finding = assert_finds(LoopStability, design)
    assert [edit.key for edit in finding.remedies[0].edits][:1] == ["parts.R2.value"]
    assert_clean(LoopStability, mended(design, finding.remedies[0]))


def test_capacitors_that_are_there_are_changed(board):
    """A loop has one capacitor, whose value is set; those of calm loops stay."""
    both = assert_finds(LoopStability, board("log_ratio", ('"2.2 nF"', '"220 pF"'), ('"330 pF"', '"220 pF"')))
    assert [edit.key for edit in both.remedies[0].edits] == ["parts.C1.value", "parts.C2.value"]
    single = assert_finds(LoopStability, board("light_ratio", *without("C1")))
    assert "U3" in single.parts  # it takes part, but has its capacitor
    assert [edit.key for edit in single.remedies[0].edits] == ["parts.C16"]


def test_no_capacitor_goes_across_a_follower(board, cures):
    """A follower in the loop takes part in the ringing, but has no two nets to put a capacitor between."""
    (after,) = cures(board("heater", *without("C1")), LoopStability).items()
    assert after[0].startswith("compensate with 27 pF from OUT to IN- of U1 (leaves ")
    assert after[1] == []


@pytest.mark.parametrize(("name", "ref"), [("column", "U1"), ("lamp", "U1")])
def test_where_no_edit_cures_the_finding_says_so(board, name, ref):
    """A follower with a second pole below its gain-bandwidth wants another amplifier, which no edit of values gives."""
    slow = 'gain_bandwidth = "10 MHz", second_pole = "1 MHz", pins'
    design = board(name)
    design = load_text(re.sub(rf"(\n{ref} = .*?)pins", rf"\g<1>{slow}", design.text), design.path)
    finding = assert_finds(LoopStability, design, [ref])
    assert [remedy.edits for remedy in finding.remedies] == [()]
    assert "take an amplifier with a lower gain-bandwidth or a higher second pole" in finding.remedies[0].title
