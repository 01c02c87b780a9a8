"""Transimpedance stages: capacitors and margins of published rules."""

from __future__ import annotations

import math

import pytest

from .builder import amplifier, capacitor, figures, loop, resistor


def transimpedance(rf, cs, cf, bandwidth):
    """Figures of a transimpedance stage with one pole and a source capacitance."""
    parts = {
        "RF": resistor("SUM", "OUT", rf),
        "CF": capacitor("SUM", "OUT", cf),
        "CS": capacitor("SUM", "GND", cs),
        "U1": amplifier("GND", "SUM", "OUT", gain_bandwidth=bandwidth),
    }
    return figures(parts, {})


def transimpedance_pair(rf, cs, cf, bandwidth):
    """Natural frequency [rad/s] and damping of the pair of a transimpedance stage."""
    found = transimpedance(rf, cs, cf, bandwidth)["natural_frequencies"]
    damping = found["least_damping"][0]
    return {"natural": -found["rightmost"][0] / damping, "damping": damping}


def test_the_capacitor_of_the_log_stage_rule_puts_the_pole_at_half_the_crossing():
    """With the 90.402 pF of the rule the pair has ``f0 = sqrt(2)·fp``, which holds for that capacitor alone.

    S. Franco, Example 13.1 (companion): ``pi·Rb·ft·Cf^2 - Cf - (Cn+Cmu) = 0`` gives 90.402 pF;
    the stage is the transimpedance loop of the same quadratic (TI THS4631 data sheet SLOS451B eq. 1).
    """
    pair = transimpedance_pair(rf=4.3e3, cs=20e-12, cf=90.402e-12, bandwidth=1e6)
    assert pair["natural"] == pytest.approx(math.sqrt(2) / (4.3e3 * 90.402e-12), rel=1e-4)


def test_exact_transimpedance_capacitor():
    """0.7126 pF for 180 MHz, 100 kohm and 28 pF obeys ``CF = (x + sqrt(x^2 + 4 CS x))/2, x = 1/(pi RF GBP)``.

    TI THS4631 data sheet SLOS451B p. 10, THS4601 SLOS388B Fig. 1 (0.7 pF shown). The rule places the pole
    1/(2 pi RF CF) at 1/sqrt(2) of the natural frequency sqrt(GBP/(2 pi RF (CS + CF))).
    """
    pair = transimpedance_pair(rf=100e3, cs=28e-12, cf=0.7126e-12, bandwidth=180e6)
    assert pair["natural"] == pytest.approx(math.sqrt(2) / (100e3 * 0.7126e-12), rel=3e-4)
    assert pair["natural"] / (2 * math.pi) == pytest.approx(
        math.sqrt(180e6 / (2 * math.pi * 100e3 * 28.7126e-12)), rel=1e-4
    )


@pytest.mark.parametrize(
    ("factor", "margin"), [(1.0, 51.84), (math.sqrt(2), 65.53), (2.0, 76.35)], ids=["Q=1", "Q=0.707", "Q=0.5"]
)
def test_rule_of_forty_five_degrees_gives_more(factor, margin):
    """The capacitor of the 45 deg rule gives 51.8 deg, its Butterworth and doubled values 65.5 and 76.3 deg.

    Rule: Analog Devices AD823A data sheet pp. 16-18, ``CF = sqrt(CS/(2 pi RF fu))``; exact margins computed
    for 1 GHz, 1 nF and 1 Mohm, limits atan(sqrt(phi)) = 51.83, 65.53 and 76.35 deg.
    """
    cf = factor * math.sqrt(1e-9 / (2 * math.pi * 1e6 * 1e9))
    found = loop(transimpedance(rf=1e6, cs=1e-9, cf=cf, bandwidth=1e9))
    assert found["phase_margin"] == pytest.approx(margin, abs=0.02)


def test_maximally_flat_transimpedance():
    """1.77701 pF makes a 10 MHz, 100 kohm, 10 pF stage flat to 1.1625 MHz, with a margin of 66.76 deg.

    jensign.com, "Transimpedance f3db and Cf design curves" (2012); example computed from its formula.
    """
    stage = {"rf": 100e3, "cs": 10e-12, "cf": 1.77701e-12, "bandwidth": 10e6}
    pair = transimpedance_pair(**stage)
    assert pair["damping"] == pytest.approx(math.sqrt(0.5), abs=1e-4)
    assert pair["natural"] / (2 * math.pi) == pytest.approx(1.16250e6, rel=1e-4)
    assert loop(transimpedance(**stage))["phase_margin"] == pytest.approx(66.76, abs=0.02)
