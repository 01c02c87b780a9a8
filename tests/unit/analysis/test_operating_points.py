"""Operating points: what does not change them, islands, hard starts, and points without a solution."""

import random
import re

import numpy as np
import pytest
from designs import HEAD, PINS, SELF_BIASED, board
from hypothesis import given, settings
from hypothesis import strategies as st

from rulecheck.analysis import newton
from rulecheck.analysis.equations import Equations
from rulecheck.analysis.network import build_network
from rulecheck.analysis.review import Review
from rulecheck.analysis.solution import solve_circuit
from rulecheck.analysis.values import Parameters, compute_values
from rulecheck.testing import design_from, figures_of

POINTS = [{"X0": 0.1}, {"X0": 1.0, "ambient": 330.0}, {"X0": 10.0, "VP": 14.25}]


def outputs(text, names=("Y0", "S0", "E0")):
    """Voltages of some nets at the shared points."""
    nets = figures_of(text, POINTS)["nets"]
    return np.array([nets[n] for n in names])


def renamed(text, seed):
    """The same circuit with other names of parts and nets, in another order."""
    rng = random.Random(seed)
    lines = text.strip().splitlines()
    start = lines.index("[parts]")
    parts = [line for line in lines[start + 1 :] if line]
    rng.shuffle(parts)
    body = "\n".join(parts)
    for net in ("S0", "T0", "E0", "B0", "O0"):
        body = re.sub(rf'"{net}"', f'"net {net} {seed}"', body)
    for ref in ("R1_0", "Q1_0", "Q2_0", "U1_0", "R5_0"):
        body = re.sub(rf"^{ref} ", f"{ref}x{seed} ", body, flags=re.MULTILINE)
    return "\n".join([*lines[: start + 1], body])


@settings(max_examples=10, deadline=None)
@given(st.integers(0, 10**6))
def test_names_and_order_do_not_matter(seed):
    """Other names of parts and nets and another order of the file leave the output as it is."""
    assert outputs(renamed(board(1), seed), ["Y0"]) == pytest.approx(outputs(board(1), ["Y0"]), rel=1e-9, abs=1e-12)


@settings(max_examples=10, deadline=None)
@given(st.floats(0.05, 0.95))
def test_splitting_a_resistor_does_not_matter(share):
    """Two resistors in series in place of one leave all nets as they are."""
    whole = 'R1_0 = { kind = "resistor", value = "100 kohm", pins = ["X0", "S0"] }'
    halves = (
        f'RA = {{ kind = "resistor", value = "{100e3 * share!r} ohm", pins = ["X0", "MID"] }}\n'
        f'RB = {{ kind = "resistor", value = "{100e3 * (1 - share)!r} ohm", pins = ["MID", "S0"] }}'
    )
    assert outputs(board(1).replace(whole, halves)) == pytest.approx(outputs(board(1)), rel=1e-9, abs=1e-12)


def test_units_do_not_matter():
    """The same values in other units give the same figures."""
    other = board(1).replace('"100 kohm"', '"0.1 Mohm"').replace('"1 nF"', '"1000pF"').replace('"15 V"', '"15000 mV"')
    assert outputs(other) == pytest.approx(outputs(board(1)), rel=1e-12, abs=1e-15)


def test_equal_channels_are_solved_once():
    """Eight equal channels are one solution at eight places, and agree with the whole circuit solved at once."""
    design = design_from(board(8))
    review = Review(design)
    points = review.operating_points
    assert len(points.placed) == 8
    assert len({id(p.solution) for p in points.placed}) == 1
    some = points.conditions.take(np.arange(0, points.conditions.size, 97))
    together = solve_circuit(design, some)
    apart = review.solve(some)
    for net in design.nets:
        assert apart.voltage(net) == pytest.approx(together.voltage(net), rel=1e-9, abs=1e-12)


def test_channels_that_share_heat_are_solved_together():
    """Channels in one package warm each other, so a pair of them is one piece."""
    review = Review(design_from(board(4, shared_package=True)))
    assert [sum(len(p.parts) for p in review.operating_points.placed)] == [44]
    assert len(review.operating_points.placed) == 2


def test_a_changed_channel_is_solved_by_itself():
    """Overriding a parameter of one channel moves that channel only."""
    review = Review(design_from(board(3)))
    moved = review.re_solve(values={("R1_1", "value"): 110e3})
    still = review.operating_points
    assert moved.voltage("Y0") == pytest.approx(still.voltage("Y0"), abs=1e-12)
    assert np.nanmax(np.abs(moved.voltage("Y1") - still.voltage("Y1"))) > 0.01


def newton_setup(text):
    """Equations and values of a design at its review conditions."""
    review = Review(design_from(text))
    network = build_network(review.design)
    ambient = review.conditions.values["ambient"]
    return Equations(network), compute_values(network, review.conditions, lambda _: ambient, Parameters(review.design))


@pytest.mark.parametrize("way", ["_switch_on", "_step_sources", "_step_conductances"])
def test_ways_round_give_the_same_answer(way):
    """Each way round a failed start ends on the bare equations: answers agree with the direct one to 1e-9."""
    equations, values = newton_setup(board(1))
    direct = newton.solve(equations, values)
    found = getattr(newton, way)(equations, values)
    arrived = found.converged
    assert arrived.any()
    assert found.x[arrived] == pytest.approx(direct.x[arrived], rel=1e-7, abs=1e-9)


def test_switching_on_passes_the_fold_of_a_self_biased_reference():
    """The start-up resistor brings the reference to kT/q·ln(8)/R, a PTAT current (textbook), not to the off state."""
    equations, values = newton_setup(SELF_BIASED)
    found = newton._switch_on(equations, values)
    assert found.converged.all()
    review = Review(design_from(SELF_BIASED))
    points = review.operating_points
    at_25 = np.flatnonzero(points.conditions.values["ambient"] == 298.15)[0]
    assert points.current("Q2", "C")[at_25] == pytest.approx(0.025692579 * np.log(8) / 5600, rel=0.05)


def test_a_point_without_solution_is_reported():
    """A junction straight across a stiff 5 V source has no plausible solution: named with its net, figures null."""
    text = """
format = 1
[design]
title = "impossible"
[nets]
GND = { role = "ground" }
X = { role = "input", drive = "current", range = ["1 uA", "1 mA"] }
[parts]
C1 = { kind = "capacitor", value = "1 nF", pins = ["X", "GND"] }
C2 = { kind = "capacitor", value = "1 nF", pins = ["X", "Y"] }
R1 = { kind = "resistor", value = "1 kohm", pins = ["Y", "GND"] }
"""
    review = Review(design_from(text))
    points = review.operating_points
    assert not points.converged.any()
    assert np.isnan(points.voltage("X")).all()
    assert "net X" in points.failures()[0]
    assert figures_of(text, [{"X": 1e-6}])["nets"]["X"] == [None]


def test_states_of_amplifiers():
    """A stage driven beyond its swing is at its limits, and unpowered where both supplies are absent."""
    text = (
        HEAD
        + f"""
X = {{ role = "input", drive = "voltage", range = ["-10 V", "10 V"] }}
[parts]
R1 = {{ kind = "resistor", value = "1 kohm", pins = ["X", "S"] }}
R2 = {{ kind = "resistor", value = "10 kohm", pins = ["S", "Y"] }}
U1 = {{ kind = "op-amp", model = "bifet-precision", pins = {{ "IN+" = "GND", IN- = "S", OUT = "Y", {PINS} }} }}
"""
    )
    found = figures_of(text, [{"X": -10.0}, {"X": 0.1}, {"X": 10.0}, {"X": 1.0, "VP": 0.0, "VN": 0.0}])
    assert found["parts"]["U1"]["state"] == ["high", "linear", "low", "unpowered"]
    assert found["nets"]["Y"][1] == pytest.approx(-1.0, rel=1e-3)


@pytest.mark.parametrize("position", [0.0, 0.3, 1.0])
def test_potentiometer_at_its_ends(position):
    """A divider by potentiometer gives its share of the voltage, ends included (Ohm)."""
    text = (
        HEAD
        + """
[parts]
RV1 = { kind = "potentiometer", value = "10 kohm", position = { min = 0, typ = 0.5, max = 1 }, pins = { END1 = "GND", WIPER = "W", END2 = "VREF" } }
RL = { kind = "resistor", value = "1 Gohm", pins = ["W", "GND"] }
"""
    )
    assert figures_of(text, [{"RV1": position}])["nets"]["W"][0] == pytest.approx(2.5 * position, rel=1e-5, abs=1e-12)


SPARES = """
SP1 = { kind = "op-amp", model = "bifet-precision", package = "U9", spare = true, pins = { "V+" = "VP", V- = "VN" } }
SP2 = { kind = "npn", model = "small-signal-npn", spare = true, pins = { C = "VP", E = "GND" } }
SP3 = { kind = "op-amp", model = "bifet-precision", spare = true, pins = { "IN+" = "FLOATING", IN- = "F", OUT = "F", "V+" = "VP", V- = "VN" } }
"""


def test_spare_parts_with_open_pins_are_left_out():
    """They have no figures, and those of the circuit stay as they are."""
    found = figures_of(board(1) + SPARES, POINTS)
    assert found["converged"] == [True] * 3
    assert found["nets"]["Y0"] == pytest.approx(figures_of(board(1), POINTS)["nets"]["Y0"], abs=1e-12)
    assert found["parts"]["SP1"]["state"] == ["unpowered"] * 3
    assert found["parts"]["SP2"]["ic"] == [None] * 3


LINKS = """
L1 = { kind = "resistor", value = "0 ohm", pins = ["VREF", "W"] }
L2 = { kind = "resistor", value = "0 ohm", pins = ["VREF", "W"] }
L3 = { kind = "resistor", value = "0 ohm", pins = ["GND", "GNDX"] }
R9 = { kind = "resistor", value = "1 kohm", pins = ["W", "GND"] }
"""


def test_links_in_parallel_and_between_grounds():
    """Two links share the current of 2.5 mA evenly (Ohm), and one between grounds carries none."""
    text = board(1).replace('GND = { role = "ground" }', 'GND = { role = "ground" }\nGNDX = { role = "ground" }')
    found = figures_of(text + LINKS, [{}])
    assert found["converged"] == [True]
    assert found["parts"]["L1"]["current"] == pytest.approx([1.25e-3], rel=1e-6)
    assert found["parts"]["L3"]["current"] == pytest.approx([0.0], abs=1e-12)


def test_an_output_load_of_one_channel_moves_that_channel_only():
    """What is changed at a net of one of several equal channels stays there."""
    review = Review(design_from(board(3)))
    moved = review.re_solve(values={("Y1", "load"): 2e3})
    assert np.nanmax(np.abs(moved.voltage("Y0") - review.operating_points.voltage("Y0"))) < 1e-12
    assert np.nanmax(np.abs(moved.current("U2_1", "OUT") - review.operating_points.current("U2_1", "OUT"))) > 1e-6
