"""Slope, temperature coefficient and errors of log amplifiers."""

from __future__ import annotations

import itertools
import math

import pytest

from .builder import (
    amplifier,
    current_input,
    current_source,
    figures,
    reference,
    resistor,
    saturation,
    supply,
    temperature_of,
    transistor,
    voltage_input,
)
from .stages import antilog_pair, divider, log_pair

CURRENTS = {"S1": current_input(1e-9, 10e-3), "S2": current_input(1e-9, 10e-3)}


def outputs(parts, nets, points, net="OUT"):
    """Voltage of one net at each point."""
    return figures(parts, nets, points)["nets"][net]


@pytest.mark.parametrize(
    ("temperature", "published"),
    [(298.15, 59.15935), (300.0, 59.5264), (293.15, 58.167)],
    ids=["25C", "300K", "20C"],
)
def test_a_decade_of_current(temperature, published):
    """A ratio of ten gives 59 mV at 25 degC.

    MAT12 data sheet Rev. A p. 9, ICL8049 data sheet p. 3: V_T ln 10.
    """
    found = outputs(log_pair(), CURRENTS, [{"S1": 1e-4, "S2": 1e-5, "ambient": temperature}], "L")
    assert found[0] * 1e3 == pytest.approx(published, rel=2e-5)


def test_an_octave_of_current():
    """A ratio of two gives 17.809 mV at 25 degC.

    Pease, Electronic Design, "What's all this multiplier-divider stuff": 18 mV per octave; V_T ln 2.
    """
    found = outputs(log_pair(), CURRENTS, [{"S1": 2e-5, "S2": 1e-5, "ambient": 298.15}], "L")
    assert found[0] * 1e3 == pytest.approx(17.809, abs=1e-3)


def scaled_log(upper, lower):
    """A log pair whose second amplifier drives the log node through a divider."""
    return {**log_pair(output="OUT"), **divider("OUT", "L", upper, lower)}


@pytest.mark.parametrize(("upper", "slope"), [(15.9035e3, 1.0), (15.7e3, 0.98796)], ids=["ICL8049", "AN-30 (memory)"])
def test_divider_that_sets_the_slope(upper, slope):
    """A ratio of 16.9 in the divider makes 1 V a decade; 15.7 kohm on 1 kohm make 0.988 V.

    ICL8049 detailed description (attenuation 16.9); National AN-30 divider from memory.
    """
    found = outputs(scaled_log(upper, 1e3), CURRENTS, [{"S1": 1e-3, "S2": 1e-5, "ambient": 298.15}])
    assert found[0] / 2 == pytest.approx(slope, rel=2e-5)


def test_photodiode_log_of_two_hundred_millivolts_a_decade():
    """0.8 V at 1 uA and 1.6 V at 10 mA, for 200 mV a decade from 100 pA.

    Analog Devices AD8304 Rev. A p. 1.
    """
    parts = {**scaled_log(0.2e3 / 0.05915935 - 1e3, 1e3), "I2": current_source("VN", "S2", 100e-12)}
    for ref in ("Q1", "Q2"):  # the base of Q1 rises to 0.47 V above its collector, which must not conduct
        parts[ref]["saturation_current"] = "1e-18 A"
    points = [{"S1": 1e-6, "ambient": 298.15}, {"S1": 10e-3, "ambient": 298.15}]
    found = outputs(parts, {"S1": current_input(1e-9, 10e-3)}, points)
    assert found == pytest.approx([0.8, 1.6], rel=1e-4)


def test_log_about_a_reference_on_a_single_supply():
    """10 nA give 1.15 V and 200 uA give 2.2253 V, for 250 mV a decade about 1.65 V at 1 uA.

    TI LOG200 data sheet, section 7, tables 7-1 and 7-2: -500 mV at 10 nA seen, the rest computed.
    """
    parts = {
        **log_pair(common="MID", output="OUT", high="V5", low="GND"),
        **divider("OUT", "L", 0.25e3 / 0.05915935 - 1e3, 1e3, bottom="MID"),
        "I2": current_source("GND", "S2", 1e-6),
    }
    nets = {"V5": supply(5.0), "MID": reference(1.65), "S1": current_input(10e-9, 200e-6)}
    points = [{"S1": 10e-9, "ambient": 298.15}, {"S1": 200e-6, "ambient": 298.15}]
    assert outputs(parts, nets, points) == pytest.approx([1.1500, 2.225257], abs=3e-5)


def test_log_ratio_with_equal_resistors():
    """1 V on 10 kohm against 2.5 V on 2.5 Mohm gives 236.637 mV with a gain of two.

    TI TL05x data sheet SLOS178A, Fig. 87 (the formula is garbled in the copy; computed from its parts).
    """
    parts = {
        **scaled_log(10e3, 10e3),
        "R1": resistor("VIN", "S1", 10e3),
        "R2": resistor("VREF", "S2", 2.5e6),
    }
    nets = {"VIN": voltage_input(0.01, 10.0), "VREF": reference(2.5)}
    found = outputs(parts, nets, [{"VIN": 1.0, "ambient": 298.15}])
    assert found[0] == pytest.approx(0.236637, abs=2e-6)


def converter(gain_resistor, tempco=0.0):
    """A log ratio to 0.1 V, inverted and scaled by the resistor RG of some temperature coefficient."""
    return {
        **log_pair(),
        "R1": resistor("VIN", "S1", 10e3),
        "R2": resistor("VREF", "S2", 10e3),
        "RG": resistor("L", "M", 1e3, tempco=tempco),
        "RF": resistor("M", "OUT", gain_resistor),
        "U3": amplifier("GND", "M", "OUT"),
    }


CONVERTER_NETS = {"VIN": voltage_input(5e-3, 10.0), "VREF": reference(0.1)}


def test_log_converter_of_minus_one_volt_a_decade():
    """-1 V a decade about 0.1 V: -1.699, -1.301, 0, 0.301 and 1.301 V.

    R. S. Tomar, "Analog Integrated Circuits", ch. 11 (companion), Ex 11.7.
    """
    points = [{"VIN": v, "ambient": 298.15} for v in (5.0, 2.0, 0.1, 0.05, 0.005)]
    found = outputs(converter(1e3 / 0.059159350), CONVERTER_NETS, points)
    assert found == pytest.approx([-1.69897, -1.30103, 0.0, 0.30103, 1.30103], abs=2e-5)


def test_slope_is_proportional_to_absolute_temperature():
    """The slope of a log converter changes by 3354 ppm/K at 25 degC and by 3411 at 20 degC, which is 1/T.

    Tel Labs Q-81 (3500 ppm/degC), Analog Dialogue ("3400 ppm/degC near 20 degC"), recomputed.
    """
    points = [{"VIN": 1.0, "ambient": t} for t in (292.15, 293.15, 294.15, 297.15, 298.15, 299.15)]
    v = outputs(converter(16.9e3), CONVERTER_NETS, points)
    assert (v[2] - v[0]) / (2 * v[1]) * 1e6 == pytest.approx(3411, abs=1)
    assert (v[5] - v[3]) / (2 * v[4]) * 1e6 == pytest.approx(3354, abs=1)


@pytest.mark.parametrize(
    ("tempco", "cold", "hot"), [(3500e-6, 0.885, -0.867), (3300e-6, -0.323, 0.325)], ids=["3500", "3300"]
)
def test_what_a_compensating_resistor_leaves(tempco, cold, hot):
    """A resistor of +3500 ppm/K leaves 0.9 % at -25 and 100 degC, one of +3300 ppm/K a third of a percent.

    National AN-30 "Log Converters": typically 1 % over -25..100 degC; figures computed.
    """
    points = [{"VIN": 1.0, "ambient": t} for t in (298.15, 248.15, 373.15)]
    v = outputs(converter(16.9e3, tempco), CONVERTER_NETS, points)
    assert [100 * (v[1] / v[0] - 1), 100 * (v[2] / v[0] - 1)] == pytest.approx([cold, hot], abs=2e-3)


def test_one_percent_of_input_at_any_level():
    """1 % of input is 4.3214 mV of output at 1 V a decade, whatever the level.

    TI LOG114 data sheet SBOS301C: the output error of a log amplifier is a constant percentage of input.
    """
    levels = (0.01, 0.1, 1.0)
    points = [{"VIN": v * k, "ambient": 298.15} for v in levels for k in (1.0, 1.01)]
    found = outputs(converter(1e3 / 0.059159350), CONVERTER_NETS, points)
    steps = [1e3 * (found[2 * k] - found[2 * k + 1]) for k in range(len(levels))]
    assert steps == pytest.approx([4.3214] * 3, abs=1e-3)


def test_bulk_emitter_resistance_in_the_conformance_test():
    """10 mA against 1 mA with 0.3 ohm in each emitter adds ``0.9·10 mA·0.3 ohm`` = 2.7 mV to the 59 mV.

    MAT12 data sheet Rev. A p. 9 eq. 2: dVBE = 59 mV + 0.9 IC1 rBE.
    """
    parts = log_pair(bulk_emitter_resistance=0.3)
    parts["Q2"]["bulk_emitter_resistance"] = "0.3 ohm"
    found = outputs(parts, CURRENTS, [{"S1": 10e-3, "S2": 1e-3, "ambient": 298.15}], "L")
    assert found[0] * 1e3 == pytest.approx(59.1594 + 2.7, abs=1e-3)


def ratio(first=None, last=None, current=200e-6):
    """Output current of log and antilog pairs over what ideal ones give."""
    parts = {**log_pair(**(first or {})), **antilog_pair("L", 1e3, **(last or {}))}
    nets = {**CURRENTS, "S3": current_input(1e-6, 1e-3)}
    found = figures(parts, nets, [{"S1": current, "S2": current, "S3": 1e-4, "ambient": 298.15}])
    return found["parts"]["Q4"]["ic"][0] / 1e-4


@pytest.mark.parametrize(("current", "percent"), [(200e-6, 0.3119), (1e-3, 1.569)])
def test_error_of_bulk_emitter_resistance(current, percent):
    """0.4 ohm in the emitter of one junction costs 0.3 % at 200 uA and 1.57 % at 1 mA.

    MAT02 data sheet Rev. E p. 8 (0.3 % with kT/q rounded to 26 mV); exact exponential at 25.69 mV.
    """
    error = ratio(first={"bulk_emitter_resistance": 0.4}, current=current) - 1
    assert 100 * error == pytest.approx(percent, abs=5e-4)


@pytest.mark.parametrize(("mismatch", "percent"), [(50e-6, 0.1948), (1e-3, 3.969)])
def test_error_of_base_emitter_mismatch(mismatch, percent):
    """A mismatch of 50 uV is 0.195 % of current, one of 1 mV is 3.97 %.

    MAT02 data sheet Rev. E p. 1 (50 uV maximum); exp(v/V_T) - 1 computed.
    """
    assert 100 * (ratio(last={"vbe_offset": mismatch}) - 1) == pytest.approx(percent, abs=5e-4)


def test_log_stage_output():
    """12.5 V on 10 kohm, 0.1 pA and 26 mV give -0.6045 V.

    R. S. Tomar, "Analog Integrated Circuits", ch. 11 (companion), Ex 11.1: -0.6 V.
    """
    temperature = temperature_of(26e-3)
    parts = {
        "R": resistor("VIN", "S", 10e3),
        "Q1": transistor("S", "GND", "OUT", saturation_current=saturation(1e-13, temperature)),
        "U1": amplifier("GND", "S", "OUT"),
    }
    found = outputs(parts, {"VIN": voltage_input(0.1, 15.0)}, [{"VIN": 12.5, "ambient": temperature}])
    assert found[0] == pytest.approx(-0.604474, abs=2e-6)


@pytest.mark.parametrize(("voltage", "resistance"), [(15.0, 1500e6), (2.5, 250e6)])
def test_reference_current_resistors(voltage, resistance):
    """15 V through 1500 Mohm and 2.5 V through 250 Mohm make 10 nA.

    LOG100 data sheet p. 7 and LOG104 data sheet p. 6.
    """
    parts = {
        "R": resistor("VREF", "S", resistance),
        "Q1": transistor("S", "GND", "OUT"),
        "U1": amplifier("GND", "S", "OUT"),
    }
    found = figures(parts, {"VREF": reference(voltage)})
    assert found["parts"]["Q1"]["ic"][0] == pytest.approx(10e-9, rel=1e-5)


def test_offset_against_a_small_reference():
    """An offset of 1.5 mV takes 1.5 % of a current made from 100 mV.

    LOG100 data sheet p. 7 and LOG104 data sheet p. 6 (advice on T networks).
    """
    parts = {
        "R": resistor("VREF", "S", 10e6),
        "Q1": transistor("S", "GND", "OUT"),
        "U1": amplifier("GND", "S", "OUT", offset=1.5e-3),
    }
    found = figures(parts, {"VREF": reference(0.1)})
    assert 1 - found["parts"]["Q1"]["ic"][0] / 10e-9 == pytest.approx(0.015, rel=1e-4)


def test_decades_of_log_conformity():
    """The base-emitter voltage follows the log of current over nine decades.

    Widlar, "Computing circuits": "as many as nine decades"; slope V_T ln 10 = 59.159 mV.
    """
    parts = {"Q1": transistor("S", "GND", "OUT"), "U1": amplifier("GND", "S", "OUT")}
    parts["Q1"]["saturation_current"] = "1e-18 A"
    points = [{"S": 10.0**k, "ambient": 298.15} for k in range(-11, -1)]
    found = figures(parts, {"S": current_input(1e-12, 1e-2)}, points)["parts"]["Q1"]["vbe"]
    steps = [1e3 * (high - low) for low, high in itertools.pairwise(found)]
    assert steps == pytest.approx([1e3 * 0.025692579 * math.log(10)] * 9, rel=1e-4)
