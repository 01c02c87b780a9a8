"""Capacitors at supplies, counted against packages."""

import pytest
from rulecheck_rules.decoupling import Decoupling

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended


def without(name):
    """The change that makes a capacitor of gas_log too small to count."""
    return f'{name} = {{ kind = "capacitor", value = "100 nF"', f'{name} = {{ kind = "capacitor", value = "1 nF"'


@pytest.mark.parametrize("name", ["gas_log", "steam_root", "dose_rate"])
def test_sound_boards(board, name):
    """One capacitor a package and supply is enough; ground wants none, and a net behind 22 ohm its own."""
    assert_clean(Decoupling, board(name))


@pytest.mark.parametrize(
    ("name", "change", "net", "refs", "at"),
    [
        ("gas_log", without("C4"), "V15P", ["U1A", "U1B"], "V15P"),
        ("gas_log", without("C7"), "V15N", ["U2"], "U2N"),
        ("steam_root", without("C6"), "V15P", ["U3"], "V15P"),
        ("dose_rate", ('value = "100 nF"', 'value = "4.7 nF"'), "V5", ["U1A", "U1B", "U2"], "V5"),
    ],
)
def test_too_few_capacitors(board, name, change, net, refs, at):
    """The amplifiers of the package left without one are named, and a capacitor at their pins mends it."""
    design = board(name, change)
    finding = assert_finds(Decoupling, design, parts=refs)
    assert finding.severity is Severity.MINOR
    assert list(finding.nets) == [net]
    assert all(edit.table["pins"] == [at, "GND"] for edit in finding.remedies[0].edits)
    assert_clean(Decoupling, mended(design, finding.remedies[0]))


@pytest.mark.parametrize(("value", "counts"), [("10 nF", True), ("10 uF", True), ("9.1 nF", False), ("11 uF", False)])
def test_limits_of_a_decoupling_capacitor(board, value, counts):
    """From 10 nF to 10 µF, both included, a capacitor decouples."""
    found = findings_of(board("dose_rate", ('value = "100 nF"', f'value = "{value}"')), Decoupling)
    assert bool(found) is not counts


def test_capacitor_between_the_supplies(board):
    """From one supply to the opposite one a capacitor serves both."""
    across = board("gas_log", ('pins = ["V15P", "GND"]', 'pins = ["V15P", "V15N"]'), without("C5"))
    assert_clean(Decoupling, across)


def test_capacitor_elsewhere_does_not_count(board):
    """A capacitor from a supply to a signal decouples nothing."""
    assert_finds(Decoupling, board("gas_log", ('pins = ["V15P", "GND"]', 'pins = ["V15P", "LOG1"]')))


def test_concession_by_part(board):
    """A shared capacitor conceded for a part covers the finding at that part."""
    concession = '\n[[concessions]]\nrule = "decoupling"\nparts = ["U3"]\nreason = "shares C8, 4 mm away"\n'
    design = board("steam_root", without("C6"), ("\n[matching.log]", concession + "\n[matching.log]"))
    assert assert_finds(Decoupling, design, parts=["U3"]).concession is not None


def test_spare_amplifier_wants_none(board):
    """A package of nothing but spare amplifiers needs no capacitor."""
    spare = (
        'U9 = { kind = "op-amp", model = "bifet-precision", spare = true, pins = '
        '{ "IN+" = "GND", IN- = "F", OUT = "F", "V+" = "V15P", V- = "V15N" } }\n'
    )
    assert_clean(Decoupling, board("gas_log", ("[parts]\n", "[parts]\n" + spare)))
    assert findings_of(board("gas_log", ("[parts]\n", "[parts]\n" + spare.replace("spare = true, ", ""))), Decoupling)


@pytest.mark.parametrize(("name", "change"), [("gas_log", without("C7")), ("steam_root", without("C6"))])
def test_remedies_cure(board, cures, name, change):
    """The added capacitor brings nothing new, by all rules."""
    after = cures(board(name, change), Decoupling)
    assert list(after.values()) == [[]]
