"""Leakage over the board into summing nodes. The boards are invented; what leaks is Ohm's law."""

import pytest
from rulecheck_rules.board_leakage import BoardLeakage

from rulecheck.api import Severity, parse_quantity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

#: Highest rail [V], node and least signal current [A] of the boards: 0.1 V over the input resistor, least light.
NODES = {
    "log_ratio": (15.75, "S1", 0.1 / 100e3), "root": (15.75, "S1", 0.1 / 200e3),
    "light_ratio": (15.75, "S1", 50e-9),
}  # fmt: skip


def insulated(ohm):
    """Change that states the insulation of the board."""
    return "[environment]\n", f'[environment]\nboard_insulation = "{ohm}"\n'


@pytest.mark.parametrize("name", ["log_ratio", "root", "light_ratio", "beam"])
def test_boards_not_said_to_leak(board, name):
    """Without a stated insulation nothing is judged."""
    assert_clean(BoardLeakage, board(name))


@pytest.mark.parametrize("name", list(NODES))
def test_clean_boards(board, name):
    """A board of 100 Gohm leaks 0.16 nA: less than 1 % of 50 nA and more."""
    assert_clean(BoardLeakage, board(name, insulated("100 Gohm")))


@pytest.mark.parametrize("name", list(NODES))
def test_leaking_board(board, name):
    """Over 1 Gohm a rail drives its voltage over that into the node, a part of the least signal."""
    volts, node, signal = NODES[name]
    finding = assert_finds(BoardLeakage, board(name, insulated("1 Gohm")), {"Q1"})
    assert finding.severity is Severity.MINOR
    assert finding.nets == (node,)
    assert finding.evidence[0].value == pytest.approx(volts / 1e9 / signal, rel=5e-3)
    assert "VOUT moves" in finding.consequence


def test_the_least_insulation_counts(board):
    """Of a spread the least resistance is judged."""
    spread = insulated("1 Gohm")[0], '[environment]\nboard_insulation = { min = "1 Gohm", typ = "1 Tohm" }\n'
    one, other = (findings_of(board("root", change), BoardLeakage) for change in (insulated("1 Gohm"), spread))
    assert [f.evidence[0].value for f in one] == [f.evidence[0].value for f in other]


def test_effect_on_the_output(board):
    """The consequence is that of the current on the logarithm: a decade a volt."""
    finding = assert_finds(BoardLeakage, board("log_ratio", insulated("1 Gohm")), {"Q1"})
    moved = float(finding.consequence.split("moves by ")[1].split(" mV")[0])
    assert moved == pytest.approx(1e3 * 15.75e-9 / 1e-6 / 2.302585, rel=0.03)  # mV: 1 V / ln 10 * share


@pytest.mark.parametrize("name", ["log_ratio", "root"])
@pytest.mark.parametrize("words", ["larger currents", "ask VIN only"])
def test_remedies_cure(board, name, words):
    """A larger current and a range that ends sooner bring the leakage under its limit."""
    design = board(name, insulated("1 Gohm"))
    finding = assert_finds(BoardLeakage, design, {"Q1"})
    (remedy,) = (r for r in finding.remedies if r.title.startswith(words))
    assert finding.id not in {f.id for f in findings_of(mended(design, remedy), BoardLeakage)}


def test_remedy_brings_nothing_new(board, cures):
    """On a board that leaks a little too much, a range that ends sooner is all that is needed, by all rules."""
    design = board("log_ratio", insulated("1 Gohm"))
    left = cures(design, BoardLeakage)
    assert [] in left.values(), left


@pytest.mark.parametrize("name", list(NODES))
def test_guard(board, name):
    """A guard is always proposed, with the insulation that would do, and no edit makes one."""
    volts, _, signal = NODES[name]
    (guard,) = (r for r in assert_finds(BoardLeakage, board(name, insulated("1 Gohm"))).remedies if not r.edits)
    wanted = guard.title.split("board_insulation is ")[1].split(" or more")[0]
    assert parse_quantity(wanted, "ohm") == pytest.approx(volts / (0.01 * signal), rel=0.03)  # two digits
