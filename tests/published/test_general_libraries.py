"""The program against general libraries: control theory, computer algebra and the Lambert W function."""

from __future__ import annotations

import math

import control
import numpy as np
import pytest
import scipy.special
import sympy

from .builder import (
    amplifier,
    capacitor,
    current_input,
    diode,
    figures,
    resistor,
    saturation,
    temperature_of,
    thermal_voltage,
    transistor,
    voltage_input,
)

TURN = 2 * math.pi


def check_loop(found, loop):
    """Compare a loop and the natural frequencies with those of the return ratio as a transfer function."""
    gain_margin, phase_margin, _, crossover = control.margin(loop)
    u1 = {key: values[0] for key, values in found["loops"]["U1"].items()}
    assert u1["dc_return_ratio"] == pytest.approx(float(control.dcgain(loop)), rel=1e-6)
    assert u1["phase_margin"] == pytest.approx(phase_margin, abs=0.02)
    assert u1["crossover"] == pytest.approx(crossover / TURN, rel=1e-4)
    if math.isfinite(gain_margin):
        assert u1["gain_margin"] == pytest.approx(20 * math.log10(gain_margin), abs=0.02)
    poles = control.poles(control.feedback(loop, 1))
    assert found["natural_frequencies"]["rightmost"][0] == pytest.approx(np.max(poles.real), rel=1e-5)
    pairs = poles[np.abs(poles.imag) > 1e-9 * np.abs(poles)]
    damping = np.min(-pairs.real / np.abs(pairs), initial=1.0)
    assert found["natural_frequencies"]["least_damping"][0] == pytest.approx(damping, abs=1e-5)


@pytest.mark.parametrize("cf", [20e-12, 90e-12])
def test_log_stage_against_control_theory(cf):
    """Margins and poles of a log stage are those of its transfer function (python-control)."""
    re, rs, ra, cn, vt = 26.0, 4300.0, 9e3, 20e-12, 26e-3
    parts = {
        "R": resistor("VIN", "SUM", 10e3),
        "R0": resistor("SUM", "GND", 90e3),
        "CN": capacitor("SUM", "GND", cn),
        "CF": capacitor("SUM", "OUT", cf),
        "Q1": transistor("SUM", "GND", "E"),
        "RE": resistor("E", "OUT", rs),
        "U1": amplifier("GND", "SUM", "OUT", open_loop_gain=1e5, second_pole=3e6),
    }
    found = figures(parts, {"VIN": voltage_input(1e-3, 10.0)}, [{"VIN": 10.0, "ambient": temperature_of(vt)}])
    current = found["parts"]["Q1"]["ic"][0]
    assert vt / current == pytest.approx(re, rel=1e-3)
    rb, s = rs + vt / current, control.tf("s")
    gain = 1e5 / ((1 + s * 1e5 / (TURN * 1e6)) * (1 + s / (TURN * 3e6)))
    check_loop(found, gain * (1 / rb + s * cf) / (1 / ra + s * (cn + cf)))


def test_three_pole_loop_against_control_theory():
    """Margins and poles of a three-pole follower are those of its transfer function (python-control)."""
    parts = {
        "U1": amplifier("GND", "IN", "OUT", open_loop_gain=1e4, second_pole=1e6),
        "R": resistor("OUT", "IN", 1e3),
        "C": capacitor("IN", "GND", 1 / (TURN * 1e3 * 10e6)),
    }
    s = control.tf("s")
    check_loop(figures(parts, {}), 1e4 / ((1 + s / (TURN * 100)) * (1 + s / (TURN * 1e6)) * (1 + s / (TURN * 1e7))))


def test_resistive_network_against_computer_algebra():
    """A stage with a T network in its feedback has the nets of its symbolic nodal solution (sympy)."""
    values = {
        "r1": 47000,
        "r2": 3300,
        "r3": 100000,
        "rs": 220000,
        "ro": 75,
        "rl": 2000,
        "a": 30000,
        "i": "1/200000",
    }
    symbols = {name: sympy.Symbol(name) for name in values}
    r1, r2, r3, rs, ro, rl, a, i = symbols.values()
    m, t, o = sympy.symbols("m t o")
    equations = [
        i - m / rs - (m - t) / r1,
        (m - t) / r1 - t / r2 - (t - o) / r3,
        (t - o) / r3 - o / rl - (o + a * m) / ro,
    ]
    solution = sympy.solve(equations, [m, t, o], dict=True)[0]
    numbers = {symbols[name]: sympy.Rational(value) for name, value in values.items()}
    parts = {
        "R1": resistor("M", "T", 47e3),
        "R2": resistor("T", "GND", 3.3e3),
        "R3": resistor("T", "OUT", 100e3),
        "RL": resistor("OUT", "GND", 2e3),
        "U1": amplifier("GND", "M", "OUT", open_loop_gain=3e4, output_resistance=75.0),
    }
    nets = {"M": current_input(1e-6, 1e-5, source_resistance=220e3)}
    found = figures(parts, nets, [{"M": 5e-6}])["nets"]
    for net, symbol in (("M", m), ("T", t), ("OUT", o)):
        assert found[net][0] == pytest.approx(float(solution[symbol].subs(numbers)), rel=1e-8)


def test_filter_against_computer_algebra():
    """A second-order low-pass has the roots of its symbolic characteristic polynomial (sympy)."""
    s = sympy.Symbol("s")
    r, c1, c2 = sympy.Integer(10000), sympy.Rational(33, 10**10), sympy.Rational(1, 10**10)
    gain, unity = sympy.Integer(10**5), sympy.Rational(6283185307179586, 10**9)
    x, y, o = sympy.symbols("x y o")
    matrix, _ = sympy.linear_eq_to_matrix(
        [
            x / r + (x - y) / r + s * c1 * (x - o),
            (y - x) / r + s * c2 * y,
            o * (1 + s * gain / unity) - gain * (y - o),
        ],
        [x, y, o],
    )
    roots = [complex(root) for root in sympy.Poly(matrix.det(), s).nroots(n=20, maxsteps=200)]
    parts = {
        "R1": resistor("VIN", "X", 10e3),
        "R2": resistor("X", "Y", 10e3),
        "C1": capacitor("X", "OUT", 3.3e-9),
        "C2": capacitor("Y", "GND", 100e-12),
        "U1": amplifier("Y", "OUT", "OUT", open_loop_gain=1e5),
    }
    found = figures(parts, {"VIN": voltage_input(-1.0, 1.0)}, [{"VIN": 0.5}])["natural_frequencies"]
    assert found["rightmost"][0] == pytest.approx(max(root.real for root in roots), rel=1e-6)
    pairs = [-root.real / abs(root) for root in roots if abs(root.imag) > 1e-6 * abs(root)]
    assert found["least_damping"][0] == pytest.approx(min(pairs), abs=1e-6)


def test_diode_on_a_resistor_against_lambert_w():
    """A diode behind a resistor carries the current of the Lambert W solution (scipy)."""
    resistance, i_s = 4.7e3, 1e-12
    parts = {"R": resistor("VIN", "A", resistance), "D": diode("A", "GND", saturation_current=i_s)}
    points = [{"VIN": v, "ambient": t} for t in (253.15, 298.15, 358.15) for v in (-3.0, -0.1, 0.2, 0.5, 0.8, 3.0)]
    found = figures(parts, {"VIN": voltage_input(-5.0, 5.0)}, points)["parts"]["D"]["current"]
    for point, current in zip(points, found, strict=True):
        vt, growth = thermal_voltage(point["ambient"]), i_s / saturation(i_s, point["ambient"])
        hot = i_s * growth
        w = scipy.special.lambertw(hot * resistance / vt * math.exp((point["VIN"] + hot * resistance) / vt)).real
        assert current == pytest.approx(vt / resistance * w - hot, rel=1e-7, abs=1e-15)
