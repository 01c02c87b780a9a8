"""Bandwidths of published stages: log stages at their current, transimpedance amplifiers."""

from __future__ import annotations

import math

import pytest

from rulecheck.analysis.bandwidth import bandwidth
from rulecheck.analysis.conditions import from_points
from rulecheck.analysis.review import Review
from rulecheck.testing import design_from

from .builder import (
    CATALOGUE,
    amplifier,
    capacitor,
    current_input,
    resistor,
    temperature_of,
    text_of,
    transistor,
    voltage_input,
)


def bandwidths(parts, source, output, **columns):
    """Bandwidths from the input X at some points."""
    design = design_from(text_of(parts, {"X": source}), CATALOGUE)
    points = Review(design).solve(from_points(design, columns))
    assert points.converged.all()
    return bandwidth(points, "X", output)


def test_low_pass():
    """A resistor of 1 kohm and 1 uF fall at 159.155 Hz, 1/(2 pi R C).

    Any textbook, for instance Horowitz and Hill, "The Art of Electronics", ch. 1 (memory).
    """
    parts = {"R": resistor("X", "Y", 1e3), "C": capacitor("Y", "GND", 1e-6)}
    assert bandwidths(parts, voltage_input(-1.0, 1.0), "Y") == pytest.approx(159.155, rel=1e-5)


@pytest.mark.parametrize(
    ("farad", "current", "wanted"),
    [
        (150e-12, 1e-6, 41.30e3),
        (4.5e-9, 10e-9, 13.77),
        (4.7e-9, 1e-6, 1.318e3),
        (4.7e-9, 10e-6, 13.18e3),
        (4.7e-9, 100e-6, 131.8e3),
        (3.097e-12, 1e-9, 2e3),
        (3.097e-12, 5e-6, 10e6),
    ],
)
def test_log_stage_at_its_current(farad, current, wanted):
    """The bandwidth of a log stage is I/(2 pi VT C), to the four digits of the source.

    Capacitors of LOG100 p. 7 and LOG104 p. 6, the bandwidths worked out from the formula; ADL5303 overview: 2 kHz at
    1 nA, proportional to the current up to 10 MHz.
    """
    parts = {
        "Q1": transistor("X", "GND", "Y"),
        "U1": amplifier("GND", "X", "Y", gain_bandwidth=1e12),
        "C1": capacitor("X", "Y", farad),
    }
    found = bandwidths(parts, current_input(1e-9, 1e-3), "Y", X=current)
    assert found == pytest.approx(wanted, rel=5e-4)


def test_low_end_of_a_log_stage_with_an_emitter_resistor():
    """At 0.1 uA the pole is 1/(2 pi (re + RE) Cf) = 6.69 kHz, with an amplifier of 1 GHz that does not count.

    S. Franco, "Design with Operational Amplifiers and Analog Integrated Circuits", ch. 13, Example 13.1 (companion):
    RE 4.3 kohm, Cf 90 pF, re 260 kohm at kT/q of 26 mV.
    """
    parts = {
        "R": resistor("X", "SUM", 10e3),
        "CN": capacitor("SUM", "GND", 20e-12),
        "Q1": transistor("SUM", "GND", "E"),
        "RE": resistor("E", "OUT", 4.3e3),
        "CF": capacitor("SUM", "OUT", 90e-12),
        "U1": amplifier("GND", "SUM", "OUT", gain_bandwidth=1e9),
    }
    found = bandwidths(parts, voltage_input(1e-3, 10.0), "OUT", X=1e-3, ambient=temperature_of(26e-3))
    assert found == pytest.approx(6.69e3, rel=2e-3)


def transimpedance(rf, cs, cf, gain_bandwidth):
    """Bandwidth of a transimpedance amplifier with one pole."""
    parts = {
        "U1": amplifier("GND", "X", "Y", gain_bandwidth=gain_bandwidth),
        "RF": resistor("X", "Y", rf),
        "CS": capacitor("X", "GND", cs),
        "CF": capacitor("X", "Y", cf),
    }
    return bandwidths(parts, current_input(-1e-6, 1e-6), "Y")


@pytest.mark.parametrize(
    ("rf", "cs", "cf", "gain_bandwidth", "wanted", "tolerance"),
    [
        # TI OPA656 data sheet SBOS196I par. 8.2: 3.96 MHz; its formula leaves CF out of the capacitance
        (100e3, 23.3e-12, 0.57e-12, 230e6, 3.96e6, 0.02),
        # TI OPA657 data sheet SBOS197E p. 11: about 5 MHz (5.046 MHz by its formula), with CF for a flat response
        (200e3, 50e-12, 0.223e-12, 1600e6, 5.046e6, 0.01),
        # TI THS4631 data sheet SLOS451B p. 10, THS4601 SLOS388B Fig. 1: the CF of the quadratic is nearly flat
        (100e3, 28e-12, 0.7126e-12, 180e6, 3.1587e6, 0.015),
        # jensign.com, "Transimpedance f3db and Cf design curves" (2012): CF for Q = 0.7071 exactly
        (100e3, 10e-12, 1.77701e-12, 10e6, 1.16250e6, 1e-5),
    ],
)
def test_transimpedance_amplifiers(rf, cs, cf, gain_bandwidth, wanted, tolerance):
    """The exact network against formulas that neglect the source's share of CF by the tolerance named."""
    assert transimpedance(rf, cs, cf, gain_bandwidth) == pytest.approx(wanted, rel=tolerance)


@pytest.mark.parametrize(("factor", "quality"), [(1.0, 1.0), (math.sqrt(2), math.sqrt(0.5)), (2.0, 0.5)])
def test_feedback_capacitors_of_photodiode_rules(factor, quality):
    """The rule of the sheets gives Q = 1, sqrt(2) times its capacitor a flat response, twice it Q = 1/2.

    Analog Devices AD823A data sheet pp. 16-18 and AD8065 p. 24: ``f = sqrt(fu/(2 pi RF CS))``,
    ``CF = sqrt(CS/(2 pi RF fu))``; the bandwidth of two poles of that Q is a closed form. 1 MHohm, 1 nF, 1 GHz, where
    CF is 0.04 % of CS.
    """
    rf, cs, fu = 1e6, 1e-9, 1e9
    natural = math.sqrt(fu / (2 * math.pi * rf * cs))
    flat = 1 - 1 / (2 * quality**2)
    wanted = natural * math.sqrt(flat + math.sqrt(flat**2 + 1))
    found = transimpedance(rf, cs, factor * math.sqrt(cs / (2 * math.pi * rf * fu)), fu)
    assert found == pytest.approx(wanted, rel=2e-3)
