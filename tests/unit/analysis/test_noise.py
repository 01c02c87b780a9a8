"""Noise: Nyquist's theorem on circuits in equilibrium, resonances, contributions, and where there is no figure."""

import numpy as np
import pytest
from designs import board
from pieces import OUTPUT, VOLTAGE, amplifier, capacitor, diode, photodiode, resistor, solved, transistor

from rulecheck.analysis.bandwidth import respond
from rulecheck.analysis.noise import noise
from rulecheck.analysis.noise_sources import transistor_flows
from rulecheck.analysis.review import Review
from rulecheck.devices import transistor as device
from rulecheck.devices.transistor import HotTransistor
from rulecheck.errors import AnalysisError
from rulecheck.testing import design_from

BOLTZMANN = 1.380649e-23  # J/K, exact (SI 2019)
DARK = 'X = { role = "input", drive = "current", range = ["0 A", "1 mA"], source_resistance = "1 Gohm" }\n'
POTENTIOMETER = 'RV = { kind = "potentiometer", value = "50 Mohm", pins = { END1 = "X", WIPER = "W", END2 = "GND" } }\n'
LEAKY = """, saturation_current = "1 nA", leakage_saturation_current = "2 nA", leakage_emission_coefficient = 1, \
early_voltage = "80 V", knee_current = "1 mA\""""
AT_REST = {
    "resistors": resistor("R1", "X", "W", 1e6) + resistor("R2", "W", "GND", 3e6) + capacitor("C1", "W", "GND", 1e-9),
    "potentiometer": POTENTIOMETER + capacitor("C1", "W", "GND", 1e-12),
    "diode": diode(
        "D1", "X", "GND", ', reverse_leakage = "20 nA", series_resistance = "100 kohm", capacitance = "1 nF"'
    ),
    "photodiode": photodiode("D1", "X", "GND", ', shunt_resistance = "100 Mohm", capacitance = "1 nF"'),
    "collector": transistor("Q1", "X", "GND", "GND", LEAKY),
    "base": transistor("Q1", "GND", "X", "GND", LEAKY + ', base_resistance = "1 Mohm"'),
    "emitter": transistor("Q1", "GND", "GND", "X", LEAKY + ', bulk_emitter_resistance = "1 Mohm"'),
    "floating": transistor("Q1", "X", "B", "GND", LEAKY) + resistor("RB", "B", "GND", 20e6),
}


@pytest.mark.parametrize("kind", AT_REST)
@pytest.mark.parametrize("ambient", [273.15, 320.0])
def test_in_equilibrium_the_noise_is_that_of_the_resistance(kind, ambient):
    """Without any source the density is 4kT Re Z at every frequency, whatever the parts (Nyquist, 1928).

    Emission coefficients are 1: with others the laws of the junctions themselves are not those of equilibrium.
    """
    points = solved(DARK, AT_REST[kind], X=[0.0], ambient=[ambient])
    found = noise(points, "X", (1.0, 1e6))
    placed = next(p for p in points.placed if "X" in p.nets)
    impedance = respond(placed.solution, "X", "X").at(found.frequency[None, :])[placed.index]
    assert found.density**2 == pytest.approx(4 * BOLTZMANN * ambient * impedance.real, rel=1e-6)


@pytest.mark.parametrize("quality", [0.4, 3.0, 30.0, 300.0])
def test_a_resonance_is_integrated_in_full(quality):
    """White noise through two poles has the power ``H0^2 w0 Q/4``, the sharper the higher.

    W. B. Davenport and W. L. Root, "An Introduction to the Theory of Random Signals and Noise" (1958), table of
    integrals. A transimpedance amplifier of 1e5: its resistor's noise, 1e4 times either side of the resonance.
    """
    rf, unity, cs = 1e5, 2 * np.pi * 1e6, 1e-9
    natural = np.sqrt(unity * (1 + 1e-5) / (rf * cs))
    # 1/(w0 Q) = RF CF + RF/(A0 RF CS-pole) + 1/wu, to be met by the feedback capacitor at fixed CS + CF
    cf = (1 / (quality * natural) - (1 / unity + rf * cs * 1e-5) / (1 + 1e-5) / 1) / rf * (1 + 1e-5)
    points = solved(
        VOLTAGE,
        resistor("RF", "N", "Y", rf),
        capacitor("CS", "N", "GND", cs - cf),
        capacitor("CF", "N", "Y", cf),
        amplifier("U1", "GND", "N", "Y"),
    )
    corner = natural / (2 * np.pi)
    found = noise(points, "Y", (corner * 1e-4, corner * 1e4))
    thermal = 4 * BOLTZMANN * 298.15 * rf / (1 + 1e-5) ** 2
    power = next(c for c in found.contributions if c.owner == "RF").rms[0] ** 2
    assert power == pytest.approx(thermal * natural * quality / 4, rel=3e-4)
