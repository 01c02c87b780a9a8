"""Points: nets that direct current sees as one."""

from fractions import Fraction

import pytest
from circuits import (
    OUTPUT,
    USUAL,
    amplifier,
    capacitor,
    current_input,
    design_of,
    diode,
    npn,
    potentiometer,
    resistor,
    voltage_input,
    voltage_source,
)

from rulecheck.circuit.wiring import GROUND, Wiring, build_wiring, exact, hidden_source


def wiring_of(parts, nets=USUAL) -> Wiring:
    """Wiring of the design of these parts."""
    return build_wiring(design_of(nets, parts))


def test_a_link_of_zero_ohm_joins_its_nets():
    """A link to ground makes a net ground itself."""
    assert wiring_of([resistor("R1", "0 ohm", "N", "GND"), diode("D1", "N", "VX")]).point_of["N"] == GROUND


@pytest.mark.parametrize(
    "beyond",
    [
        [npn("Q1", "VP", "B", "VN")],
        [amplifier("U1", "B", "VOUT", "VOUT")],
        [capacitor("C1", "B", "GND")],
        [amplifier("U1", "VX", "VOUT", "VOUT", rails=("B", "VN"))],
    ],
    ids=["base", "amplifier input", "capacitor", "filtered supply pin"],
)
def test_a_resistor_without_current_joins_its_nets(beyond):
    """Beyond it stand only pins whose current is neglected."""
    wiring = wiring_of([resistor("R1", "1 kohm", "VREF", "B"), *beyond])
    assert wiring.point_of["B"] == "VREF"
    assert wiring.resistances == ()


def test_chains_of_resistors_without_current_join_all_the_way():
    """Two stoppers in series end on the point of the first net."""
    parts = [resistor("R1", "1 kohm", "VREF", "M"), resistor("R2", "1 kohm", "M", "B"), npn("Q1", "VP", "B", "VN")]
    assert wiring_of(parts).point_of["B"] == "VREF"


@pytest.mark.parametrize(
    "beyond",
    [
        [npn("Q1", "B", "GND", "VN")],
        [npn("Q1", "VP", "GND", "B")],
        [npn("Q1", "B", "B", "GND")],
        [diode("D1", "B", "GND")],
        [resistor("R2", "1 kohm", "B", "GND"), npn("Q1", "VP", "B", "VN")],
        [amplifier("U1", "GND", "S", "B")],
    ],
    ids=["collector", "emitter", "diode-connected", "diode", "divider", "output"],
)
def test_a_resistor_with_current_separates_its_nets(beyond):
    """A pin that carries current beyond a resistor makes a drop across it."""
    wiring = wiring_of([resistor("R1", "1 kohm", "VREF", "B"), *beyond])
    assert wiring.point_of["B"] == "B"


def test_a_driven_or_loaded_net_is_not_taken_for_a_stopper():
    """A current input and an output's load carry current at a net with one resistor."""
    nets = {"IN": current_input(), "VOUT": {**OUTPUT, "load": "10 kohm"}}
    wiring = wiring_of([resistor("R1", "1 kohm", "IN", "A"), resistor("R2", "1 kohm", "A", "VOUT")], nets)
    assert wiring.point_of["IN"] != wiring.point_of["A"] != wiring.point_of["VOUT"]


def test_a_source_resistance_stands_between_the_input_and_its_net():
    """The net of an input with source resistance is not held; its ideal source is a point of its own."""
    nets = {"VX": voltage_input(source_resistance="100 ohm")}
    wiring = wiring_of([resistor("R1", "1 kohm", "VX", "GND")], nets)
    assert "VX" not in wiring.known
    assert wiring.known[hidden_source("VX")] == "VX"
    assert [r.ohm for r in wiring.resistances_at["VX"]] == [1000, 100]


def test_a_potentiometer_is_two_resistances_at_its_position():
    """END1 to WIPER is the position's share; at an end it is a link (20 kohm at 0.3: 6 and 14 kohm)."""
    parts = [resistor(f"R{n}", "1 kohm", n, "GND") for n in "AWB"]
    at_third = wiring_of([potentiometer("RV", "20 kohm", 0.3, "A", "W", "B"), *parts])
    assert [(r.a, r.b, r.ohm) for r in at_third.resistances if r.part == "RV"] == [("A", "W", 6000), ("W", "B", 14000)]
    at_end = wiring_of([potentiometer("RV", "20 kohm", 0, "A", "W", "B"), *parts])
    assert at_end.point_of["A"] == at_end.point_of["W"] != at_end.point_of["B"]


def test_voltage_sources_hold_what_they_join_to_a_held_net():
    """A chain of two sources from ground is held; a source between free nets is not."""
    parts = [
        voltage_source("V1", "1 V", "A", "GND"),
        voltage_source("V2", "1 V", "B", "A"),
        voltage_source("V3", "1 V", "C", "D"),
        *[resistor(f"R{n}", "1 kohm", n, "GND") for n in "ABCD"],
    ]
    assert {"A", "B"} == {point for point in wiring_of(parts).sourced if point in "ABCD"}


def test_equal_ratios_are_equal_fractions():
    """Values are taken by their decimal text: 0.1 + 0.2 of a potentiometer is three tenths."""
    assert exact(0.1 + 0.2) == Fraction(3, 10)
    assert exact(4.7e3) == 4700
