"""Feedback: its sign at DC, its paths, and the summing nodes it holds."""

import pytest
from circuits import (
    USUAL,
    amplifier,
    antilog,
    capacitor,
    diode,
    log_ratio,
    npn,
    pnp,
    potentiometer,
    resistor,
    structure_of,
    transdiode,
    voltage_input,
    voltage_source,
)

from rulecheck.circuit.structure import SummingNode

INVERTER = [
    resistor("R1", "1 kohm", "VX", "S"),
    resistor("R2", "10 kohm", "S", "VOUT"),
    amplifier("U1", "GND", "S", "VOUT"),
]
BASE_DRIVEN = [
    *transdiode(1, resistor("R1", "10 kohm", "VX", "S1"), emitter="T"),
    resistor("R2", "100 kohm", "VREF", "S2"),
    npn("Q2", "S2", "B2", "T"),
    resistor("R3", "15 kohm", "VOUT", "B2"),
    resistor("R4", "1 kohm", "B2", "GND"),
    amplifier("U2", "S2", "GND", "VOUT"),
]


def swapped(parts, ref):
    """Swap the inputs of an amplifier."""
    cross = {"IN+": "IN-", "IN-": "IN+"}
    return [
        (
            name,
            {**table, "pins": {cross.get(pin, pin): net for pin, net in table["pins"].items()}}
            if name == ref
            else table,
        )
        for name, table in parts
    ]


SOUND = {
    "inverter": (INVERTER, "U1"),
    "follower": ([amplifier("U1", "VX", "VOUT", "VOUT")], "U1"),
    "log transistor": (transdiode(1, resistor("R1", "10 kohm", "VX", "S1")), "U1"),
    "log diode": (
        [resistor("R1", "10 kohm", "VX", "S"), diode("D1", "S", "O"), amplifier("U1", "GND", "S", "O")],
        "U1",
    ),
    "pnp log transistor": (transdiode(1, resistor("R1", "10 kohm", "VX", "S1"), kind=pnp), "U1"),
    "base-driven log transistor": (BASE_DRIVEN, "U2"),
    "shared emitter, led through the other base": (
        log_ratio(1, resistor("R1", "10 kohm", "VX", "S1"), resistor("R2", "10 kohm", "VY", "W1"), "VOUT"),
        "V1",
    ),
    "current source with a transistor": (
        [amplifier("U1", "VREF", "E", "B"), npn("Q1", "VP", "B", "E"), resistor("R1", "1 kohm", "E", "GND")],
        "U1",
    ),
    "follower inside another loop": (
        [
            resistor("R1", "10 kohm", "VX", "S"),
            amplifier("U1", "GND", "S", "O"),
            resistor("R2", "1 kohm", "O", "W"),
            amplifier("U2", "W", "F", "F"),
            resistor("R3", "10 kohm", "F", "S"),
        ],
        "U2",
    ),
}


@pytest.mark.parametrize(("parts", "amp"), SOUND.values(), ids=SOUND)
def test_sound_stages_have_negative_feedback(parts, amp):
    """Every amplifier of a sound stage is in negative feedback."""
    assert set(structure_of(parts).dc_feedback.values()) == {"negative"}


@pytest.mark.parametrize(("parts", "amp"), SOUND.values(), ids=SOUND)
def test_swapped_inputs_make_it_positive(parts, amp):
    """An amplifier with its inputs swapped is in positive feedback and holds nothing."""
    structure = structure_of(swapped(parts, amp))
    assert structure.dc_feedback[amp] == "positive"
    assert all(node.amplifier != amp for node in structure.summing_nodes)


def test_a_capacitor_alone_is_no_feedback_at_dc():
    """An integrator by itself has no DC feedback; a comparator has none at all."""
    integrator = [resistor("R1", "1 kohm", "VX", "S"), capacitor("C1", "S", "O"), amplifier("U1", "GND", "S", "O")]
    structure = structure_of([*integrator, amplifier("U2", "VX", "VREF", "VOUT")])
    assert structure.dc_feedback == {"U1": "absent", "U2": "absent"}
    assert structure.summing_nodes == ()


def test_an_integrator_is_held_by_the_loop_around_it():
    """Feedback from a later stage holds the input of an integrator."""
    parts = [
        resistor("R1", "10 kohm", "VX", "S"),
        capacitor("C1", "S", "O"),
        amplifier("U1", "GND", "S", "O"),
        resistor("R2", "10 kohm", "O", "M"),
        resistor("R3", "10 kohm", "M", "VOUT"),
        amplifier("U2", "GND", "M", "VOUT"),
        resistor("R4", "10 kohm", "VOUT", "N"),
        resistor("R5", "10 kohm", "N", "P"),
        amplifier("U3", "GND", "N", "P"),
        resistor("R6", "10 kohm", "P", "S"),
    ]
    structure = structure_of(parts)
    assert structure.dc_feedback["U1"] == "negative"
    assert structure.amplifier_of("S") == "U1"
    without = structure_of([part for part in parts if part[0] != "R6"])
    assert without.dc_feedback["U1"] == "absent"


def test_a_follower_inside_another_loop_is_held_by_its_own():
    """The input that the local feedback reaches is the held one, whatever the outer loop adds."""
    parts, amp = SOUND["follower inside another loop"]
    held = [node for node in structure_of(parts).summing_nodes if node.amplifier == amp]
    assert held == [SummingNode(net="F", amplifier="U2", input="IN-", level_net="W")]


def test_either_input_can_be_the_summing_node():
    """A base-driven log transistor inverts, so its collector stands at the non-inverting input."""
    structure = structure_of(BASE_DRIVEN)
    assert structure.summing_node("S2") == SummingNode(net="S2", amplifier="U2", input="IN+", level_net="GND")
    assert structure.summing_node("S1") == SummingNode(net="S1", amplifier="U1", input="IN-", level_net="GND")
    assert structure.summing_node("B2") is None


def test_queries_name_amplifier_and_level_of_a_net():
    """The queries agree with the summing nodes; other nets give None."""
    structure = structure_of(BASE_DRIVEN)
    assert (structure.amplifier_of("S2"), structure.level_of("S2")) == ("U2", "GND")
    assert (structure.amplifier_of("T"), structure.level_of("T")) == (None, None)
    assert structure.amplifiers_of("GND") == ("U1", "U2")
    assert structure.amplifiers_of("VP") == ()


def test_a_summing_node_behind_an_input_resistor_counts_on_both_nets():
    """A resistor before the amplifier's input carries no current: the currents meet in front of it."""
    parts = [
        resistor("R1", "10 kohm", "VX", "S"),
        npn("Q1", "S", "GND", "E"),
        resistor("R2", "1 kohm", "E", "O"),
        resistor("R3", "1 kohm", "S", "N"),
        resistor("R4", "10 kohm", "P", "GND"),
        amplifier("U1", "P", "N", "O"),
    ]
    structure = structure_of(parts)
    assert [node.net for node in structure.summing_nodes] == ["N", "S"]
    assert [log.summing_node for log in structure.log_transistors] == ["S"]


def test_levels_come_from_dividers_followers_and_virtual_grounds():
    """Half of 15 V by a divider, buffered, holds a summing node at 7.5 V; a log voltage has no fixed level."""
    parts = [
        resistor("R1", "10 kohm", "VP", "D"),
        resistor("R2", "10 kohm", "D", "GND"),
        amplifier("U1", "D", "MID", "MID"),
        resistor("R3", "10 kohm", "VX", "S"),
        npn("Q1", "S", "MID", "E"),
        resistor("R4", "1 kohm", "E", "O"),
        amplifier("U2", "MID", "S", "O"),
    ]
    structure = structure_of(parts, {**USUAL, "VP": {"role": "supply", "voltage": "15 V", "tolerance": "4 %"}})
    level = structure.held_at("S")
    assert level is not None
    assert (level.min, level.typ, level.max) == pytest.approx((7.2, 7.5, 7.8))
    assert structure.held_at("E") is None
    assert structure.held_at("VX") is None
    assert structure.level_of("S") == "MID"


def test_a_voltage_source_shifts_a_level():
    """A source of 1 V on a reference of 5 V is held at 6 V."""
    parts = [voltage_source("VS", "1 V", "A", "VREF"), resistor("R1", "1 kohm", "A", "GND")]
    level = structure_of(parts).held_at("A")
    assert level is not None
    assert level.typ == 6.0


def paths(structure, amp):
    """Paths of an amplifier's loops as (input, parts)."""
    return [(loop.input, loop.parts) for loop in structure.feedback_loops if loop.amplifier == amp]


def test_paths_run_through_transistors_and_capacitors():
    """A log stage with a capacitor on either side of the emitter resistor has three ways back."""
    parts = [*transdiode(1, resistor("R1", "10 kohm", "VX", "S1")), capacitor("CE", "E1", "S1")]
    assert paths(structure_of(parts), "U1") == [("IN-", ("C1",)), ("IN-", ("RE1", "Q1")), ("IN-", ("RE1", "CE"))]


def test_paths_name_their_nets_from_output_to_input():
    """The nets of a path are one more than its steps."""
    loop = structure_of(transdiode(1, resistor("R1", "10 kohm", "VX", "S1"))).feedback_loops[1]
    assert (loop.parts, loop.nets) == (("RE1", "Q1"), ("O1", "E1", "S1"))
    assert [(step.entry, step.exit) for step in loop.steps] == [("0", "1"), ("E", "C")]


def test_paths_end_at_held_nets_and_other_outputs():
    """The way from one log stage into the next one's summing node or output is no loop of the first."""
    stages = [*antilog(1, resistor("R1", "10 kohm", "VREF", "S1"), base="GND", out="VOUT")]
    assert paths(structure_of(stages), "U1") == [("IN-", ("C1",)), ("IN-", ("RE1", "Q1"))]
    assert paths(structure_of(stages), "W1") == [("IN-", ("RF1",))]


def test_paths_go_through_other_amplifiers():
    """A loop through a follower names it, and the follower is in one of its own."""
    parts, _ = SOUND["follower inside another loop"]
    structure = structure_of(parts)
    assert paths(structure, "U1") == [("IN-", ("R2", "U2", "R3"))]
    assert paths(structure, "U2") == [("IN-", ()), ("IN+", ("R3", "U1", "R2"))]


def test_a_path_may_use_both_halves_of_a_potentiometer():
    """A potentiometer from output to summing node with a free wiper is one part on the way."""
    parts = [resistor("R1", "1 kohm", "VX", "S"), potentiometer("RV", "10 kohm", 0.5, "VOUT", "W", "S")]
    assert paths(structure_of([*parts, amplifier("U1", "GND", "S", "VOUT")]), "U1") == [("IN-", ("RV",))]


def test_a_wiper_in_the_summing_node_gives_one_half_only():
    """With its wiper at the summing node only the half towards the output is feedback."""
    parts = [potentiometer("RV", "10 kohm", 0.4, "VX", "S", "VOUT"), amplifier("U1", "GND", "S", "VOUT")]
    assert paths(structure_of(parts), "U1") == [("IN-", ("RV",))]


def test_the_search_is_bounded_in_a_dense_network():
    """A mesh of resistors has paths without number; the search gives up after the shortest."""
    names = [f"N{i}" for i in range(12)]
    mesh = [resistor(f"R{a}{b}", "1 kohm", a, b) for i, a in enumerate(names) for b in names[:i]]
    ends = [
        resistor("RA", "1 kohm", "VOUT", "N0"),
        resistor("RB", "1 kohm", "N1", "S"),
        amplifier("U1", "GND", "S", "VOUT"),
    ]
    found = paths(structure_of([*mesh, *ends], {"VX": voltage_input(), **USUAL}), "U1")
    assert found[0] == ("IN-", ("RA", "RN1N0", "RB"))
    assert 10 < len(found) <= 64
