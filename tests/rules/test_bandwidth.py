"""Bandwidths that requirements ask for. The boards are invented."""

from math import pi

import pytest
from rulecheck_rules.bandwidth import Bandwidth

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

THERMAL = 8.617333262e-5  # V/K, CODATA k/q


def asking(board, name, least, value=None):
    """A log stage that is asked for a bandwidth, at the least signal where `value` is not given."""
    output, source, signal, before = {
        "gas_log": ("VOUT", "VIN", "0.1 V", "[matching.pair]"),
        "dose_rate": ("LEVEL", "PD1", "100 nA", "[matching.log]"),
    }[name]
    asked = f'bandwidth = {{ min = "{least}", input = "{source}", at = {{ {source} = "{value or signal}" }} }}'
    return board(name, (before, f'[requirements.speed]\noutput = "{output}"\n{asked}\n\n{before}'))


# Least signal current, capacitor, and what the divider of emitter resistor and gain resistor leaves of the drive.
STAGES = {"gas_log": (1e-6, 150e-12, 1 / 11), "dose_rate": (100e-9, 220e-12, 2 / 22)}


@pytest.mark.parametrize(("name", "least"), [("gas_log", "3.3 kHz"), ("dose_rate", "220 Hz"), ("absent", "")])
def test_what_is_met_is_clean(board, name, least):
    """Bandwidths that the stages have, and a design that asks for none, are clean."""
    assert_clean(Bandwidth, asking(board, name, least) if least else board("log_ratio"))


@pytest.mark.parametrize("name", STAGES)
def test_the_log_stage_is_as_fast_as_its_current(board, name):
    """q·I/(2π·kT·C) at the least current, less what the emitter's load takes of the drive (textbook, and Kirchhoff)."""
    finding = assert_finds(Bandwidth, asking(board, name, "5 kHz"))
    (evidence,) = finding.evidence
    current, farad, share = STAGES[name]
    assert finding.severity is Severity.MAJOR
    assert evidence.value == pytest.approx(share * current / (2 * pi * THERMAL * 298.15 * farad), rel=0.05)
    assert evidence.limit == 5e3
    assert "Q1 works with" in finding.consequence


def test_a_point_without_an_answer_is_told(board):
    """Where an amplifier is at its limit there is no bandwidth, and the rule says so instead of staying silent."""
    finding = assert_finds(Bandwidth, asking(board, "gas_log", "2 kHz", "-1 V"))
    assert finding.severity is Severity.OBSERVATION
    assert "no bandwidth" in finding.message


@pytest.mark.parametrize(("name", "least"), [("gas_log", "5 kHz"), ("dose_rate", "500 Hz")])
def test_a_smaller_capacitor_or_a_larger_signal(board, cures, name, least):
    """The capacitor of the slow loop, lowered, and the range it is asked over: each takes the finding away."""
    after = cures(asking(board, name, least), Bandwidth)
    assert any(title.startswith("make C1 ") for title in after), after
    assert any(title.startswith("ask it from") for title in after), after
    assert not any(after.values()), after


def test_the_capacitor_is_as_large_as_it_may_be(board):
    """3.76 kHz at 150 pF: for 5 kHz 100 pF is the next of the series that will do."""
    design = asking(board, "gas_log", "5 kHz")
    (finding,) = findings_of(design, Bandwidth)
    remedy = next(r for r in finding.remedies if r.title.startswith("make C1"))
    assert remedy.edits[0].to == "100 pF"
    assert_clean(Bandwidth, mended(design, remedy))
