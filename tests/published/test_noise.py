"""Noise of published stages: resistors, capacitors, junction currents, log stages, amplifiers."""

from __future__ import annotations

import math

import pytest

from rulecheck.analysis.conditions import from_points
from rulecheck.analysis.noise import noise
from rulecheck.analysis.review import Review
from rulecheck.testing import design_from

from .builder import (
    BOLTZMANN,
    CATALOGUE,
    CHARGE,
    amplifier,
    capacitor,
    current_input,
    current_source,
    diode,
    resistor,
    text_of,
    thermal_voltage,
    transistor,
    voltage_input,
)

WARM = 298.15  # K, 25 degC
WHITE = (1.0, 100.0)


def noise_of(parts, source, band=WHITE, output="Y", **columns):
    """Noise at a net, at one point."""
    design = design_from(text_of(parts, {"X": source}), CATALOGUE)
    points = Review(design).solve(from_points(design, columns))
    assert points.converged.all()
    return noise(points, output, band)


def density(found):
    """The density at the low end of the band [V/sqrt(Hz)]."""
    return found.density[0, 0]


def test_resistor_at_25_degrees():
    """1 kohm has 4.06 nV/sqrt(Hz) at 25 degC: sqrt(4 k T R).

    H. Nyquist, Phys. Rev. 32 (1928) 110, with the k of the SI 2019; "4 nV for 1 kohm" is the usual round figure
    (Analog Devices MT-047, memory).
    """
    found = noise_of({"R": resistor("X", "Y", 1e3)}, voltage_input(-1.0, 1.0))
    assert density(found) == pytest.approx(math.sqrt(4 * BOLTZMANN * WARM * 1e3), rel=1e-9)
    assert density(found) == pytest.approx(4.06e-9, rel=1e-3)
    assert found.rms[0] == pytest.approx(density(found) * math.sqrt(99.0), rel=1e-6)


@pytest.mark.parametrize("ohm", [1e3, 1e6])
def test_capacitor_charged_through_a_resistor(ohm):
    """sqrt(kT/C) whatever the resistor: 64.2 uV on 1 pF at 25 degC.

    Gray and Meyer, "Analysis and Design of Analog Integrated Circuits", ch. 11 (memory: 64 uV at 300 K); the band from
    1e-4 to 1e4 times the corner leaves out 1.3e-4 of the power.
    """
    corner = 1 / (2 * math.pi * ohm * 1e-12)
    parts = {"R": resistor("X", "Y", ohm), "C": capacitor("Y", "GND", 1e-12)}
    found = noise_of(parts, voltage_input(-1.0, 1.0), (1e-4 * corner, 1e4 * corner))
    assert found.rms[0] == pytest.approx(math.sqrt(BOLTZMANN * WARM / 1e-12), rel=1e-4)
    assert found.rms[0] == pytest.approx(64.2e-6, rel=1e-3)


def test_shot_noise_of_a_diode():
    """1 uA makes 0.566 pA/sqrt(Hz), sqrt(2 q I); across its own resistance that is half the thermal power.

    W. Schottky, Ann. Phys. 57 (1918) 541, with the q of the SI 2019.
    """
    found = noise_of({"D": diode("X", "GND"), "R": resistor("X", "Y", 1.0)}, current_input(1e-9, 1e-3), X=1e-6)
    shot = found.contributions[0]
    assert (shot.owner, shot.element) == ("D", "junction current")
    resistance = thermal_voltage(WARM) / 1e-6
    current = shot.rms[0] / math.sqrt(99.0) / resistance
    assert current == pytest.approx(0.566e-12, rel=1e-3)
    assert current == pytest.approx(math.sqrt(2 * CHARGE * 1e-6), rel=1e-6)
    assert shot.rms[0] ** 2 / 99 == pytest.approx(2 * BOLTZMANN * WARM * resistance, rel=1e-6)


@pytest.mark.parametrize("current", [1e-8, 1e-6, 1e-4])
def test_log_stage(current):
    """The collector current of a log transistor makes 14.6 nV/sqrt(Hz) at 1 uA and 27 degC, less by its root.

    Analog Devices AD8304 data sheet (memory): "14.7/sqrt(I) nV/sqrt(Hz), I in uA"; it is ``kT sqrt(2/(q I))``.
    """
    parts = {"Q1": transistor("X", "GND", "Y"), "U1": amplifier("GND", "X", "Y", gain_bandwidth=1e9)}
    found = noise_of(parts, current_input(1e-9, 1e-3), X=current, ambient=300.15)
    assert density(found) == pytest.approx(BOLTZMANN * 300.15 * math.sqrt(2 / (CHARGE * current)), rel=1e-5)
    assert density(found) == pytest.approx(14.7e-9 / math.sqrt(current / 1e-6), rel=0.01)


def test_follower_with_a_resistor_in_its_base():
    """Base noise comes out as ``iB (RB beta/(beta + 1) - re)``, collector noise as ``iC (RB/(beta + 1) + re)``.

    Gray and Meyer, "Analysis and Design of Analog Integrated Circuits", ch. 11: base and collector have independent
    noise currents ``2 q IB`` and ``2 q IC`` in the small-signal circuit, which is worked out by hand for a follower
    that a current source loads.
    """
    parts = {
        "Q1": transistor("VP", "B", "Y", forward_beta=100.0),
        "RB": resistor("B", "X", 10e3),
        "I1": current_source("Y", "VN", 101e-6),
    }
    found = noise_of(parts, voltage_input(-1.0, 1.0))
    re = thermal_voltage(WARM) / 101e-6
    wanted = {
        "collector current": math.sqrt(2 * CHARGE * 100e-6) * (10e3 / 101 + re),
        "base current": math.sqrt(2 * CHARGE * 1e-6) * (10e3 * 100 / 101 - re),
    }
    each = {c.element: c.rms[0] / math.sqrt(99.0) for c in found.contributions if c.owner == "Q1"}
    assert {name: each[name] for name in wanted} == pytest.approx(wanted, rel=1e-6)


def test_amplifier_voltage_noise_with_its_corner():
    """Over a band, ``en^2 ((f2 - f1) + fc ln(f2/f1))`` times the square of the gain.

    Analog Devices MT-048, "Op amp noise relationships: 1/f noise, RMS noise" (memory).
    """
    noisy = {"voltage_noise": "10 nV/sqrt(Hz)", "voltage_noise_corner": "60 Hz"}
    parts = {
        "U1": amplifier("GND", "N", "Y", gain_bandwidth=1e9, **noisy),
        "R1": resistor("X", "N", 1.0),
        "R2": resistor("N", "Y", 100.0),
    }
    found = noise_of(parts, voltage_input(-1.0, 1.0), (0.1, 1e3))
    wanted = 101 * 10e-9 * math.sqrt(999.9 + 60 * math.log(1e4))
    voltage = next(c for c in found.contributions if c.element == "voltage_noise")
    assert voltage.rms[0] == pytest.approx(wanted, rel=1e-5)


def test_amplifier_current_noise_at_each_input():
    """Both inputs have their own: behind 1 Mohm each, they add by power, and not at all by amplitude.

    Analog Devices MT-047, "Op amp noise" (memory): current noise flows in the resistances at either input.
    """
    parts = {
        "U1": amplifier("P", "N", "Y", gain_bandwidth=1e9, current_noise="1 pA/sqrt(Hz)"),
        "R1": resistor("X", "P", 1e6),
        "R2": resistor("N", "Y", 1e6),
    }
    found = noise_of(parts, voltage_input(-1.0, 1.0))
    each = {c.element: c.rms[0] / math.sqrt(99.0) for c in found.contributions if c.owner == "U1"}
    assert each == {
        "current_noise IN+": pytest.approx(1e-6, rel=1e-4),
        "current_noise IN-": pytest.approx(1e-6, rel=1e-4),
    }
    thermal = 2 * 4 * BOLTZMANN * WARM * 1e6
    assert density(found) == pytest.approx(math.sqrt(2e-12 + thermal), rel=1e-4)


def test_photodiode_amplifier():
    """In the dark at zero bias the junction has the thermal noise of its shunt resistance VT/Idark.

    Hamamatsu Opto-semiconductor handbook, ch. 2 (memory): ``sqrt(4 k T/Rsh)`` at zero bias, ``sqrt(2 q (IL + ID))``
    with light.
    """
    light = {"kind": "photodiode", "photocurrent": ["0 A", "1 uA"], "dark_current": "1 nA"}
    parts = {
        "D": {**light, "pins": {"A": "GND", "K": "S"}},
        "U1": amplifier("GND", "S", "Y", gain_bandwidth=1e9),
        "RF": resistor("S", "Y", 1e6),
    }
    for current in (0.0, 1e-6):
        found = noise_of(parts, voltage_input(-1.0, 1.0), D=current)
        power = {c.element: (c.rms[0] / 1e6) ** 2 / 99 for c in found.contributions if c.owner == "D"}
        shunt = thermal_voltage(WARM) / 1e-9
        assert power["junction current"] == pytest.approx(4 * BOLTZMANN * WARM / shunt, rel=1e-4)
        if current:
            assert power["photocurrent"] == pytest.approx(2 * CHARGE * current, rel=1e-4)
