"""Second operating points of log stages and of a self-biased reference. The boards are invented."""

from pathlib import Path

import pytest
from rulecheck_rules.latch_up import LatchUp

from rulecheck.api import Severity
from rulecheck.design.load import load_text
from rulecheck.testing import assert_clean, assert_finds, findings_of

BASE_DRIVEN = Path(__file__).parents[2] / "example_designs" / "sound" / "conductivity.toml"
STARTER = 'RS = { kind = "resistor", value = "20 Mohm", tolerance = "5 %", tempco = "0 ppm/K", pins = ["VP", "A"] }\n'


def base_driven(tail):
    """A log stage whose amplifier drives the base of the transistor that it holds, with an emitter resistor."""
    text = BASE_DRIVEN.read_text("utf-8")
    assert text.count('value = "4.7 kohm"') == 1
    return load_text(text.replace('value = "4.7 kohm"', f'value = "{tail}"'), BASE_DRIVEN)


@pytest.mark.parametrize("name", ["log_ratio", "self_biased"])
def test_one_operating_point_is_clean(board, name):
    """A stage driven at its emitters, and a reference with a start-up resistor, have one operating point."""
    assert_clean(LatchUp, board(name))


def test_a_strong_tail_is_clean():
    """With 4.7 kohm the emitters are pulled down against whatever the divider brings: one operating point."""
    assert_clean(LatchUp, base_driven("4.7 kohm"))


def test_a_saturated_transistor_holds_the_loop():
    """With 22 kohm both amplifiers stay at their limits, the output within 0.6 V of its 13.5 V."""
    finding = assert_finds(LatchUp, base_driven("22 kohm"), {"U1A", "U1B"})
    figures = {e.quantity: e.value for e in finding.evidence}
    assert finding.severity is Severity.MAJOR
    assert 12.9 < figures["VOUT in the second point"] < 13.5
    assert abs(figures["VOUT nominally"]) < 1.6
    assert "VOUT is" in finding.consequence
    assert "38 mV" in finding.consequence


def test_a_reference_without_a_start(board):
    """Without its start-up resistor the reference may stay without current: 5.6 kohm drop VT ln 8 = 53 mV or none."""
    finding = assert_finds(LatchUp, board("self_biased", (STARTER, "")))
    figures = {e.quantity: e.value for e in finding.evidence}
    assert figures["IREF nominally"] == pytest.approx(0.0257 * 2.079, rel=0.15)
    assert abs(figures["IREF in the second point"]) < 1e-3
    assert set(finding.parts) <= {"Q1", "Q2", "Q3", "Q4"}


def test_positive_feedback_is_another_rules_matter(board):
    """Swapped inputs of an amplifier give second points too, but their cause is the sign."""
    swapped = ('"IN+" = "GND", IN- = "S1"', '"IN+" = "S1", IN- = "GND"')
    assert_clean(LatchUp, board("log_ratio", swapped))


@pytest.mark.parametrize(("faulty", "words"), [("tail", ["clamp", "make R3"]), ("start", ["add a start-up path"])])
def test_remedies_leave_one_operating_point(board, cures, faulty, words):
    """A clamp, a stronger tail, a start-up path: each is gone after it, and nothing else has come."""
    design = base_driven("22 kohm") if faulty == "tail" else board("self_biased", (STARTER, ""))
    after = cures(design, LatchUp)
    assert [title.startswith(word) for title, word in zip(after, words, strict=True)] == [True] * len(words)
    assert not any(after.values()), after


def test_a_clamp_starts_nothing(board):
    """What lacks a start has no use for a clamp, and what is at a limit none for a start-up path."""
    for design, word in ((board("self_biased", (STARTER, "")), "clamp"), (base_driven("22 kohm"), "start-up")):
        (finding,) = (f for f in findings_of(design, LatchUp))
        assert not any(word in remedy.title for remedy in finding.remedies)
