"""What sets the current of a summing node."""

import pytest
from circuits import (
    USUAL,
    amplifier,
    antilog,
    current_input,
    current_source,
    diode,
    log_ratio,
    npn,
    photodiode,
    pnp,
    resistor,
    structure_of,
    transdiode,
)

from rulecheck.circuit.structure import CurrentSources

RESISTOR = resistor("R1", "10 kohm", "VX", "S1")


def sources_of(parts, net="S1", nets=USUAL):
    """What sets the current of a net."""
    return structure_of(parts, nets).current_sources_of(net)


@pytest.mark.parametrize(
    ("drive", "expected"),
    [
        (RESISTOR, CurrentSources(inputs=("VX",), references=(), parts=("R1",))),
        (resistor("R1", "1 kohm", "VREF", "S1"), CurrentSources(inputs=(), references=("VREF",), parts=("R1",))),
        (resistor("R1", "1 kohm", "VP", "S1"), CurrentSources(inputs=(), references=("VP",), parts=("R1",))),
        (current_source("I1", "1 uA", "S1", "VP"), CurrentSources(inputs=(), references=("I1",), parts=("I1",))),
        (photodiode("PD", "S1", "GND"), CurrentSources(inputs=("PD",), references=(), parts=("PD",))),
    ],
    ids=["input", "reference", "supply", "current source", "photodiode"],
)
def test_a_log_stage_names_what_drives_it(drive, expected):
    """Inputs and fixed quantities are told apart; the log transistor itself is left out."""
    assert sources_of(transdiode(1, drive)) == expected


def test_a_current_input_drives_its_own_net():
    """An input that is a current stands on the summing node itself."""
    parts = [npn("Q1", "IN", "GND", "O1"), amplifier("U1", "GND", "IN", "O1")]
    found = sources_of(parts, "IN", {"IN": current_input()})
    assert found == CurrentSources(inputs=("IN",), references=(), parts=())


def test_currents_add_at_a_node():
    """A node with an input, a trim from the reference and a source names all three, in the file's order."""
    parts = [
        *transdiode(1, RESISTOR),
        resistor("R2", "1 kohm", "VREF", "T"),
        resistor("R3", "1 kohm", "T", "GND"),
        resistor("R4", "1 Mohm", "T", "S1"),
        current_source("I1", "1 uA", "S1", "VP"),
    ]
    found = sources_of(parts)
    assert (found.inputs, found.references) == (("VX",), ("VREF", "I1"))
    assert found.parts == ("R1", "R2", "R3", "R4", "I1")


def test_currents_are_traced_through_amplifiers():
    """An inverter before the resistor passes on what drives it."""
    inverter = [
        resistor("R2", "1 kohm", "VY", "M"),
        resistor("R3", "1 kohm", "M", "N"),
        amplifier("U2", "GND", "M", "N"),
    ]
    found = sources_of([*transdiode(1, resistor("R1", "10 kohm", "N", "S1")), *inverter])
    assert found.inputs == ("VY",)
    assert {"R1", "U2", "R2"} <= set(found.parts)


def test_currents_are_traced_through_current_source_transistors():
    """A collector passes on what leads its base; the rail under a mirror's emitter is not what sets it."""
    parts = [
        amplifier("U1", "VY", "E", "B"),
        npn("Q1", "C", "B", "E"),
        resistor("R1", "10 kohm", "E", "GND"),
        pnp("M1", "C", "C", "VP"),
        pnp("M2", "S2", "C", "VP"),
        *transdiode(2, resistor("R2", "1 Gohm", "VREF", "S2")),
    ]
    found = sources_of(parts, "S2")
    assert (found.inputs, found.references) == (("VY",), ("VREF",))


def test_an_antilog_output_answers_to_all_that_leads_its_pair():
    """The output's summing node sees the inputs of the log pair and the antilog pair's reference."""
    parts = [
        *log_ratio(1, RESISTOR, resistor("R2", "10 kohm", "VY", "W1"), "L"),
        *antilog(3, resistor("R5", "100 kohm", "VREF", "S3"), base="L", out="VOUT"),
    ]
    structure = structure_of(parts)
    assert structure.current_sources_of("X3").inputs == ("VX", "VY")
    assert structure.current_sources_of("S3") == CurrentSources(inputs=(), references=("VREF",), parts=("R5",))


def test_clamps_lead_nothing():
    """A clamp to a rail brings no reference into the account."""
    assert sources_of([*transdiode(1, RESISTOR), diode("D1", "S1", "VP")]).references == ()


def test_a_resistor_from_a_held_node_brings_its_level_only():
    """The current from another summing node is set by that node's level, not by what flows into it."""
    parts = [
        *transdiode(1, resistor("R1", "10 kohm", "S2", "S1")),
        resistor("R2", "1 kohm", "VY", "S2"),
        resistor("R3", "1 kohm", "S2", "O2"),
        amplifier("U2", "VREF", "S2", "O2"),
    ]
    assert sources_of(parts) == CurrentSources(inputs=(), references=("VREF",), parts=("R1",))
