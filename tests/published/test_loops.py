"""Margins, crossovers, return ratios and natural frequencies of published loops."""

from __future__ import annotations

import math

import pytest

from .builder import (
    amplifier,
    capacitor,
    current_input,
    figures,
    loop,
    resistor,
    temperature_of,
    thermal_voltage,
    transistor,
    voltage_input,
)

VIN = {"VIN": voltage_input(-1.0, 1.0)}


def franco_log_stage(cf, emitter_resistor):
    """Loop of the textbook stage at 1 mA, at the temperature whose kT/q is the 26 mV that its re uses."""
    parts = {
        "R": resistor("VIN", "SUM", 10e3),
        "RO": resistor("SUM", "GND", 100e3),  # VA/ic of the transistor
        "RD": resistor("SUM", "GND", 2e6),  # input resistance of the amplifier
        "CN": capacitor("SUM", "GND", 20e-12),
        "Q1": transistor("SUM", "GND", "E" if emitter_resistor else "OUT"),
        "U1": amplifier("GND", "SUM", "OUT"),
    }
    if emitter_resistor:
        parts["RE"] = resistor("E", "OUT", emitter_resistor)
    if cf:
        parts["CF"] = capacitor("SUM", "OUT", cf)
    nets = {"VIN": voltage_input(1e-3, 10.0)}
    return loop(figures(parts, nets, [{"VIN": 10.0, "ambient": temperature_of(26e-3)}]))


@pytest.mark.parametrize(
    ("cf", "emitter_resistor", "crossover", "margin"),
    [
        (0, 4300, 1.2219e6, 35.74),
        (20e-12, 4300, 973.93e3, 52.19),
        (50e-12, 4300, 891.45e3, 66.20),
        (90e-12, 4300, 886.65e3, 75.47),
        (200e-12, 4300, 923.50e3, 83.68),
        (90e-12, 0, 7.4814e6, 7.50),
        (0, 0, 17.484e6, 2.88),
    ],
)
def test_log_stage_margins_with_and_without_emitter_resistor(cf, emitter_resistor, crossover, margin):
    """Margins of a log stage over its capacitor, and how they collapse without the emitter resistor.

    S. Franco, "Design with Operational Amplifiers and Analog Integrated Circuits", ch. 13, Example 13.1
    (companion); the margins are computed from its model.
    """
    found = franco_log_stage(cf, emitter_resistor)
    assert found["phase_margin"] == pytest.approx(margin, abs=0.02)
    assert found["crossover"] == pytest.approx(crossover, rel=1e-4)


def loop_of_poles(gain, bandwidth, second_pole, third_pole=None):
    """Loop of a follower of two poles, with a third one by a resistor and a capacitor in its feedback."""
    parts = {"U1": amplifier(
        "GND", "IN" if third_pole else "OUT", "OUT",
        open_loop_gain=gain, gain_bandwidth=bandwidth, second_pole=second_pole,
    )}  # fmt: skip
    if third_pole:
        parts["R"] = resistor("OUT", "IN", 1e3)
        parts["C"] = capacitor("IN", "GND", 1 / (2 * math.pi * 1e3 * third_pole))
    return loop(figures(parts, {}))


def test_three_pole_loop():
    """Crossover, phase margin and gain margin of a loop of 10^4 with poles at 100 Hz, 1 MHz and 10 MHz.

    S. Franco, Example 8.1 (p. 350): PM 47.4 deg, GM 20.82 dB; crossover recomputed.
    """
    found = loop_of_poles(1e4, 1e6, 1e6, 10e6)
    assert found["phase_margin"] == pytest.approx(47.411, abs=0.05)
    assert found["gain_margin"] == pytest.approx(20.829, abs=0.05)
    assert found["crossover"] == pytest.approx(784.408e3, rel=1e-3)
    assert found["dc_return_ratio"] == pytest.approx(1e4, rel=1e-6)


def test_three_pole_loop_reduced_to_sixty_degrees():
    """The same loop has 60 deg when its gain is 5751 (printed 5760 from a rounded frequency).

    S. Franco, Example 8.1 (p. 350).
    """
    found = loop_of_poles(5751.0, 575.1e3, 1e6, 10e6)
    assert found["phase_margin"] == pytest.approx(60.0, abs=0.05)
    assert found["crossover"] == pytest.approx(511.370e3, rel=1e-3)


@pytest.mark.parametrize(
    ("gain", "bandwidth", "second", "third", "crossover", "margin"),
    [
        (1e5, 1e6, 5e6, 10e6, 976.798e3, 73.368),
        (1e5, 1e5 * 8 / 3, 5e6, 10e6, 266.195e3, 85.428),
        (1000.0, 1e9, 2e6, None, 44.693e6, 3.844),
        (1000.0, 1e9, 4e6, None, 63.178e6, 4.530),
        (1e6, 1e7, 1e3, None, 99.9975e3, 0.579),
    ],
)
def test_loops_of_two_and_three_poles(gain, bandwidth, second, third, crossover, margin):
    """Crossover and margin of textbook loops given by gain and poles.

    Neamen-type exercises on three-pole and two-pole amplifiers; the results are computed from their inputs.
    """
    found = loop_of_poles(gain, bandwidth, second, third)
    assert found["phase_margin"] == pytest.approx(margin, abs=0.02)
    assert found["crossover"] == pytest.approx(crossover, rel=1e-3)


def test_differentiator_has_no_margin():
    """An ideal differentiator of 159 kohm, 10 nF and 1 MHz has a margin of 0.6 deg and a Q of 100.

    S. Franco, Example 8.2 (p. 358): fx 10.0 kHz, Q 100, PM 0.6 deg.
    """
    parts = {
        "C": capacitor("VIN", "SUM", 10e-9),
        "R": resistor("SUM", "OUT", 159e3),
        "U1": amplifier("GND", "SUM", "OUT"),
    }
    found = figures(parts, VIN, [{"VIN": 0.0}])
    assert loop(found)["phase_margin"] == pytest.approx(0.573, abs=0.02)
    assert loop(found)["crossover"] == pytest.approx(10.005e3, rel=1e-3)
    q = 1 / (2 * found["natural_frequencies"]["least_damping"][0])
    assert q == pytest.approx(99.95, rel=1e-3)


@pytest.mark.parametrize(
    ("cf", "crossover", "margin"), [(0, 2.5328e6, 14.672), (16e-12, 10e6, 90.0)], ids=["none", "neutral"]
)
def test_stray_input_capacitance(cf, crossover, margin):
    """Stray capacitance at the inverting input leaves 14.7 deg, and the neutral capacitor brings 90 deg back.

    S. Franco, Example 8.3 (p. 360), inputs seen, results computed: Cext 3 pF, Cd 7 pF, Cc/2 6 pF, 30 kohm,
    20 MHz.
    """
    parts = {
        "R1": resistor("VIN", "SUM", 30e3),
        "R2": resistor("SUM", "OUT", 30e3),
        "CEXT": capacitor("SUM", "GND", 3e-12),
        "U1": amplifier(
            "GND", "SUM", "OUT", gain_bandwidth=20e6, input_capacitance=7e-12, common_mode_capacitance=6e-12
        ),
    }
    if cf:
        parts["CF"] = capacitor("SUM", "OUT", cf)
    found = loop(figures(parts, VIN, [{"VIN": 0.0}]))
    assert found["phase_margin"] == pytest.approx(margin, abs=0.05)
    assert found["crossover"] == pytest.approx(crossover, rel=1e-3)


def reduced_loop(across_inputs, gain=1e5, **more):
    """The inverting amplifier with a network across its inputs; a fast follower makes the third pole."""
    parts = {
        "R1": resistor("VIN", "SUM", 10e3),
        "R2": resistor("SUM", "OUT", 100e3),
        "U1": amplifier("GND", "SUM", "O1", open_loop_gain=gain, gain_bandwidth=1e9, second_pole=3e6, **more),
        "U2": amplifier("O1", "OUT", "OUT", gain_bandwidth=30e6),
        **across_inputs,
    }
    return figures(parts, VIN, [{"VIN": 0.0}])


def test_loop_gain_reduction_counts_the_third_pole():
    """A resistor across the inputs meant for 45 deg gives 40.35 deg, since the third pole counts.

    S. Franco, Example 8.11: a0 1e5, poles 10 kHz, 3 MHz, 30 MHz, Rc 430 ohm; a0·beta 410 seen, the rest
    computed.
    """
    found = loop(reduced_loop({"RC": resistor("SUM", "GND", 430)}))
    assert found["phase_margin"] == pytest.approx(40.35, abs=0.05)
    assert found["crossover"] == pytest.approx(2.9256e6, rel=1e-3)
    assert found["dc_return_ratio"] == pytest.approx(410.58, rel=1e-4)


def test_loop_gain_reduction_multiplies_the_input_error():
    """1 mV of input error becomes 243.6 mV at the output.

    S. Franco, Example 8.11: 1/beta = 243.558 with Rc 430 ohm.
    """
    found = reduced_loop({"RC": resistor("SUM", "GND", 430)}, gain=1e9, offset=1e-3)
    assert found["nets"]["OUT"][0] == pytest.approx(0.2436, rel=5e-4)


def test_input_lag_network_counts_every_pole():
    """447.4 ohm and 1.1858 nF across the inputs, meant for 45 deg, give 33.94 deg.

    S. Franco, Example 8.12; the exact margin is computed from the network.
    """
    network = {"RC": resistor("SUM", "LAG", 447.4), "CC": capacitor("LAG", "GND", 1.1858e-9)}
    assert loop(reduced_loop(network))["phase_margin"] == pytest.approx(33.94, abs=0.05)


@pytest.mark.parametrize(("share", "output"), [(1.1, 50.1), (1.0, 50.0098), (0.9, 49.9)])
def test_feedback_holds_the_gain(share, output):
    """An open-loop gain of 2525.24 +-10 % and a feedback of 0.0196 keep the gain within 50 +-0.1.

    Kumar & Jain, "Electronic Devices and Circuits", Ex. 11.1 (p. 585): A 2525.24, return ratio 49.49.
    """
    parts = {
        "R1": resistor("FB", "GND", 1.96e3),
        "R2": resistor("FB", "OUT", 98.04e3),
        "U1": amplifier("VIN", "FB", "OUT", open_loop_gain=2525.2424 * share),
    }
    found = figures(parts, VIN, [{"VIN": 0.1}])
    assert found["nets"]["OUT"][0] / 0.1 == pytest.approx(output, abs=2e-5 * output)
    assert loop(found)["dc_return_ratio"] == pytest.approx(49.49495 * share, rel=1e-5)


def biased_stage(load=None):
    """The biased stage, its transconductance of 40 mS as a gain of 40 behind the 1 kohm of RD."""
    parts = {
        "RPI": resistor("IN", "GND", 2.5e3),
        "RF": resistor("IN", "OUT", 10e3),
        "U1": amplifier("GND", "IN", "OUT", open_loop_gain=40.0, output_resistance=1e3),
    }
    if load:
        parts["RL"] = resistor("OUT", "GND", load)
    return figures(parts, {"IN": current_input(1e-6, 1e-3, source_resistance=1e3)}, [{"IN": 1e-3}])


def test_return_ratio_of_a_collector_to_base_biased_stage():
    """Return ratio 2.439, transresistance -7074.5 ohm and output resistance 265.96 ohm of the biased stage.

    Gray-Meyer, "return ratio" article (formulas from memory), with gm 40 mS, r_pi 2.5 kohm, RF 10 kohm, RD
    1 kohm, RS 1 kohm: T = gm RD/(1 + (RF+RD)/(r_pi||RS)); the output resistance by Blackman's formula.
    """
    free, loaded = biased_stage(), biased_stage(load=1e3)
    assert loop(free)["dc_return_ratio"] == pytest.approx(2.4390244, rel=1e-6)
    output = free["nets"]["OUT"][0]
    assert output / 1e-3 == pytest.approx(-7074.468, rel=1e-6)
    assert 1e3 * (output / loaded["nets"]["OUT"][0] - 1) == pytest.approx(265.9574, rel=1e-5)


@pytest.mark.parametrize(
    ("current", "capacitance", "frequency"),
    [
        (1e-6, 150e-12, 41.30e3),
        (10e-9, 4.5e-9, 13.77),
        (1e-6, 4.7e-9, 1.318e3),
        (10e-6, 4.7e-9, 13.18e3),
        (100e-6, 4.7e-9, 131.8e3),
        (1e-9, 3.097e-12, 2e3),
    ],
)
def test_bandwidth_of_a_log_stage_follows_its_current(current, capacitance, frequency):
    """The slowest pole of a log stage is ``I/(2 pi V_T C)``.

    LOG100 data sheet p. 7 and LOG104 p. 6 (capacitors seen, frequencies computed); ADL5303 overview (2 kHz
    at 1 nA).
    """
    parts = {
        "Q1": transistor("IN", "GND", "OUT"),
        "C1": capacitor("IN", "OUT", capacitance),
        "U1": amplifier("GND", "IN", "OUT", gain_bandwidth=10e9),
    }
    found = figures(parts, {"IN": current_input(1e-9, 1e-3)}, [{"IN": current}])
    assert -found["natural_frequencies"]["rightmost"][0] / (2 * math.pi) == pytest.approx(frequency, rel=5e-4)


def test_emitter_resistance_is_the_thermal_voltage_over_the_current():
    """The return ratio of a diode-connected transistor in feedback shows re = 25.26 ohm at 1 mA and 20 degC.

    "25 ohm rule" quoted from The Art of Electronics (maker.pro 281475): kT/q = 25.3 mV at 20 degC.
    """
    parts = {
        "R": resistor("VIN", "SUM", 1e3),
        "Q1": transistor("SUM", "SUM", "OUT"),
        "U1": amplifier("GND", "SUM", "OUT", open_loop_gain=1e6),
    }
    nets = {"VIN": voltage_input(0.1, 10.0)}
    found = loop(figures(parts, nets, [{"VIN": 1.0, "ambient": 293.15}]))
    re = 1e3 * (1e6 / found["dc_return_ratio"] - 1)
    assert re == pytest.approx(thermal_voltage(293.15) / 1e-3, rel=1e-4)
    assert re == pytest.approx(25.3, abs=0.05)
