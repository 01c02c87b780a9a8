"""Total supplies against ratings. The limits are those of the shipped models: 9 to 36 V, and 2.7 to 5.5 V."""

import pytest
from rulecheck_rules.supply_rating import SupplyRating

from rulecheck.api import Set, Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

V18 = [('voltage = "15 V"', 'voltage = "18 V"'), ('voltage = "-15 V"', 'voltage = "-18 V"')]


@pytest.mark.parametrize("name", ["gas_log", "steam_root", "dose_rate"])
def test_sound_boards(board, name):
    """Supplies inside the rating at their tolerance are sound."""
    assert_clean(SupplyRating, board(name))


def test_exactly_at_the_rating(board):
    """A total that just reaches the limit is inside it: twice 18 V without tolerance."""
    assert_clean(SupplyRating, board("gas_log", *V18, (', tolerance = "3 %"', "")))


def test_over_the_rating_at_the_tolerance_only(board):
    """Twice 18 V are 36 V, but 37.08 V at +3 %; amplifiers of one model on the same supplies are one finding."""
    design = board("gas_log", *V18)
    finding = assert_finds(SupplyRating, design, parts=["U1A", "U1B", "U2"])
    assert finding.severity is Severity.MAJOR
    assert finding.evidence[0].value == pytest.approx(2 * 18 * 1.03)
    assert finding.evidence[0].limit == 36.0
    assert finding.conditions["V15P"] == pytest.approx(18.54)
    assert len(findings_of(design, SupplyRating)) == 1


def test_under_the_rating(board):
    """2.7 V less 4 % is under the 2.7 V that the amplifier wants."""
    finding = assert_finds(SupplyRating, board("dose_rate", ('voltage = "5 V"', 'voltage = "2.7 V"')))
    assert finding.evidence[0].value == pytest.approx(2.7 * 0.96)
    assert finding.evidence[0].relation == ">="


def test_drop_in_series_counts(board):
    """The supply is that at the pins: of 9.2 V, 1.8 mA through twice 22 ohm leave 9.12 V, through 100 ohm 8.84 V."""
    low = [('"15 V", tolerance = "3 %"', '"4.6 V"'), ('"-15 V", tolerance = "3 %"', '"-4.6 V"')]
    assert_clean(SupplyRating, board("gas_log", *low))
    finding = assert_finds(SupplyRating, board("gas_log", *low, ("22 ohm", "100 ohm")))
    assert finding.evidence[0].value == pytest.approx(9.2 - 2 * 100 * 1.8e-3, abs=0.02)  # and the output's current


@pytest.mark.parametrize(
    ("name", "changes", "supplies"),
    [
        ("gas_log", V18, {"nets.V15P.voltage": "15 V", "nets.V15N.voltage": "-15 V"}),
        ("dose_rate", [('voltage = "5 V"', 'voltage = "9 V"')], {"nets.V5.voltage": "5 V"}),
    ],
)
def test_supply_remedy(board, name, changes, supplies):
    """The nearest usual supply that fits is proposed, both sides kept equal, and mends it."""
    design = board(name, *changes)
    remedy = assert_finds(SupplyRating, design).remedies[0]
    assert {edit.key: edit.to for edit in remedy.edits} == supplies
    assert_clean(SupplyRating, mended(design, remedy))


@pytest.mark.parametrize(
    ("name", "changes"), [("gas_log", V18), ("dose_rate", [('voltage = "5 V"', 'voltage = "12 V"')])]
)
def test_model_remedy(board, name, changes):
    """Models that take the supply are proposed for every amplifier concerned, and mend it."""
    design = board(name, *changes)
    finding = assert_finds(SupplyRating, design)
    remedies = [r for r in finding.remedies if all(isinstance(e, Set) and e.key.endswith(".model") for e in r.edits)]
    assert remedies
    for remedy in remedies:
        assert len(remedy.edits) == len(finding.parts)
        assert_clean(SupplyRating, mended(design, remedy))


def test_no_model_takes_it(board):
    """Where no catalogue has an amplifier for the supply, the remedy says so and has no edit."""
    design = board("gas_log", ('voltage = "15 V"', 'voltage = "60 V"'), ('voltage = "-15 V"', 'voltage = "-60 V"'))
    remedies = assert_finds(SupplyRating, design).remedies
    assert [r.title for r in remedies if not r.edits] == [
        "take an amplifier for this supply: no catalogue of the design has one"
    ]


@pytest.mark.parametrize(
    ("name", "changes"),
    [("gas_log", V18), ("steam_root", [(old, new.replace("18", "20")) for old, new in V18])],
)
def test_remedies_cure(board, cures, name, changes):
    """With the supplies set right, no rule has a new major or minor."""
    title = "make V15P 15 V and V15N -15 V"
    assert cures(board(name, *changes), SupplyRating, title) == {title: []}
