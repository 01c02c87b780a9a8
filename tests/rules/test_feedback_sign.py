"""Feedback with the wrong sign. Which input must be inverting follows from counting inversions around each loop."""

import pytest
from rulecheck_rules.feedback_sign import FeedbackSign

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, design_from, findings_of, mended

SERVO = """
format = 1
[design]
title = "Loudness servo"
[nets]
GND = {{ role = "ground" }}
V12P = {{ role = "supply", voltage = "12 V" }}
V12N = {{ role = "supply", voltage = "-12 V" }}
VIN = {{ role = "input", drive = "voltage", range = ["-2 V", "2 V"] }}
VOUT = {{ role = "output" }}
[parts]
R1 = {{ kind = "resistor", value = "100 kohm", pins = ["VIN", "S"] }}
R2 = {{ kind = "resistor", value = "100 kohm", pins = ["{sense}", "S"] }}
C1 = {{ kind = "capacitor", value = "10 nF", pins = ["S", "SLOW"] }}
R3 = {{ kind = "resistor", value = "10 kohm", pins = ["VOUT", "F"] }}
R4 = {{ kind = "resistor", value = "10 kohm", pins = ["F", "GND"] }}
[parts.U1]
kind = "op-amp"
model = "bifet-precision"
pins = {{ "IN+" = "{plus}", IN- = "{minus}", OUT = "SLOW", "V+" = "V12P", V- = "V12N" }}
[parts.U2]
kind = "op-amp"
model = "bifet-precision"
pins = {{ "IN+" = "SLOW", IN- = "F", OUT = "VOUT", "V+" = "V12P", V- = "V12N" }}
"""


def servo(sense="VOUT", plus="GND", minus="S"):
    """An integrator, and a stage behind it that closes the loop where `sense` is its output."""
    return design_from(SERVO.format(sense=sense, plus=plus, minus=minus))


@pytest.mark.parametrize("name", ["gas_log", "steam_root", "dose_rate"])
def test_sound_boards(board, name):
    """Log, antilog and difference stages on one and two supplies have negative feedback everywhere."""
    assert_clean(FeedbackSign, board(name))


SWAPPED = [
    ("gas_log", "U2", ('"IN+" = "DP", IN- = "DN"', '"IN+" = "DN", IN- = "DP"')),
    ("gas_log", "U1A", ('"IN+" = "GND", IN- = "SUM1"', '"IN+" = "SUM1", IN- = "GND"')),
    ("steam_root", "U1B", ('"IN+" = "GND", IN- = "S2"', '"IN+" = "S2", IN- = "GND"')),
    ("steam_root", "U2B", ('"IN+" = "GND", IN- = "S3"', '"IN+" = "S3", IN- = "GND"')),
    ("dose_rate", "U1A", ('"IN+" = "MID", "IN-" = "IN1"', '"IN+" = "IN1", "IN-" = "MID"')),
]


@pytest.mark.parametrize(("name", "ref", "change"), SWAPPED)
def test_swapped_inputs(board, name, ref, change):
    """An amplifier with its inputs exchanged is found, it alone; exchanging them again mends it."""
    design = board(name, change)
    finding = assert_finds(FeedbackSign, design, parts=[ref])
    assert finding.severity is Severity.MAJOR
    assert len(findings_of(design, FeedbackSign)) == 1
    assert_clean(FeedbackSign, mended(design, finding.remedies[0]))


@pytest.mark.parametrize(("name", "ref", "change"), [SWAPPED[0], SWAPPED[3]])
def test_remedies_cure(board, cures, name, ref, change):
    """After the exchange no rule has a new major or minor."""
    assert cures(board(name, change), FeedbackSign) == {f"swap the inputs of {ref}": []}


@pytest.mark.parametrize(
    ("name", "change"),
    [
        ("gas_log", ('["DN", "VOUT"]', '["DN", "GND"]')),
        ("dose_rate", ('pins = ["DN", "LEVEL"]', 'pins = ["DN", "MID"]')),
    ],
)
def test_absent_feedback(board, name, change):
    """An amplifier whose output leads nowhere near its inputs is found; no edit can know what was meant."""
    finding = assert_finds(FeedbackSign, board(name, change), parts=["U2"])
    assert finding.severity is Severity.MAJOR
    assert not finding.remedies[0].edits


def test_integrator_in_an_outer_loop():
    """A capacitor alone around an amplifier is worth knowing where an outer loop holds it."""
    finding = assert_finds(FeedbackSign, servo(), parts=["U1"])
    assert finding.severity is Severity.OBSERVATION
    assert "U2" in finding.message


def test_integrator_by_itself():
    """Without the outer loop the integrator has no feedback at DC and runs away."""
    finding = assert_finds(FeedbackSign, servo(sense="GND"), parts=["U1"])
    assert finding.severity is Severity.MAJOR


def test_one_slip_in_a_loop_of_two():
    """Both return ratios of a loop turn positive with one slip; the finding is of the amplifier at fault."""
    design = servo(plus="S", minus="GND")
    found = [f for f in findings_of(design, FeedbackSign) if f.severity is Severity.MAJOR]
    assert [list(f.parts) for f in found] == [["U1"]]
    after = findings_of(mended(design, found[0].remedies[0]), FeedbackSign)
    assert [f.severity for f in after] == [Severity.OBSERVATION]


def test_two_slips(board):
    """Two amplifiers turned round apart from each other are two findings."""
    design = board("steam_root", SWAPPED[2][2], SWAPPED[3][2])
    assert sorted(list(f.parts) for f in findings_of(design, FeedbackSign)) == [["U1B"], ["U2B"]]


def test_spare_amplifier(board):
    """An amplifier that is not used needs no feedback."""
    spare = (
        'U9 = {{ kind = "op-amp", model = "bifet-precision", {}pins = '
        '{{ "IN+" = "GND", IN- = "GND", OUT = "NC", "V+" = "V15P", V- = "V15N" }} }}\n'
    )
    assert_clean(FeedbackSign, board("gas_log", ("[parts]\n", "[parts]\n" + spare.format("spare = true, "))))
    assert_finds(FeedbackSign, board("gas_log", ("[parts]\n", "[parts]\n" + spare.format(""))), parts=["U9"])
