"""The program against the oracle on circuits of several topologies, with every term of the equations in use.

Nets agree to 1e-6 of the reading or of 1 mV, temperatures to 2 mK, margins to 0.1 degrees, the rightmost
natural frequency to 1e-3 and the least damping to 0.005.
"""

from __future__ import annotations

import functools
from pathlib import Path

import pytest

from rulecheck.testing import figures_of

from .equations import solve
from .small_signal import Linear

CIRCUITS = Path(__file__).parent / "circuits"
POINTS = {
    "negative_log": (
        {"IN": -0.01},
        {"IN": -1.0, "ambient": 263.15},
        {"IN": -10.0, "ambient": 343.15, "VP": 13.5, "VN": -16.0},
    ),
    "four_junctions": (
        {"X": 0.1, "Y": 5.0, "Z": 1e-5},
        {"X": 10.0, "Y": 10.0, "Z": 1e-4, "ambient": 338.15},
        {"X": 3.0, "Y": 0.2, "Z": 1e-6},
        {"X": 10.0, "Y": 10.0, "Z": 1e-5},  # asks for 100 V: the output stage is at its limit
    ),
    "mid_rail": ({"PD": 5e-9}, {"PD": 1e-6, "ambient": 333.15}, {"PD": 5e-5, "VCC": 4.5}),
    "mirrors": ({"BIAS": 1e-4}, {"BIAS": 1e-3, "ambient": 343.15}, {"BIAS": 3e-3, "VP": 11.0, "VN": -9.0}),
    "follower": (
        {"IN": 0.5},
        {"IN": -1.0, "RV": 0.0},
        {"IN": -1.0, "RV": 1.0, "ambient": 263.15},
        {"IN": 1e-3, "ambient": 343.15},
        {"IN": 1.0, "RV": 0.2, "VP": 3.0},
    ),
    "two_stage_root": (
        {"X": 0.02},
        {"X": 1.0, "ambient": 263.15},
        {"X": 10.0, "RV": 0.7, "ambient": 328.15, "VP": 14.0},
    ),
}
circuits = pytest.mark.parametrize("name", POINTS)


def read(name):
    """Text of a design or of the catalogue."""
    return (CIRCUITS / f"{name}.toml").read_text("utf-8")


@functools.cache
def program(name):
    """The program's figures of a circuit at its points."""
    found = figures_of(read(name), list(POINTS[name]), read("oracle_parts"))
    assert all(found["converged"])
    return found


@functools.cache
def oracle(name):
    """The oracle's operating points of a circuit."""
    return [solve(read(name), point, read("oracle_parts")) for point in POINTS[name]]


def differences(found, wanted, allowed):
    """Found and wanted figures that differ by more than is allowed, by name and point."""
    return {
        (key, k): (found[key][k], value)
        for key, values in wanted.items()
        for k, value in enumerate(values)
        if found[key][k] is None or not abs(found[key][k] - value) <= allowed(value)
    }


@circuits
def test_nets(name):
    """Every net agrees."""
    wanted = {net: [point.voltage(net) for point in oracle(name)] for net in oracle(name)[0].voltages()}
    assert differences(program(name)["nets"], wanted, lambda v: 1e-6 * max(abs(v), 1e-3)) == {}


@circuits
def test_transistors(name):
    """Collector and base currents into the pins agree to 1e-5, signed also for a pnp."""
    parts = program(name)["parts"]
    for place, key in enumerate(("ic", "ib")):
        found = {ref: parts[ref][key] for ref in oracle(name)[0].network.transistors}
        wanted = {ref: [point.transistor_currents(ref)[place] for point in oracle(name)] for ref in found}
        assert differences(found, wanted, lambda i: 1e-5 * abs(i) + 1e-14) == {}


@circuits
def test_states(name):
    """Every amplifier is linear or at the limit where the oracle has it."""
    states = [point.states() for point in oracle(name)]
    wanted = {ref: [state[ref] for state in states] for ref in states[0]}
    assert {ref: program(name)["parts"][ref]["state"] for ref in wanted} == wanted


@circuits
def test_temperatures(name):
    """Every transistor, amplifier and resistor is at its temperature."""
    parts = program(name)["parts"]
    wanted = {
        ref: [point.temperatures[ref] for point in oracle(name)]
        for ref, table in oracle(name)[0].network.design["parts"].items()
        if table["kind"] in ("npn", "pnp", "op-amp", "resistor")
    }
    assert differences({ref: parts[ref]["temperature"] for ref in wanted}, wanted, lambda t: 2e-3) == {}


@circuits
def test_natural_frequencies(name):
    """The rightmost natural frequency and the least damping agree."""
    found, linear = program(name)["natural_frequencies"], [Linear(point) for point in oracle(name)]
    rightmost = {"rightmost": [network.rightmost() for network in linear]}
    damping = {"least_damping": [network.least_damping() for network in linear]}
    assert differences(found, rightmost, lambda s: 1e-3 * abs(s)) == {}
    assert differences(found, damping, lambda d: 5e-3) == {}


ALLOWED = {
    "dc_return_ratio": lambda t: 1e-5 * abs(t),
    "phase_margin": lambda degrees: 0.1,
    "crossover": lambda f: 1e-3 * f,
    "modulus_margin": lambda m: 1e-3,
    "gain_margin": lambda decibel: 0.1,
}


@circuits
def test_loops(name):
    """Return ratio at rest, margins and crossover of every amplifier agree; at a limit there are none."""
    loops, wrong = program(name)["loops"], {}
    for k, point in enumerate(oracle(name)):
        linear = Linear(point)
        for ref in point.network.amplifiers:
            wanted = linear.margins(ref) if ref in linear.active else {}
            for key, allowed in ALLOWED.items():
                found, value = loops[ref][key][k], wanted.get(key)
                if key == "gain_margin" and value is not None and value < 0:
                    continue  # a conditionally stable loop passes -180 degrees more than once
                if ref not in linear.active and key != "phase_margin":
                    continue
                agree = found is value if None in (found, value) else abs(found - value) <= allowed(value)
                if not agree:
                    wrong[ref, key, k] = (found, value)
    assert wrong == {}
