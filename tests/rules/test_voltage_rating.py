"""Capacitors against their voltage rating. The boards are invented; their supplies are 15 V and 5 % or 3 %."""

import pytest
from rulecheck_rules.voltage_rating import VoltageRating

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of

RATED = 'tolerance = "10 %", voltage = "50 V", pins = ["V15P", "GND"]'
BARE = 'tolerance = "10 %", pins = ["V15P", "GND"]'
SUPPLIED = {"log_ratio": (RATED, 15.75, ("C10", "C12", "C14")), "gas_log": (BARE, 15.45, ("C4",))}


def rating(volts, name):
    """Change of the rating of the capacitors from the positive supply to ground."""
    return SUPPLIED[name][0], f'tolerance = "10 %", voltage = "{volts} V", pins = ["V15P", "GND"]'


@pytest.mark.parametrize("name", ["log_ratio", "light_ratio", "gas_log"])
def test_sound_boards(board, name):
    """Capacitors of 50 V on 15 V are clean, and so are those that state no rating."""
    assert_clean(VoltageRating, board(name))


@pytest.mark.parametrize("name", list(SUPPLIED))
@pytest.mark.parametrize(("volts", "severity"), [(15, Severity.MAJOR), (16, Severity.MINOR), (20, None)])
def test_rating(board, name, volts, severity):
    """Over the rating at the top of the supply's tolerance is major, over 80 % of it minor; one finding for all."""
    design, (_, highest, refs) = board(name, rating(volts, name)), SUPPLIED[name]
    if severity is None:
        assert_clean(VoltageRating, design)
        return
    (finding,) = findings_of(design, VoltageRating)
    assert set(finding.parts) == set(refs)
    assert finding.severity is severity
    assert finding.evidence[0].value == pytest.approx(highest)
    assert finding.conditions["V15P"] == pytest.approx(highest)


@pytest.mark.parametrize("name", list(SUPPLIED))
@pytest.mark.parametrize("volts", [10, 16])
def test_remedies_cure(board, cures, name, volts):
    """The next usual rating that leaves a fifth brings nothing new, by all rules."""
    title = f"take capacitors of 25 V for {', '.join(SUPPLIED[name][2])}"
    assert cures(board(name, rating(volts, name)), VoltageRating, title) == {title: []}


@pytest.mark.parametrize(
    ("name", "old", "highest"),
    # a decade above or below the middle; the full output
    [("log_ratio", 'C3 = { kind = "capacitor", value = "47 pF"', 1.0),
     ("root", 'C5 = { kind = "capacitor", value = "22 pF"', 10.0)],
)  # fmt: skip
def test_capacitor_at_an_output(board, name, old, highest):
    """A capacitor in a loop stands what its output reaches, whatever the sign."""
    finding = assert_finds(VoltageRating, board(name, (old, f'{old}, voltage = "{highest} V"')), {old[:2]})
    assert finding.evidence[0].value == pytest.approx(highest, rel=0.02)
    assert_clean(VoltageRating, board(name, (old, f'{old}, voltage = "{1.5 * highest} V"')))


def test_setting(board):
    """A house that derates further says so."""
    derated = ("[parts]", "[rules.voltage-rating]\nshare_of_rating = 0.3\n\n[parts]")
    found = findings_of(board("light_ratio", derated), VoltageRating)
    assert {f.severity for f in found} == {Severity.MINOR}
    assert [f.evidence[0].limit for f in found] == pytest.approx([15.0] * len(found))


def test_no_usual_rating(board):
    """Beyond the usual ratings the remedy says what to do, without edits."""
    tube = 'C90 = { kind = "capacitor", value = "1 nF", voltage = "2 kV", pins = ["TUBE", "GND"] }'
    changes = [
        ("[parts]\n", f"[parts]\n{tube}\n"),
        ("[nets]\n", '[nets]\nTUBE = { role = "supply", voltage = "1.8 kV" }\n'),
    ]
    remedies = assert_finds(VoltageRating, board("gas_log", *changes), {"C90"}).remedies
    assert [r.edits for r in remedies] == [()]
