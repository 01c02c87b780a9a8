"""Diodes, transistors and bias circuits with published solutions, and the temperature laws of a junction."""

from __future__ import annotations

import math

import pytest

from .builder import (
    CHARGE,
    amplifier,
    current_source,
    diode,
    figures,
    reference,
    resistor,
    saturation,
    supply,
    temperature_of,
    thermal_voltage,
    transistor,
    voltage_input,
)


def diode_on_resistor(voltage, resistance, temperature, i_s, **more):
    """Current and voltage of a diode fed through a resistor."""
    parts = {
        "R": resistor("VDD", "A", resistance),
        "D": diode("A", "GND", saturation_current=saturation(i_s, temperature), **more),
    }
    found = figures(parts, {"VDD": reference(voltage)}, [{"ambient": temperature}])
    return found["parts"]["D"]["current"][0], found["nets"]["A"][0]


@pytest.mark.parametrize(
    ("voltage", "resistance", "current"),
    [
        (0.9, 249.0, 1.0848517386e-3),
        (0.7, 10.0, 3.747051e-3),
        (0.7, 51.0, 1.287542e-3),
        (0.7, 249.0, 0.3884826e-3),
    ],
)
def test_diode_with_series_resistance(voltage, resistance, current):
    """The Lambert W solution of a diode of 25 fA and 0.3 ohm on a resistor: 1.08485 mA from 0.9 V.

    Banwell & Jayakumar, Electronics Letters 36(4) 291-292 (2000), as worked in the Boost.Math
    documentation, with V_T = 1.38e-23·298/1.6e-19; further points computed.
    """
    temperature = temperature_of(1.38e-23 * 298 / 1.6e-19)
    found, _ = diode_on_resistor(voltage, resistance, temperature, 25e-15, series_resistance=0.3)
    assert found == pytest.approx(current, rel=2e-7)


def test_diode_of_a_tenth_volt_a_decade():
    """5 V on 1 kohm and a diode of 0.1 V a decade, 1 mA at 0.7 V: 4.237 mA at 0.763 V.

    Sedra & Smith, iterative analysis (statement at scitechtop.com; answer from memory, recomputed).
    """
    n_vt = 0.1 / math.log(10)
    i_s = 1e-3 / math.expm1(0.7 / n_vt)
    current, voltage = diode_on_resistor(5.0, 1e3, 298.15, i_s, emission_coefficient=n_vt / thermal_voltage(298.15))
    assert current == pytest.approx(4.237291e-3, rel=1e-6)
    assert voltage == pytest.approx(0.762709, abs=1e-6)


def test_diode_at_one_volt():
    """1 V on 1 kohm and a diode of 1 fA at 25 mV: 0.33646 mA at 0.66354 V.

    Exercise after Sedra & Smith; first iterate 0.6607 V seen, converged value computed.
    """
    current, voltage = diode_on_resistor(1.0, 1e3, temperature_of(25e-3), 1e-15)
    assert current == pytest.approx(0.3364566e-3, rel=1e-6)
    assert voltage == pytest.approx(0.6635434, abs=1e-6)


def test_widlar_source():
    """3 mA through a mirror with 33 kohm in its emitter gives 5.01 uA at 300 K and 5.72 uA at 350 K.

    Widlar source exercise with answers: 33 kohm, 5 uA and 5.7 uA.
    """
    parts = {
        "I1": current_source("VP", "B", 3e-3),
        "Q1": transistor("B", "B", "GND"),
        "Q2": transistor("VP", "B", "E"),
        "R": resistor("E", "GND", 33e3),
    }
    found = figures(parts, {}, [{"ambient": 300.0}, {"ambient": 350.0}])
    assert found["parts"]["Q2"]["ic"] == pytest.approx([5.00978e-6, 5.72309e-6], rel=2e-6)


def amplifier_bias():
    """The reference branch and the small mirror of a 741-type input stage on +-5 V at 25 mV."""
    temperature = temperature_of(25e-3)
    i_s = saturation(1e-14, temperature)
    parts = {
        "Q12": transistor("X", "X", "VP", kind="pnp", saturation_current=i_s),
        "RS": resistor("X", "Y", 39e3),
        "Q11": transistor("Y", "Y", "VN", saturation_current=i_s),
    }
    return parts, temperature


def test_bias_current_of_an_amplifier():
    """Two diode drops and 39 kohm between +-5 V carry 225.85 uA.

    Textbook companion, chapter "The 741 IC OP-AMP", Ex 2.1: 225.88 uA after one iteration, converged value
    computed.
    """
    parts, temperature = amplifier_bias()
    nets = {"VP": supply(5.0), "VN": supply(-5.0)}
    found = figures(parts, nets, [{"ambient": temperature}])
    assert found["parts"]["RS"]["current"][0] == pytest.approx(225.8455e-6, rel=1e-6)


def test_small_mirror_of_an_amplifier():
    """0.5 mA through a mirror with 4.02 kohm in its emitter gives 20 uA.

    Textbook companion, chapter "The 741 IC OP-AMP", Ex 2.2: R4 = 4.02 kohm (4.02359 kohm recomputed).
    """
    temperature = temperature_of(25e-3)
    i_s = saturation(1e-14, temperature)
    parts = {
        "I1": current_source("VP", "B", 0.5e-3),
        "Q11": transistor("B", "B", "VN", saturation_current=i_s),
        "Q10": transistor("VP", "B", "E", saturation_current=i_s),
        "R4": resistor("E", "VN", 4.02359e3),
    }
    found = figures(parts, {}, [{"ambient": temperature}])
    assert found["parts"]["Q10"]["ic"][0] == pytest.approx(20e-6, rel=1e-5)


def test_four_resistor_bias():
    """15 V, 100/50 kohm, 3 and 5 kohm, beta 100: IE 1.29 mA, IB 12.8 uA, VB 4.57 V, VC 8.6 V.

    Sedra-type example with V_BE = 0.7 V; the junction is chosen to have 0.7 V at that current.
    """
    i_s = 1.278493e-3 / math.expm1(0.7 / thermal_voltage(298.15))
    parts = {
        "R1": resistor("VP", "B", 100e3),
        "R2": resistor("B", "GND", 50e3),
        "RE": resistor("E", "GND", 3e3),
        "RC": resistor("VP", "C", 5e3),
        "Q1": transistor("C", "B", "E", forward_beta=100, saturation_current=i_s),
    }
    found = figures(parts, {}, [{"ambient": 298.15}])
    assert found["parts"]["RE"]["current"][0] == pytest.approx(1.291278e-3, rel=2e-6)
    assert found["parts"]["Q1"]["ib"][0] == pytest.approx(12.78494e-6, rel=2e-6)
    assert found["parts"]["Q1"]["ic"][0] == pytest.approx(1.278493e-3, rel=2e-6)
    assert [found["nets"][net][0] for net in ("B", "C")] == pytest.approx([4.573835, 8.607532], abs=3e-6)


@pytest.mark.parametrize(
    ("vbe", "bandgap", "slope"),
    [(0.60, 1.11, -1.959), (0.65, 1.11, -1.792), (0.70, 1.11, -1.625), (0.60, 1.12, -1.992)],
)
def test_temperature_coefficient_of_the_base_emitter_voltage(vbe, bandgap, slope):
    """dV_BE/dT at constant current is ``(V_BE - (3 V_T + V_G))/T``: -1.96 mV/K at 0.6 V and 300 K.

    electronics.stackexchange 35692 and 499317 (S. Pefhany), V_T taken there as 25.9 mV.
    """
    current = 1e-3
    i_s = saturation(current / math.expm1(vbe / thermal_voltage(300.0)), 300.0, bandgap)
    parts = {
        "I1": current_source("VP", "B", current),
        "Q1": transistor("B", "B", "GND", saturation_current=i_s, bandgap=bandgap),
    }
    found = figures(parts, {}, [{"ambient": t} for t in (299.9, 300.0, 300.1)])["parts"]["Q1"]["vbe"]
    assert found[1] == pytest.approx(vbe, abs=1e-7)
    assert (found[2] - found[0]) / 0.2 * 1e3 == pytest.approx(slope, abs=1e-3)


def test_one_kelvin_between_paired_junctions():
    """One kelvin between two junctions of 0.6 V is -1.96 mV.

    From the temperature coefficient of electronics.stackexchange 35692 with 1.11 V.
    """
    i_s = saturation(1e-3 / math.expm1(0.6 / thermal_voltage(300.0)), 300.0, 1.11)
    parts = {}
    for k, package in ((1, "COOL"), (2, "WARM")):
        parts[f"I{k}"] = current_source("VP", f"B{k}", 1e-3)
        parts[f"Q{k}"] = transistor(f"B{k}", f"B{k}", "GND", saturation_current=i_s, bandgap=1.11, package=package)
    packages = {"COOL": {"held_temperature": "26.35 degC"}, "WARM": {"held_temperature": "27.35 degC"}}
    found = figures(parts, {}, packages=packages)["parts"]
    assert [found[q]["temperature"][0] for q in ("Q1", "Q2")] == pytest.approx([299.5, 300.5], abs=1e-6)
    assert (found["Q2"]["vbe"][0] - found["Q1"]["vbe"][0]) * 1e3 == pytest.approx(-1.959, abs=2e-3)


def test_saturation_current_over_temperature():
    """A saturation current grows 4.4018 times from 27 to 37 degC, and doubles in 4.60 K at 300 K.

    electronics.stackexchange 615312 (jonk): IS(T) = IS(T0)(T/T0)^3 exp((Eg/k)(1/T0 - 1/T)), Eg 1.11 eV.
    """
    parts = {"D": diode("GND", "V", saturation_current=1e-6, bandgap=1.11)}
    points = [{"ambient": t} for t in (300.15, 310.15, 300.0, 304.60)]
    found = figures(parts, {"V": reference(5.0)}, points)["parts"]["D"]["current"]
    assert found[1] / found[0] == pytest.approx(4.4018, abs=1e-4)
    assert found[3] / found[2] == pytest.approx(2.0, abs=2e-3)
    assert found[0] < 0


@pytest.mark.parametrize(
    ("temperature", "published"),
    [(298.15, 25.692579), (300.0, 25.852000), (300.15, 25.864926), (293.15, 25.261712)],
)
def test_thermal_voltage(temperature, published):
    """kT/q is 25.69 mV at 25 degC, as the slope of a diode shows.

    Analog Devices AD8304 Rev. A p. 8 (25.69 mV); CODATA 2018 constants.
    """
    parts = {
        "D1": diode("A", "GND"),
        "I1": current_source("VP", "A", 1e-3),
        "D2": diode("B", "GND"),
        "I2": current_source("VP", "B", 1e-4),
    }
    found = figures(parts, {}, [{"ambient": temperature}])["nets"]
    slope = (found["A"][0] - found["B"][0]) / math.log(10)
    assert slope * 1e3 == pytest.approx(published, rel=1e-6)
    assert thermal_voltage(temperature) * CHARGE == pytest.approx(1.380649e-23 * temperature, rel=1e-12)


def test_photodiode_amplifier_on_a_single_supply():
    """53.6 kohm from 100.096 mV: 100.096 mV in the dark and 4.924 V at 90 uA.

    TI TIDU535 (Nov 2014), "1-MHz single-supply photodiode amplifier", table 1.
    """
    parts = {
        "PD": {"kind": "photodiode", "photocurrent": ["1 nA", "90 uA"], "pins": {"A": "GND", "K": "SUM"}},
        "RF": resistor("SUM", "OUT", 53.6e3),
        "U1": amplifier("VB", "SUM", "OUT", high="V5", low="GND"),
    }
    nets = {"V5": supply(5.0), "VB": reference(0.100096)}
    found = figures(parts, nets, [{"PD": 0.0}, {"PD": 90e-6}])["nets"]["OUT"]
    assert found == pytest.approx([0.100096, 4.92410], abs=5e-6)


@pytest.mark.parametrize("base", ["GND", "VIN"])
def test_output_follows_the_base_of_a_log_transistor(base):
    """The emitter of a log transistor moves with its base, since only V_BE counts.

    AN-30 "Log Converters" (abstract): the logging transistor's V_BE is the output.
    """
    parts = {
        "R": resistor("VREF", "S", 100e3),
        "Q1": transistor("S", base, "OUT"),
        "U1": amplifier("GND", "S", "OUT"),
    }
    nets = {"VREF": reference(10.0), "VIN": voltage_input(-0.5, 0.5)}
    found = figures(parts, nets, [{"VIN": -0.3, "ambient": 298.15}])
    level = {"GND": 0.0, "VIN": -0.3}[base]
    assert found["nets"]["OUT"][0] == pytest.approx(level - thermal_voltage(298.15) * math.log(1e-4 / 1e-14), abs=1e-6)
