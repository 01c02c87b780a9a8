"""Currents into amplifiers' inputs, leaky clamps and outputs that reverse. The circuits are invented."""

import pytest
from rulecheck_rules.input_protection import InputProtection

from rulecheck.api import Severity, parse_quantity
from rulecheck.testing import assert_clean, assert_finds, findings_of

ONE_AMBIENT = ('{ min = "0 degC", typ = "25 degC", max = "50 degC" }', '"25 degC"')
STOPPER = 'R3 = { kind = "resistor", value = "4.7 kohm", tolerance = "1 %", pins = ["S", "N"] }\n'
NO_STOPPER = ((STOPPER, ""), ('IN- = "N"', 'IN- = "S"'))
NO_SERIES = (('R0 = { kind = "resistor", value = "10 kohm"', 'R0 = { kind = "resistor", value = "100 ohm"'),)
CLAMP_DROP, CLAMP_RESISTANCE = 0.7, 20.0  # V, ohm: of the clamps that faults are solved with


@pytest.mark.parametrize("name", ["vapour", "turbidity", "column", "beam", "probe", "strip"])
def test_sound_designs(board, name):
    """Inputs behind resistors, clamps of low leakage and amplifiers that do not reverse have nothing to tell."""
    assert_clean(InputProtection, board(name))


@pytest.mark.parametrize("name", ["probe", "strip"])
def test_current_into_an_unpowered_amplifier(board, name):
    """15 V at 1 kohm find both rails at 0 V: 14 mA into a clamp rated for 5 mA."""
    finding = assert_finds(InputProtection, board(name, *NO_STOPPER), parts=["U1"])
    assert finding.severity is Severity.MAJOR
    assert "all supplies and references absent" in finding.scenario
    assert finding.evidence[0].value == pytest.approx((15 - CLAMP_DROP) / (1e3 + CLAMP_RESISTANCE), rel=0.02)
    assert finding.evidence[0].limit == pytest.approx(5e-3)


def test_current_into_a_follower(board):
    """12 V at 100 ohm drive 94 mA."""
    finding = assert_finds(InputProtection, board("column", *NO_SERIES), parts=["U1"])
    assert finding.evidence[0].value == pytest.approx((12 - CLAMP_DROP) / (100 + CLAMP_RESISTANCE), rel=0.02)


def test_input_current_that_the_model_does_not_say(board):
    """5 mA are assumed, and the message says so."""
    silent = ("both-rails", "silent-amplifier")
    finding = assert_finds(InputProtection, board("column", *NO_SERIES, silent), parts=["U1"])
    assert finding.evidence[0].limit == pytest.approx(5e-3)
    assert "assumed" in finding.message


@pytest.mark.parametrize("name", ["probe", "strip"])
def test_inputs_without_clamps(board, name):
    """An amplifier without clamps has no current to judge."""
    bare = ('U1 = { kind = "op-amp"', 'U1 = { input_clamps = "none", kind = "op-amp"')
    assert_clean(InputProtection, board(name, *NO_STOPPER, bare))


@pytest.mark.parametrize(("name", "changes"), [("probe", NO_STOPPER), ("strip", NO_STOPPER), ("column", NO_SERIES)])
def test_series_resistor_cures(board, cures, name, changes):
    """The least preferred resistor before the input that brings the current to its limit."""
    design = board(name, *changes)
    left = cures(design, InputProtection)
    (title,) = left
    assert left[title] == []
    if name != "strip":  # whose log diode takes part of the current
        volts, ohm = (12, 100) if name == "column" else (15, 1e3)
        needed = (volts - CLAMP_DROP) / 5e-3 - ohm - CLAMP_RESISTANCE
        assert 0.95 * needed < parse_quantity(" ".join(title.split()[1:3]), "ohm") < 1.15 * needed


LEAKY = ("low-leakage-diode", "small-signal-diode")


@pytest.mark.parametrize("name", ["vapour", "turbidity"])
def test_leaky_clamps(board, name):
    """A common diode leaks 25 nA and more at the hottest, a good part of 1 uA."""
    found = findings_of(board(name, LEAKY), InputProtection)
    assert {f.parts for f in found if f.nets == ("S1",)} == {("D1",)}
    assert {f.severity for f in found} == {Severity.MINOR}
    (finding,) = (f for f in found if f.parts == ("D1",))
    # At 50 degC: 25 nA doubled every 10 K, and 2.5 nA of saturation current grown (3.0, 1.12 V, n = 1.8).
    generated = 25e-9 * 2**2.5
    assert finding.evidence[0].value > generated / 1e-6
    assert finding.evidence[0].basis == "limit"
    assert finding.conditions["ambient"] == pytest.approx(323.15)


@pytest.mark.parametrize("name", ["vapour", "turbidity"])
def test_quiet_clamp_cures(board, cures, name):
    """The quietest diode of the catalogues cures it; each clamp is told of by itself."""
    left = cures(board(name, LEAKY), InputProtection)
    assert left["take low-leakage-diode for D1"] == []


def test_signal_through_zero_is_judged_by_its_largest(board):
    """A linear stage whose signal goes through zero has no least signal: the leakage counts against the largest."""
    across = ("C1 = {", 'D1 = { kind = "diode", model = "low-leakage-diode", pins = { A = "GND", K = "S" } }\nC1 = {')
    assert_clean(InputProtection, board("column", across))
    assert_finds(InputProtection, board("column", across, LEAKY, ("10 kohm", "10 Mohm")), parts=["D1"])


@pytest.mark.parametrize("name", ["probe", "strip"])
def test_clamp_behind_a_stopper(board, name):
    """A clamp at the pin, behind a resistor without signal, counts against the signal of the node before it."""
    clamp = 'D2 = {{ kind = "diode", model = "{}", pins = {{ A = "N", K = "VP" }} }}\nC1 = {{'
    smaller = ('"1 kohm"', '"10 kohm"')
    assert_clean(InputProtection, board(name, smaller, ("C1 = {", clamp.format("low-leakage-diode"))))
    leaky = board(name, smaller, ("C1 = {", clamp.format("small-signal-diode")))
    finding = assert_finds(InputProtection, leaky, parts=["D2"])
    generated = 25e-9 * 2**0.5  # at 30 degC, of a model whose leakage doubles every 10 K
    assert finding.evidence[0].value == pytest.approx(generated / 1e-6, rel=0.15)


def test_log_diode_is_no_clamp(board):
    """A diode that carries the signal itself does not leak into it."""
    diode = (
        'Q1 = { kind = "pnp", model = "close-pnp", pins = { C = "S", B = "S", E = "VOUT" } }',
        'D9 = { kind = "diode", model = "small-signal-diode", pins = { A = "VOUT", K = "S" } }',
    )
    assert_clean(InputProtection, board("strip", diode))


REVERSING = ('U1 = { kind = "op-amp", model = "both-rails"', 'U1 = { kind = "op-amp", model = "reversing"')
TWO_SUPPLIES = (
    ("VIN = {", 'VN = { role = "supply", voltage = "-15 V", tolerance = "3 %" }\nVIN = {'),
    ('V- = "GND"', 'V- = "VN"'),
    ("C1 = {", 'C4 = { kind = "capacitor", value = "100 nF", pins = ["VN", "GND"] }\nC1 = {'),
    ("C2 = {", 'C5 = { kind = "capacitor", value = "100 nF", pins = ["VN", "GND"] }\nC2 = {'),
    ('survives = ["0 V", "12 V"]', 'survives = ["-60 V", "12 V"]'),
)
SUMMING = (
    ('pins = ["BUF", "S"]', 'pins = ["VIN", "S"]'),
    ('U2 = { kind = "op-amp", model = "both-rails"', 'U2 = { kind = "op-amp", model = "reversing"'),
)


@pytest.mark.parametrize(("changes", "ref"), [((REVERSING,), "U1"), (SUMMING, "U2")])
def test_reversal(board, cures, changes, ref):
    """A follower, and a summing node, driven below the range: a clamp from ground or another model cures it."""
    design = board("column", *TWO_SUPPLIES, *changes)
    finding = next(f for f in findings_of(design, InputProtection) if f.subject == "reversal")
    assert finding.parts == (ref,)
    assert finding.severity is Severity.MINOR
    left = cures(design, InputProtection)
    assert next(wrong for title, wrong in left.items() if "with low-leakage-diode from GND" in title) == []
    assert left[f"take both-rails for {ref}: its output does not reverse"] == []


def test_clamp_that_would_conduct_is_not_proposed(board, cures):
    """On one supply no level is both in the range and below the signal: another model is the only way."""
    below = (REVERSING, ('survives = ["0 V", "12 V"]', 'survives = ["-12 V", "12 V"]'))
    assert not [title for title in cures(board("column", *below), InputProtection) if "clamp" in title]


def test_reversal_with_a_supply_absent_is_not_judged(board):
    """Virtual grounds stand at an absent negative supply: nothing computes then, and nothing is told."""
    assert_clean(InputProtection, board("probe", REVERSING))
