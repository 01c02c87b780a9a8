"""Signal currents: one way, within the rating, above the errors, straight; and not. The boards are invented."""

from math import log, sqrt

import pytest
from rulecheck_rules.signal_current import SignalCurrent

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of

RANGE = '["0.1 V", "10 V"]'
BIPOLAR = ('U1 = { kind = "op-amp", model = "bifet-amp"', 'U1 = { kind = "op-amp", model = "bipolar-amp"')
LARGE = [
    ('"100 kohm"', '"220 ohm"'),
    ('R3 = { kind = "resistor", value = "10 kohm"', 'R3 = { kind = "resistor", value = "100 ohm"'),
]
LARGE_LOG = [('"100 kohm"', '"10 kohm"'), ('"499 kohm"', '"49.9 kohm"')]
LARGE_ROOT = [('"200 kohm"', '"20 kohm"'), ('"1 Mohm"', '"100 kohm"')]
DARK = [("50 nA", "2 nA")]


def found(board, subject, name, *changes):
    """The finding of a subject in a board with changes, None where there is none."""
    return next((f for f in findings_of(board(name, *changes), SignalCurrent) if f.subject == subject), None)


@pytest.mark.parametrize("name", ["log_ratio", "root", "light_ratio"])
def test_sound_signals(board, name):
    """Currents of one sign, well above the errors and below the bend, are clean."""
    assert_clean(SignalCurrent, board(name))


@pytest.mark.parametrize(
    ("name", "span", "word"),
    [
        ("log_ratio", '["-1 V", "10 V"]', "wrong sign"),
        ("log_ratio", '["-10 V", "-0.1 V"]', "wrong sign"),
        ("root", '["0 V", "10 V"]', "zero"),
    ],
)
def test_zero_or_reversed(board, name, span, word):
    """A signal current that reaches zero or turns round where the law is asked is a fault."""
    finding = assert_finds(SignalCurrent, board(name, (RANGE, span)), {"Q1"})
    assert finding.severity is Severity.MAJOR
    assert word in finding.message


@pytest.mark.parametrize(("name", "span"), [("log_ratio", '["-1 V", "10 V"]'), ("root", '["0 V", "10 V"]')])
def test_below_the_cutoff_nothing_is_asked(board, name, span):
    """The same ranges with a cutoff are clean, and the cutoff itself is judged."""
    assert_clean(SignalCurrent, board(name, (RANGE, f'{span}, cutoff = "50 mV"')))
    low = found(board, "floor", name, (RANGE, f'{span}, cutoff = "1 mV"'))
    assert low.conditions["VIN"] == pytest.approx(1e-3)


def test_an_amplifier_that_cannot_follow_is_no_reversal(board):
    """A right current that the amplifier cannot drive its transistor to is not called reversed."""
    assert_clean(SignalCurrent, board("log_ratio", ('"499 kohm"', '"2.49 kohm"')))


def test_over_the_rating(board):
    """More than the collector current of the model is a fault."""
    finding = found(board, "rating", "log_ratio", *LARGE)
    assert finding.severity is Severity.MAJOR
    assert finding.evidence[0].value == pytest.approx(10 / 220, rel=1e-2)


def test_over_the_rating_of_one_part(board):
    """The rating that a part states of its own counts."""
    own = (
        'package = "M1", pins = { C = "S1", B = "GND"',
        'package = "M1", collector_current = "20 uA", pins = { C = "S1", B = "GND"',
    )
    finding = found(board, "rating", "light_ratio", own)
    assert finding.evidence[0].value == pytest.approx(50e-6, rel=1e-3)
    assert finding.evidence[0].limit == pytest.approx(20e-6)


def test_floor_of_a_voltage_input(board):
    """Bias at the hottest and offset over the input resistor are what the least current is compared with."""
    finding = found(board, "floor", "log_ratio", (RANGE, '["1 mV", "10 V"]'))
    errors = (100e-12 + 10e-12) * 2**2.5 + 0.2e-3 / 100e3  # A, by the model: bias doubled every 10 K; offset
    assert finding.severity is Severity.MINOR
    assert finding.evidence[0].value == pytest.approx((1e-3 / 100e3 - 20e-12 * 2**2.5) / errors, rel=5e-3)


def test_floor_of_a_photocurrent(board):
    """A photodiode of high resistance leaves bias alone."""
    finding = found(board, "floor", "light_ratio", *DARK)
    assert finding.evidence[0].value == pytest.approx((2e-9 - 20e-12 * 2**2.5) / (110e-12 * 2**2.5), rel=5e-3)


@pytest.mark.parametrize(("leakage", "is_found"), [("0.02 nA", True), ("0.1 pA", False), ("1 nA", False)])
def test_leakage_counts(board, leakage, is_found):
    """A diode adds its leakage at the hottest; one so leaky that it is a finding of its own is left to that."""
    diode = (
        f'{{ kind = "diode", model = "clamp-diode", reverse_leakage = "{leakage}", pins = {{ A = "S1", K = "V15P" }} }}'
    )
    changes = [("[parts]\n", f"[parts]\nD1 = {diode}\n"), ("50 nA", "13.4 nA")]
    finding = found(board, "floor", "light_ratio", *changes)
    assert (finding is not None) == is_found
    assert finding is None or "leakage 113 pA" in finding.message  # 20 pA doubled every 10 K from 25 to 50 degC


@pytest.mark.parametrize(
    ("name", "changes", "part"), [("log_ratio", LARGE_LOG, "Q1"), ("root", LARGE_ROOT, "Q1"),
                                  ("root", [('"499 kohm"', '"20 kohm"'), ('"316 kohm"', '"12.7 kohm"')], "Q4")]
)  # fmt: skip
def test_conformity(board, name, changes, part):
    """A signal so large that resistance and knee cost more than a share is a small fault, of log and antilog alike."""
    finding = found(board, "conformity", name, *changes)
    assert finding.severity is Severity.MINOR
    assert list(finding.parts) == [part]


def test_conformity_is_that_of_resistance_knee_and_early(board):
    """At 1 mA the bend is that of 0.4 ohm and of 40 ohm in the base, and of a knee at 30 mA, by the model equations."""
    finding = found(board, "conformity", "log_ratio", *LARGE_LOG)
    ambient, volts = finding.conditions["ambient"], finding.conditions["VIN"]
    current, thermal = volts / 10e3, 8.617333262e-5 * finding.conditions["ambient"]
    gain = 320 * (ambient / 298.15) ** 1.5
    resistive = current * 0.4 * (1 + 1 / gain) + current / gain * 40
    charge = (1 + sqrt(1 + 4 * current * 1.034 / 30e-3)) / 2
    bend = (resistive + thermal * log(charge)) * 16.9 * 298.15 / ambient
    cost = next(e.value for e in finding.evidence if e.quantity == "error over its share")
    assert cost == pytest.approx(bend / 5e-3, rel=0.02)


@pytest.mark.parametrize(
    ("name", "changes", "severity"),
    [
        ("light_ratio", DARK, Severity.OBSERVATION),
        ("light_ratio", [("50 nA", "0.5 nA")], Severity.MINOR),
        ("log_ratio", [(RANGE, '["0.5 mV", "10 V"]')], Severity.OBSERVATION),
        ("log_ratio", LARGE, Severity.MINOR),
    ],
)
def test_outside_the_log_range(board, name, changes, severity):
    """Outside the range of the maker by less than a decade is an observation, by more a small fault."""
    assert found(board, "log range", name, *changes).severity is severity


@pytest.mark.parametrize(
    ("name", "changes", "title"),
    [
        ("log_ratio", [(RANGE, '["-1 V", "10 V"]')], "ask VIN only from 100 mV to 10 V"),
        ("root", [(RANGE, '["0 V", "10 V"]')], "ask VIN only from 100 mV to 10 V"),
        ("light_ratio", DARK, "ask PD1 only from 15 nA to 50 uA"),
        ("light_ratio", DARK, "use electrometer-amplifier for U1"),
        ("root", [BIPOLAR], "use bifet-amp for U1"),
        ("log_ratio", LARGE_LOG, "smaller currents at the same ratio: R1 54.9 kohm, R2 274 kohm"),
        ("root", LARGE_ROOT, "smaller currents at the same ratio: R1 133 kohm, R2 665 kohm"),
        ("log_ratio", LARGE_LOG, "ask VIN only from 100 mV to 1.8 V"),
    ],
)
def test_remedies_cure(board, cures, name, changes, title):
    """A resistor, an amplifier, a narrower range: each takes the finding away and brings nothing."""
    assert cures(board(name, *changes), SignalCurrent, title) == {title: []}


def test_a_signal_of_the_wrong_sign_throughout_has_no_edit(board):
    """No edit turns a signal round, and the remedy says what to do."""
    finding = assert_finds(SignalCurrent, board("log_ratio", (RANGE, '["-10 V", "-0.1 V"]')))
    assert [remedy.edits for remedy in finding.remedies] == [()]
