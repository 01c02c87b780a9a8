"""Noise that requirements allow. The boards are invented."""

from math import sqrt

import pytest
from rulecheck_rules.noise import Noise

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds

PLACES = {"gas_log": ("VOUT", "[matching.pair]"), "dose_rate": ("LEVEL", "[matching.log]"),
          "log_ratio": ("VOUT", "[matching.pair]")}  # fmt: skip
BUFFER = """
format = 1

[design]
title = "Buffer behind a megohm"

[environment]
ambient = {{ min = "25 degC", typ = "25 degC", max = "50 degC" }}

[nets]
GND = {{ role = "ground" }}
VP = {{ role = "supply", voltage = "15 V" }}
VN = {{ role = "supply", voltage = "-15 V" }}
VIN = {{ role = "input", drive = "voltage", range = ["0 V", "1 V"] }}
VOUT = {{ role = "output" }}

[parts]
R1 = {{ kind = "resistor", value = "1 Mohm", pins = ["VIN", "A"] }}
U1 = {{ kind = "op-amp", open_loop_gain = 1e6, gain_bandwidth = "10 MHz", {noise}
  input_headroom = {{ low = "1 V", high = "1 V" }}, output_headroom = {{ low = "1 V", high = "1 V" }},
  pins = {{ "IN+" = "A", IN- = "VOUT", OUT = "VOUT", "V+" = "VP", V- = "VN" }} }}

[requirements.quiet]
output = "VOUT"
noise = {{ max = "10 uV", bandwidth = ["1 Hz", "10 kHz"] }}
"""


def quiet(board, name, most, band='["1 Hz", "10 kHz"]', *changes):
    """A stage with a limit of noise."""
    output, before = PLACES[name]
    asked = f'[requirements.quiet]\noutput = "{output}"\nnoise = {{ max = "{most}", bandwidth = {band} }}\n\n{before}'
    return board(name, (before, asked), *changes)


@pytest.mark.parametrize(("name", "most"), [("gas_log", "50 uV"), ("dose_rate", "50 uV")])
def test_a_limit_that_is_kept_is_clean(board, name, most):
    """Stages whose noise is below the limit, and a stage without one, are clean."""
    assert_clean(Noise, quiet(board, name, most))
    assert_clean(Noise, board(name))


def test_thermal_noise_of_a_megohm():
    """sqrt(4kTRB) at 50 degC, the hotter end: 13.4 uV in 10 kHz (Johnson and Nyquist), and R1 makes all of it."""
    finding = assert_finds(
        Noise, BUFFER.format(noise='voltage_noise = "0.1 nV/sqrt(Hz)", current_noise = "0.01 fA/sqrt(Hz)",')
    )
    value = finding.evidence[0].value
    assert finding.severity is Severity.MAJOR
    assert finding.conditions["ambient"] == 323.15
    assert value == pytest.approx(sqrt(4 * 1.380649e-23 * 323.15 * 1e6 * 9999), rel=0.01)
    assert "R1 100 %" in finding.consequence


def test_what_an_amplifier_does_not_state_is_said():
    """Without noise data of U1 the figure is that of the rest, and the message names what is missing."""
    finding = assert_finds(Noise, BUFFER.format(noise=""))
    assert "without voltage_noise, current_noise of U1, not stated" in finding.message


def test_the_largest_contributor_comes_first(board):
    """Of the log stage at 1 uA it is the shot noise of Q1, 0.26 of the power and more."""
    finding = assert_finds(Noise, quiet(board, "gas_log", "20 uV"))
    assert "of its power Q1" in finding.consequence
    assert finding.evidence[1].quantity == "noise of Q1, RMS"


def test_no_answer_is_told(board):
    """With its supply gone the amplifier is nowhere inside its limits, and the rule says that it has no figure."""
    finding = assert_finds(Noise, quiet(board, "gas_log", "50 uV", '["1 Hz", "10 kHz"]', ('"15 V"', '"0.5 V"')))
    assert finding.severity is Severity.OBSERVATION


@pytest.mark.parametrize(
    ("name", "most", "band"), [("gas_log", "60 uV", '["1 Hz", "1 MHz"]'), ("log_ratio", "50 uV", '["1 Hz", "10 kHz"]')]
)
def test_a_larger_capacitor_takes_it_away(board, cures, name, most, band):
    """Where the stage lets through more than the signal needs, a capacitor across an amplifier, raised: gone."""
    after = cures(quiet(board, name, most, band), Noise)
    assert any(title.endswith("less bandwidth") for title in after), after
    assert not any(after.values()), after


def test_a_quieter_amplifier_takes_its_place(board, cures):
    """Where an amplifier of 25 nV/sqrt(Hz) before a gain of 18 makes most of it, one of 12 nV/sqrt(Hz) is named."""
    loud = (
        'model = "bifet-precision", pins = { "IN+" = "DP"',
        'model = "high-voltage-amplifier", pins = { "IN+" = "DP"',
    )
    after = cures(quiet(board, "gas_log", "33 uV", '["1 Hz", "10 kHz"]', loud), Noise)
    named = [title for title in after if "for U2: it has less noise" in title]
    assert named
    assert not any(after[title] for title in named), after
