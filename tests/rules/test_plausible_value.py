"""Slips of the prefix: the same digits, three, six or nine decades away."""

import pytest
from rulecheck_rules.plausible_value import PlausibleValue

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

SLIPS = [
    ("gas_log", "R6", ('value = "16.9 kohm"', 'value = "16.9 mohm"'), "16.9 kohm"),
    ("gas_log", "R2", ('R2 = { kind = "resistor", value = "10 kohm"', 'R2 = { kind = "resistor", value = "4.7 ohm"'),
     "4.7 kohm"),
    ("gas_log", "C3", ('"33 pF"', '"33 uF"'), "33 pF"),
    ("steam_root", "R8", ('"316 kohm"', '"316 Gohm"'), "316 kohm"),
    ("dose_rate", "C3", ('"47 pF"', '"47 fF"'), "47 pF"),
    ("dose_rate", "C4", ('[parts.C4]\nkind = "capacitor"\nvalue = "100 nF"',
                         '[parts.C4]\nkind = "capacitor"\nvalue = "100 mF"'), "100 nF"),
]  # fmt: skip


@pytest.mark.parametrize("name", ["gas_log", "steam_root", "dose_rate"])
def test_sound_boards(board, name):
    """Values as they are used are believed, 22 ohm in a supply too."""
    assert_clean(PlausibleValue, board(name))


@pytest.mark.parametrize(("name", "ref", "change", "meant"), SLIPS)
def test_slip_of_the_prefix(board, name, ref, change, meant):
    """A value beyond belief is found at its part, and one of the remedies is the value that was meant."""
    design = board(name, change)
    finding = assert_finds(PlausibleValue, design)
    assert ref in finding.parts
    assert finding.severity is Severity.MINOR
    assert finding.location.key == f"parts.{finding.parts[0]}.value"
    remedy = next(remedy for remedy in finding.remedies if remedy.title == f"write {meant}")
    assert ref not in [part for f in findings_of(mended(design, remedy), PlausibleValue) for part in f.parts]


@pytest.mark.parametrize(
    ("name", "change"),
    [
        ("gas_log", ('"22 ohm"', '"4.7 ohm"')),
        ("gas_log", ('"22 ohm"', '"0 ohm"')),
        ("gas_log", ('R2 = { kind = "resistor", value = "10 kohm"', 'R2 = { kind = "resistor", value = "0 ohm"')),
        ("gas_log", ('R2 = { kind = "resistor", value = "10 kohm"', 'R2 = { kind = "resistor", value = "10 ohm"')),
        ("steam_root", ('"316 kohm"', '"100 Gohm"')),
        ("dose_rate", ('"100 nF"', '"10 mF"')),
        ("dose_rate", ('"47 pF"', '"1 uF"')),
        ("dose_rate", ('"47 pF"', '"0.1 pF"')),
    ],
)
def test_values_just_believed(board, name, change):
    """Links, small resistors in supplies, and values at the limits are left alone."""
    assert_clean(PlausibleValue, board(name, change))


def test_compensation_behind_an_emitter_resistor(board):
    """The capacitor on the far side of the resistor at an amplifier's output compensates as well."""
    far = ('["SUM1", "DRIVE1"]', '["SUM1", "LOG1"]')
    assert_finds(PlausibleValue, board("gas_log", far, ('"150 pF"', '"1.5 uF"')), parts=["C1"])
    elsewhere = ('["SUM1", "DRIVE1"]', '["SUM1", "GND"]')
    found = findings_of(board("gas_log", elsewhere, ('"150 pF"', '"1.5 uF"')), PlausibleValue)
    assert [list(f.parts) for f in found] == [["C2"]]


@pytest.mark.parametrize(("name", "ref", "change", "meant"), [SLIPS[1], SLIPS[3]])
def test_remedies_cure(board, cures, name, ref, change, meant):
    """The value that was meant brings nothing new, by all rules."""
    assert cures(board(name, change), PlausibleValue, f"write {meant}") == {f"write {meant}": []}
