"""Common-mode ranges of amplifiers' inputs. The circuits are invented; distances are worked out beside each."""

import pytest
from rulecheck_rules.input_headroom import InputHeadroom

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of

# 4.85 V from the negative rail at its weakest, where the model wants 6 V.
LOW_SUPPLIES = (('voltage = "15 V"', 'voltage = "6 V"'), ('voltage = "-15 V"', 'voltage = "-5 V"'))
ONE_AMBIENT = ('{ min = "0 degC", typ = "25 degC", max = "50 degC" }', '"25 degC"')
DEEP_U2 = (
    'U2 = { kind = "op-amp", model = "both-rails"',
    'U2 = { kind = "op-amp", model = "deep-floor"',
)
DEEP_U1 = (
    'U1 = { kind = "op-amp", model = "both-rails"',
    'U1 = { kind = "op-amp", model = "deep-floor"',
)


@pytest.mark.parametrize("name", ["vapour", "turbidity", "column", "beam"])
def test_sound_designs(board, name):
    """Virtual grounds between two supplies, and about a level on one supply, are in range."""
    assert_clean(InputHeadroom, board(name))


def test_virtual_ground_at_a_rail_that_the_range_takes_in(board):
    """An input that goes below the rail may stand on it, a few microvolts either way."""
    assert_clean(InputHeadroom, board("column", ('"5 V", tol', '"0 V", tol'), ('["4 V", "8 V"]', '["0 V", "0.1 V"]')))


@pytest.mark.parametrize("name", ["vapour", "turbidity"])
def test_ground_too_near_to_the_negative_supply(board, name):
    """Ground is 4.85 V from a -5 V supply at its weakest: 1.15 V too near for an amplifier that wants 6 V."""
    finding = assert_finds(InputHeadroom, board(name, *LOW_SUPPLIES, DEEP_U2), parts=["U2"])
    assert finding.severity is Severity.MAJOR
    assert finding.evidence[0].value == pytest.approx(-1.15, abs=1e-3)
    assert finding.conditions["VN"] == pytest.approx(-4.85)


def test_amplifiers_at_one_level_are_one_finding(board):
    """Two amplifiers of one model at one level have one cause."""
    found = findings_of(board("vapour", *LOW_SUPPLIES, DEEP_U1, DEEP_U2), InputHeadroom)
    assert [set(f.parts) for f in found] == [{"U1", "U2"}]


def test_signal_that_leaves_the_range_of_a_follower(board):
    """A follower for 4 to 8 V finds its lower end 2 V outside a range that begins 6 V from the rail."""
    finding = assert_finds(InputHeadroom, board("column", DEEP_U1), parts=["U1"])
    assert finding.severity is Severity.MAJOR
    assert finding.evidence[0].value == pytest.approx(-2.0, abs=1e-3)


def test_thin_margin(board):
    """An input 50 mV inside its range is told of as minor; 100 mV are wanted."""
    finding = assert_finds(InputHeadroom, board("column", DEEP_U1, ('["4 V", "8 V"]', '["6.05 V", "8 V"]')))
    assert finding.severity is Severity.MINOR
    assert finding.evidence[0].value == pytest.approx(0.05, abs=1e-3)


def test_margin_is_a_setting(board):
    """A design may ask for a margin of its own."""
    change = ("[parts]", '[rules.input-headroom]\nmargin = "20 mV"\n\n[parts]')
    assert_clean(InputHeadroom, board("column", DEEP_U1, ('["4 V", "8 V"]', '["6.05 V", "8 V"]'), change))


def test_saturation_is_another_matter(board):
    """A summing node that a saturated amplifier has let go is not an input out of range."""
    saturated = board("vapour", ("16.9 kohm", "1 Mohm"))
    assert_clean(InputHeadroom, saturated)
    assert assert_finds("output-swing", saturated).parts == ("U3",)


@pytest.mark.parametrize("name", ["vapour", "turbidity"])
def test_supply_and_model_cure_a_ground_near_the_rail(board, cures, name):
    """The next usual supply, and a model whose inputs come nearer to the rail, each cure it."""
    left = cures(board(name, ONE_AMBIENT, *LOW_SUPPLIES, DEEP_U2), InputHeadroom)
    assert left["make VN -9 V"] == []
    assert left["take both-rails for U2: its inputs may stand 4.85 V from V-"] == []


def test_supply_and_model_cure_a_follower(board, cures):
    """The same at the positive rail: 11 V are beyond 11.64 - 1 V, and well inside 14.55 - 1 V."""
    less_gain = ('"10 kohm", tolerance = "0.1 %", pins = ["S"', '"5.1 kohm", pins = ["S"')
    high = (('["4 V", "8 V"]', '["7 V", "11 V"]'), less_gain)
    left = cures(board("column", DEEP_U1, *high), InputHeadroom)
    assert left["make VP 15 V"] == []
    assert left["take both-rails for U1: its inputs may stand 640 mV from V+"] == []


@pytest.mark.parametrize(("name", "change"), [("column", DEEP_U2), ("beam", DEEP_U1)])
def test_other_level_cures_a_reference_near_the_rail(board, cures, name, change):
    """A reference of 5 V that is the level of an amplifier which wants 6.1 V is raised to that."""
    assert cures(board(name, change), InputHeadroom)["make MID 6.1 V"] == []


@pytest.mark.parametrize("rule", ["input-headroom", "output-swing", "junction-reverse", "input-protection"])
@pytest.mark.parametrize("pins", ['{ "V+" = "VP", V- = "GND" }', "{}"])
def test_spare_amplifier_is_passed_over(board, rule, pins):
    """The other half of a dual, left open, is not judged, and changes its model with the first."""
    spare = f'U9 = {{ kind = "op-amp", model = "deep-floor", package = "U1", spare = true, pins = {pins} }}\nC1 = {{'
    assert_clean(rule, board("column", ("C1 = {", spare)))


def test_model_of_a_spare_half_changes_too(board):
    """A package holds one model."""
    spare = 'U9 = { kind = "op-amp", model = "deep-floor", package = "U1", spare = true, pins = {} }\nC1 = {'
    finding = assert_finds(InputHeadroom, board("column", DEEP_U1, ("C1 = {", spare)), parts=["U1"])
    assert any("take both-rails for U1, U9" in remedy.title for remedy in finding.remedies)
