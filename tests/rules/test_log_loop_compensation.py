"""Log loops with their capacitor, and log loops that lean on strays. The boards are invented."""

import re
from pathlib import Path

import numpy as np
import pytest
from rulecheck_rules.log_loop_compensation import LogLoopCompensation
from rulecheck_rules.loop_stability import LoopStability

from rulecheck.analysis.review import Review
from rulecheck.api import Severity
from rulecheck.design.load import load, load_text
from rulecheck.testing import assert_clean, assert_finds, mended

EXAMPLES = Path(__file__).parents[2] / "example_designs"
BARE = ("\nC1 = { ", "\nC1 = { mounted = false, ")
SLOWER = ('R2 = { kind = "resistor", value = "330 ohm"', 'R2 = { kind = "resistor", value = "680 ohm"')
SILENT = 'kind = "npn", saturation_current = "25 fA", forward_beta = 600, package = "M1"'
MARGIN, MOVEMENT = 45.0, 8.0


def silent(board, name, *changes):
    """A board whose transistors have no capacitances in their model."""
    design = board(name, *changes)
    text = re.sub(r'kind = "npn", model = "[\w-]+"(, package = "M1")?', SILENT, design.text)
    text = re.sub(
        r'(?m)^kind = "npn"\nmodel = .*$', 'kind = "npn"\nsaturation_current = "25 fA"\nforward_beta = 600', text
    )
    assert text != design.text
    return load_text(text, design.path)


def level_meter():
    """The example of a meter without its capacitor."""
    return load(EXAMPLES / "faulty" / "strays_only.toml")


def margins(design, amplifier):
    """Phase margins as they are, and with the transistors' capacitances halved and doubled."""
    review = Review(design)
    npn = {ref: part for ref, part in design.parts.items() if part.kind in ("npn", "pnp")}
    names = ("emitter_capacitance", "collector_capacitance")
    changed = [{(r, n): f * getattr(p, n).typ for r, p in npn.items() for n in names} for f in (0.5, 2.0)]
    return [loops.phase_margin(amplifier) for loops in (review.loops, *map(review.loops_with, changed))]


@pytest.mark.parametrize(
    "name",
    ["log_ratio", "root", "light_ratio", "gas_log", "dose_rate", "vapour", "probe", "strip", "heater", "sunshine"],
)
def test_compensated_loops_are_sound(board, name):
    """Log and antilog loops with a capacitor, whether the amplifier's input is at the node or behind a resistor."""
    assert_clean(LogLoopCompensation, board(name))


@pytest.mark.parametrize("name", ["beam", "column", "lamp"])
def test_loops_that_take_no_logarithm_are_not_judged(board, name):
    """A transistor that makes a current of a voltage is in a loop, but in no log loop."""
    assert_clean(LogLoopCompensation, board(name, BARE))


@pytest.mark.parametrize("name", ["log_ratio", "light_ratio", "gas_log", "probe"])
def test_a_capacitor_makes_the_model_s_capacitances_unimportant(board, name):
    """With a capacitor nothing need be known of the transistors'."""
    assert_clean(LogLoopCompensation, silent(board, name))


@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("gas_log", [('["SUM1", "DRIVE1"]', '["SUM1", "LOG1"]')]),
        ("light_ratio", [('pins = ["S1", "O1"]', 'pins = ["E1", "S1"]')]),
        ("probe", [('["S", "O"]', '["S", "VOUT"]')]),
        ("probe", [('["S", "O"]', '["N", "O"]')]),
    ],
)
def test_either_side_of_the_emitter_resistor_counts(board, name, changes):
    """A capacitor from the emitter to the summing node compensates too, and one to the input behind a resistor."""
    design = silent(board, name, *changes)
    assert design.parts["C1"].mounted
    assert_clean(LogLoopCompensation, design)


@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("gas_log", [('["SUM1", "DRIVE1"]', '["SUM1", "GND"]')]),
        ("probe", [('["S", "O"]', '["VOUT", "O"]')]),
    ],
)
def test_capacitors_elsewhere_do_not_count(board, name, changes):
    """A capacitor from the node to ground, or across the emitter resistor, compensates nothing."""
    design = silent(board, name, *changes)
    review = Review(design)
    amplifier = "U1A" if name == "gas_log" else "U1"
    margin = np.nanmin(review.loops.phase_margin(amplifier))
    rule = LogLoopCompensation if margin > MARGIN else LoopStability
    assert_finds(rule, design)


@pytest.mark.parametrize(
    ("name", "changes", "amplifier"),
    [("probe", [BARE, SLOWER], "U1"), ("strip", [BARE], "U1"), (None, [], "U1")],
)
def test_loops_that_lean_on_strays(board, name, changes, amplifier):
    """Loops that are calm with the capacitances of the model, and not with twice or half of them, are a small fault."""
    design = board(name, *changes) if name else level_meter()
    assert_clean(LoopStability, design)
    finding = assert_finds(LogLoopCompensation, design, [amplifier])
    assert finding.severity is Severity.MINOR
    figures = {e.quantity: e for e in finding.evidence}
    now, *moved = margins(design, amplifier)
    movement = np.max([np.abs(m - now) for m in moved], axis=0)
    least = np.min(moved, axis=0)
    assert np.nanmin(least) < MARGIN or np.nanmax(movement) > MOVEMENT
    worst = int(np.nanargmin(least) if np.nanmin(least) < MARGIN else np.nanargmax(movement))
    assert figures["movement of the margin"].value == pytest.approx(movement[worst], abs=0.01)
    assert figures["margin with capacitances halved or doubled"].value == pytest.approx(least[worst], abs=0.01)


def test_the_limit_that_is_missed_is_the_one_that_is_named(board):
    """A margin that falls too low is told by what is to be left, one that moves too far by how far it may."""
    fallen = assert_finds(LogLoopCompensation, board("probe", BARE, SLOWER))
    moved = assert_finds(LogLoopCompensation, board("strip", BARE))
    assert fallen.message.endswith("(45° to be left)")
    assert moved.message.endswith("(limit 8°)")


@pytest.mark.parametrize(("name", "part"), [("probe", "Q1"), ("sunshine", "D1")])
def test_capacitances_that_no_model_gives(board, name, part):
    """A loop without capacitor whose junction has no capacitances in its model cannot be said to be calm."""
    if name == "sunshine":
        diode = 'kind = "diode", saturation_current = "10 fA", pins = { A = "S"'
        design = board(name, BARE, ('kind = "diode", model = "low-leakage-diode", pins = { A = "S"', diode))
    else:
        design = silent(board, name, BARE, SLOWER)
    assert_clean(LoopStability, design)
    finding = assert_finds(LogLoopCompensation, design)
    assert finding.severity is Severity.MINOR
    assert finding.message.endswith(f"no capacitances in the model of {part}")


@pytest.mark.parametrize(("name", "changes"), [("log_ratio", [BARE]), ("light_ratio", [BARE]), ("probe", [BARE])])
def test_loops_that_ring_are_another_rule_s_finding(board, name, changes):
    """What rings, or has too thin a margin as it is, is found by that and not by its capacitances."""
    design = board(name, *changes)
    assert_finds(LoopStability, design)
    assert_clean(LogLoopCompensation, design)


def test_saturated_amplifiers_are_not_judged(board):
    """An amplifier at its limit at every condition has no loop whose margin could move."""
    bare = [BARE, SLOWER]
    drained = ('range = ["10 mV", "0.1 V"]', 'range = ["-0.1 V", "-10 mV"]')
    assert_finds(LogLoopCompensation, board("probe", *bare))
    assert_clean(LogLoopCompensation, board("probe", *bare, drained))


def test_limits_are_settings(board):
    """A house may allow a margin to move further."""
    allowed = ("[parts]", '[rules.log-loop-compensation]\nmovement = "20 deg"\n\n[parts]')
    assert_clean(LogLoopCompensation, board("strip", BARE, allowed))
    assert_finds(LogLoopCompensation, board("strip", BARE, (allowed[0], allowed[1].replace("20", "5"))))


@pytest.mark.parametrize(("name", "changes"), [("probe", [BARE, SLOWER]), ("strip", [BARE])])
def test_a_capacitor_cures(board, cures, name, changes):
    """The capacitor that is offered takes the finding away and brings nothing."""
    (after,) = cures(board(name, *changes), LogLoopCompensation).items()
    assert re.fullmatch(r"compensate with [\d.]+ pF from OUT to IN- of U1 \(leaves [\d.]+ MHz\)", after[0])
    assert after[1] == []


@pytest.mark.parametrize(("name", "changes"), [("probe", [BARE, SLOWER]), ("strip", [BARE]), (None, [])])
def test_the_capacitor_takes_the_weight_off_the_strays(board, name, changes):
    """With it the margin keeps its limit, and moves no more than allowed, with capacitances halved and doubled."""
    design = board(name, *changes) if name else level_meter()
    finding = assert_finds(LogLoopCompensation, design)
    after = mended(design, finding.remedies[0])
    assert_clean(LogLoopCompensation, after)
    now, *moved = margins(after, "U1")
    assert np.nanmin([now, *moved]) >= MARGIN
    assert np.nanmax([np.abs(m - now) for m in moved]) <= MOVEMENT
