"""Powers, roots, multipliers and dividers: exponents and products of published circuits."""

from __future__ import annotations

import pytest

from .builder import (
    amplifier,
    current_input,
    current_source,
    figures,
    resistor,
    transistor,
    voltage_input,
)
from .stages import antilog_pair, divider, four_junctions, log_pair

SCALE = 100e3
V = voltage_input(0.01, 10.0)


def power_stage(between, driven="W", log_node="L", base="B"):
    """``VO = VY (VZ/VX)^m`` with log and antilog pairs and what stands between their bases."""
    log = log_pair(output=driven)
    log["Q1"]["pins"]["B"] = log_node
    return {
        "R1": resistor("VZ", "S1", SCALE),
        "R2": resistor("VX", "S2", SCALE),
        "R3": resistor("VY", "S3", SCALE),
        **log,
        **antilog_pair(base, SCALE),
        **between,
    }


def power_figures(exponent, parts, points):
    """Figures of a power stage with its law as a requirement."""
    law = {
        "output": "OUT",
        "law": "VY * (VZ / VX) ** m",
        "constants": {"m": exponent},
        "accuracy": {"reading": "1 %", "absolute": "1 mV"},
    }
    return figures(parts, {"VX": V, "VY": V, "VZ": V}, points, requirements={"power": law})


@pytest.mark.parametrize(
    ("position", "exponent", "output"),
    [(0.0, 0.2, 6.30957), (0.25, 0.5, 3.16228), (0.5, 1.0, 1.0), (0.75, 2.0, 0.1), (1.0, 5.0, 0.0001)],
)
def test_exponent_by_potentiometer(position, exponent, output):
    """A 500 ohm potentiometer between 125 ohm resistors sets exponents from 0.2 to 5.

    Analog Devices MAT02 data sheet Rev. E, "multifunction" circuit, eq. 20:
    m = (RB + K RA)/(RB + (1 - K) RA); outputs for VY = VX = 10 V and VZ = 1 V computed.
    """
    potentiometer = {
        "kind": "potentiometer",
        "value": "500 ohm",
        "position": {"min": 0, "typ": 0.5, "max": 1},
        "pins": {"END1": "L", "WIPER": "W", "END2": "B"},
    }
    between = {"RV": potentiometer, "RB1": resistor("L", "GND", 125.0), "RB2": resistor("B", "GND", 125.0)}
    point = {"VX": 10.0, "VY": 10.0, "VZ": 1.0, "RV": position, "ambient": 298.15}
    found = power_figures(exponent, power_stage(between), [point])
    assert found["nets"]["OUT"][0] == pytest.approx(output, rel=5e-5)
    assert found["requirements"]["power"]["exponent"]["VZ"][0] == pytest.approx(exponent, rel=1e-4)
    assert found["requirements"]["power"]["error"][0] == pytest.approx(0.0, abs=1e-5 * output)


def exponent_of(between, wanted, **nodes):
    """Exponent of a power stage over its input."""
    points = [{"VX": 5.0, "VY": 1.0, "VZ": 4.0, "ambient": 298.15}]
    found = power_figures(wanted, power_stage(between, **nodes), points)
    return found["requirements"]["power"]["exponent"]["VZ"][0]


@pytest.mark.parametrize(
    ("wanted", "lower", "exponent"),
    [(2.0, 196.0, 2.0), (3.0, 97.6, 3.00820), (4.0, 64.9, 4.02003), (5.0, 48.7, 5.02464)],
)
def test_powers_with_standard_resistors(wanted, lower, exponent):
    """Powers set by 196 ohm over a standard resistor come out as 2, 3.008, 4.020 and 5.025.

    Analog Devices AD538 data sheet Rev. C, Fig. 15: RA = 196 ohm/(m - 1).
    """
    between = divider("W", "L", 196.0, lower)
    assert exponent_of(between, wanted, base="W") == pytest.approx(exponent, abs=1e-5 * exponent)


@pytest.mark.parametrize(
    ("wanted", "upper", "lower", "exponent"),
    [
        (0.5, 100.0, 100.0, 0.5),
        (1 / 3, 100.0, 49.9, 0.332889),
        (0.25, 150.0, 49.9, 0.249625),
        (0.2, 162.0, 40.2, 0.198813),
    ],
)
def test_roots_with_standard_resistors(wanted, upper, lower, exponent):
    """Roots set by a divider come out as 1/2, 0.33289, 0.24962 and 0.19881.

    Analog Devices AD538 data sheet Rev. C, Fig. 15: RB/RC = 1/m - 1.
    """
    between = divider("L", "B", upper, lower)
    assert exponent_of(between, wanted, driven="L") == pytest.approx(exponent, abs=1e-5 * exponent)


def squarer(scale, reference):
    """``IO = IIN^2/IREF``: two junctions of the input against one of the reference and one of the output."""
    return {
        "R1": resistor("VIN", "S1", scale),
        "Q1": transistor("S1", "GND", "A"),
        "Q2": transistor("A", "A", "N"),
        "U1": amplifier("GND", "S1", "N"),
        "Q3": transistor("VP", "GND", "M"),
        "I3": current_source("M", "VN", reference),
        "Q4": transistor("S4", "M", "N"),
        "U4": amplifier("GND", "S4", "OUT"),
        "R4": resistor("S4", "OUT", scale),
    }


def test_squarer_loop():
    """100 uA squared over 50 uA is 200 uA.

    Analog Devices OP497 data sheet p. 9: IO = IIN^2/IREF.
    """
    found = figures(squarer(10e3, 50e-6), {"VIN": V}, [{"VIN": 1.0}])
    assert found["parts"]["Q4"]["ic"][0] == pytest.approx(200e-6, rel=1e-5)
    assert found["nets"]["OUT"][0] == pytest.approx(2.0, rel=1e-5)


def test_squarer_of_ten_percent_scale():
    """8 V squared at a scale of 10 V is 6.4 V.

    Hackaday 2025-07-01, "Challenge: square a voltage".
    """
    found = figures(squarer(100e3, 100e-6), {"VIN": V}, [{"VIN": 8.0}])
    assert found["nets"]["OUT"][0] == pytest.approx(6.4, rel=1e-5)


def products(each, points):
    """Output current of the four-junction multiplier and divider."""
    nets = {f"S{k}": current_input(1e-9, 10e-3) for k in (1, 2, 3)}
    found = figures(four_junctions(1e3, **each), nets, [dict(zip(nets, p, strict=True)) for p in points])
    return found["parts"]["Q4"]["ic"]


def test_translinear_product():
    """The product of clockwise currents equals that of anticlockwise ones, so the output is I1·I2/I3.

    Gilbert, Electronics Letters 11(1) 14-16 (1975); MAT02 data sheet Rev. E p. 7.
    """
    currents = [(200e-6, 100e-6, 50e-6), (1e-3, 1e-3, 1e-3), (10e-6, 40e-6, 1e-3)]
    expected = [a * b / c for a, b, c in currents]
    assert products({}, currents) == pytest.approx(expected, rel=1e-5)


def test_translinear_error_of_bulk_emitter_resistance():
    """0.4 ohm in every emitter gives 399.0727 uA for 400, 8.959213 mA for 10, and equal currents exactly.

    Translinear loop of Gilbert, Electronics Letters 11(1) 14-16 (1975), with the rBE of the MAT02 data
    sheet; computed.
    """
    currents = [(200e-6, 100e-6, 50e-6), (1e-3, 1e-3, 100e-6), (1e-4, 1e-4, 1e-4)]
    found = products({"bulk_emitter_resistance": 0.4}, currents)
    assert found == pytest.approx([399.0727e-6, 8.959213e-3, 100e-6], rel=1e-5)


def test_geometric_mean():
    """Two input junctions against two of the output give the root of the product: 20 uA from 10 and 40.

    Gilbert, Electronics Letters 11(1) 14-16 (1975): IOUT = sqrt(I1 I2).
    """
    parts = four_junctions(100e3)
    del parts["U3"]
    parts["Q3"] = transistor("S4", "GND", "B")
    parts["Q4"] = transistor("B", "B", "N")
    nets = {f"S{k}": current_input(1e-6, 1e-3) for k in (1, 2)}
    found = figures(parts, nets, [{"S1": 10e-6, "S2": 40e-6}])
    assert found["parts"]["Q3"]["ic"][0] == pytest.approx(20e-6, rel=1e-5)


def test_incremental_gain_of_a_divider_at_small_denominators():
    """With VY = 10 V and VZ = VX = 10 mV the output moves 1000 times as far as the denominator.

    Analog Devices AD538 data sheet Rev. E p. 10.
    """
    parts = {
        **four_junctions(SCALE),
        "R1": resistor("VY", "S1", SCALE),
        "R2": resistor("VZ", "S2", SCALE),
        "R3": resistor("VX", "S3", SCALE),
    }
    points = [{"VY": 10.0, "VZ": 0.01, "VX": 0.01 + d} for d in (-1e-6, 1e-6)]
    low, high = figures(parts, {"VX": V, "VY": V, "VZ": V}, points)["nets"]["OUT"]
    assert (high - low) / 2e-6 == pytest.approx(-1000.0, rel=1e-3)
