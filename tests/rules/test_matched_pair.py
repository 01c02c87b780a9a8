"""Pairs that are matched, and pairs that are not. The boards are invented."""

import math

import pytest
from rulecheck_rules.matched_pair import MatchedPair

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

SOUND = ("log_ratio", "root", "light_ratio")
LOG_GROUP = ('[matching.pair]\nparts = ["Q1", "Q2"]\n', "")
SINGLES = ('model = "pair-npn", package = "M1"', 'model = "single-npn"')
LINK = ('between = ["M1", "RT"]', 'between = ["Q1", "RT"]')
SPLIT_LOG = ('Q2 = { kind = "npn", model = "pair-npn", package = "M1"', 'Q2 = { kind = "npn", model = "pair-npn"')
SPLIT_ROOT = (
    'Q4 = { kind = "npn", model = "pair-npn", package = "M2"',
    'Q4 = { kind = "npn", model = "pair-npn", package = "M3"',
)
SELECTED = ('parts = ["Q3", "Q4"]\n', 'parts = ["Q3", "Q4"]\nvbe_mismatch = "0.5 mV"\n')


@pytest.mark.parametrize("name", SOUND)
def test_matched_pairs_are_sound(board, name):
    """Pairs in one package and one group, matched to within their share, are clean."""
    assert_clean(MatchedPair, board(name))


def test_a_die_needs_no_group(board):
    """Two of one monolithic model in one package are matched by their die."""
    assert_clean(MatchedPair, board("log_ratio", LOG_GROUP))


def test_a_selected_pair_in_two_packages_is_matched(board):
    """A group that states its own mismatch was measured, whatever the packages."""
    stated = ('parts = ["Q3", "Q4"]\n', 'parts = ["Q3", "Q4"]\nvbe_mismatch = "40 uV"\n')
    assert_clean(MatchedPair, board("root", SPLIT_ROOT, stated))


def test_the_best_pairing_counts(board):
    """A loop of four is sound where any pairing is: here that of the first pair with the second, crosswise."""
    crossed = ('package = "M1", pins = { C = "S2"', 'package = "M2", pins = { C = "S2"')
    swapped = ('package = "M2", pins = { C = "S4"', 'package = "M1", pins = { C = "S4"')
    groups = [('parts = ["Q1", "Q2"]', 'parts = ["Q1", "Q4"]'), ('parts = ["Q3", "Q4"]', 'parts = ["Q2", "Q3"]')]
    gain = ('R4 = { kind = "resistor", value = "20 kohm"', 'R4 = { kind = "resistor", value = "10 kohm"')
    found = findings_of(board("root", crossed, swapped, *groups, gain), MatchedPair)
    assert not [f for f in found if f.severity is Severity.MAJOR]


@pytest.mark.parametrize(
    ("name", "changes", "parts"),
    [
        ("log_ratio", [SINGLES, LOG_GROUP, LINK], {"Q1", "Q2"}),
        ("log_ratio", [SPLIT_LOG], {"Q1", "Q2"}),
        ("root", [SPLIT_ROOT], {"Q3", "Q4"}),
        ("light_ratio", [("close-npn", "single-npn"), LOG_GROUP], {"Q1", "Q2"}),
    ],
)
def test_unmatched_pairs(board, name, changes, parts):
    """Separate packages, or separate parts in one without a group, are no pair."""
    finding = assert_finds(MatchedPair, board(name, *changes), parts)
    assert finding.severity is Severity.MAJOR
    assert finding.consequence.startswith("VOUT moves by")


def test_the_spread_of_unmatched_parts_is_solved_for(board):
    """At 0 degC a gain of 16.9·T_n/T turns a spread of 30 mV into 553 mV."""
    finding = assert_finds(MatchedPair, board("log_ratio", SPLIT_LOG))
    worst = 0.03 * 16.9 * 298.15 / 273.15  # V, by hand from the gain stage with its tempco resistor
    cost = next(e for e in finding.evidence if e.quantity == "error over its share")
    assert cost.value == pytest.approx(worst / 5e-3, rel=2e-3)  # a share is a quarter of 20 mV


def test_different_models_are_no_pair(board):
    """Two models in one package and group do not match."""
    other = ('Q2 = { kind = "npn", model = "pair-npn"', 'Q2 = { kind = "npn", model = "single-npn"')
    finding = assert_finds(MatchedPair, board("log_ratio", other), {"Q1", "Q2"})
    assert finding.severity is Severity.MAJOR
    assert "different models" in finding.message


def test_different_polarities_have_no_edit(board):
    """A junction against one of the other polarity cannot be cured by an edit, and the remedy says what to do."""
    pair = 'Q2 = { kind = "npn", model = "close-npn", package = "M1", pins = { C = "S2", B = "GND", E = "E2" } }'
    other = 'Q2 = { kind = "pnp", model = "single-pnp", package = "M1", pins = { C = "E2", B = "E2", E = "S2" } }'
    finding = assert_finds(MatchedPair, board("light_ratio", (pair, other)), {"Q1", "Q2"})
    assert finding.severity is Severity.MAJOR
    assert [remedy.edits for remedy in finding.remedies] == [()]
    assert "one kind" in finding.remedies[0].title


@pytest.mark.parametrize(
    ("name", "changes", "limit"),
    [
        ("root", [('model = "pair-npn", package = "M2"', 'model = "wide-npn", package = "M2"')], 2e-3),
        ("root", [SELECTED], 0.5e-3),
        ("light_ratio", [("close-npn", "wide-npn")], 2e-3),
    ],
)
def test_a_mismatch_over_its_share(board, name, changes, limit):
    """A matched pair whose mismatch costs more than its share is a small fault, with what would do."""
    finding = assert_finds(MatchedPair, board(name, *changes))
    assert finding.severity is Severity.MINOR
    mismatch = finding.evidence[0]
    assert mismatch.value == pytest.approx(limit)
    assert mismatch.limit < limit


def test_the_mismatch_of_a_log_ratio_is_a_ratio_of_currents(board):
    """2 mV cost 2 mV·q/kT of a current ratio, of which half a percent is the share where nothing is asked."""
    finding = assert_finds(MatchedPair, board("light_ratio", ("close-npn", "wide-npn")))
    cost = next(e for e in finding.evidence if e.quantity == "error over its share")
    thermal = 8.617333262e-5 * 273.15  # V at the coldest: k/q of CODATA 2018
    assert cost.value == pytest.approx(2e-3 / thermal / 0.005, rel=2e-3)


def test_drift_of_the_mismatch_counts(board):
    """A mismatch drift adds at the ends of the ambient range."""
    drifting = (
        'parts = ["Q1", "Q2"]\n',
        'parts = ["Q1", "Q2"]\nvbe_mismatch = "40 uV"\nvbe_mismatch_drift = "20 uV/K"\n',
    )
    finding = assert_finds(MatchedPair, board("log_ratio", drifting))
    assert finding.evidence[0].value == pytest.approx(540e-6)
    assert math.isclose(abs(finding.conditions["ambient"] - 298.15), 25.0)


def test_a_known_unit_has_no_spread(board):
    """A transistor that states its own offset is not judged by the limit of its kind."""
    known = ('package = "M1", pins = { C = "S2", B = "GND", E = "E2" } }',
             'package = "M1", vbe_offset = "0.1 mV", pins = { C = "S2", B = "GND", E = "E2" } }')  # fmt: skip
    assert_clean(MatchedPair, board("light_ratio", ("close-npn", "wide-npn"), known))


def test_an_unknown_mismatch_cannot_be_judged(board):
    """A group of parts without a mismatch is an observation that names the key."""
    finding = assert_finds(MatchedPair, board("log_ratio", ("pair-npn", "single-npn")), {"Q1", "Q2"})
    assert finding.severity is Severity.OBSERVATION
    assert "vbe_mismatch" in finding.remedies[0].title


@pytest.mark.parametrize(
    ("name", "changes", "title"),
    [
        ("log_ratio", [SPLIT_LOG], "move Q1 and Q2 into one package"),
        ("root", [SPLIT_ROOT], "move Q3 and Q4 into one package"),
        ("log_ratio", [SINGLES, LOG_GROUP, LINK], "select Q1 and Q2 to within ±240 uV"),
        ("light_ratio", [("close-npn", "single-npn"), LOG_GROUP], "select Q1 and Q2 to within ±110 uV"),
        ("root", [SELECTED], "select Q4 to within ±55 uV"),
    ],
)
def test_remedies_cure(board, cures, name, changes, title):
    """One package, a group, a closer selection: each takes the finding away and brings nothing."""
    assert cures(board(name, *changes), MatchedPair, title) == {title: []}


@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("log_ratio", [SINGLES, LOG_GROUP, LINK]),
        ("light_ratio", [("close-npn", "wide-npn")]),
        ("root", [('model = "pair-npn", package = "M2"', 'model = "wide-npn", package = "M2"')]),
    ],
)
def test_a_better_model_cures(board, name, changes):
    """A model of the catalogues with a tighter limit, for all of the pair, with package and group where they lack."""
    design = board(name, *changes)
    finding = assert_finds(MatchedPair, design)
    remedy = next(r for r in finding.remedies if r.title.startswith("use "))
    assert_clean(MatchedPair, mended(design, remedy))
