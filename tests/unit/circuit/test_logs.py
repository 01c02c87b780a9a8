"""Log and antilog elements, and the diodes that are clamps."""

import pytest
from circuits import (
    USUAL,
    amplifier,
    antilog,
    current_source,
    diode,
    log_ratio,
    npn,
    photodiode,
    pnp,
    resistor,
    structure_of,
    transdiode,
    voltage_input,
)

from rulecheck.circuit.structure import AntilogTransistor, LogDiode, LogTransistor

R1 = resistor("R1", "10 kohm", "VX", "S1")
NEGATIVE = {**USUAL, "VX": voltage_input("-10 V", "-10 mV")}
BIPOLAR = {**USUAL, "VX": voltage_input("-10 V", "10 V")}


@pytest.mark.parametrize("kind", [npn, pnp])
def test_emitter_driven_log_transistor(kind):
    """Collector on the summing node, emitter led through a resistor, of either polarity."""
    assert structure_of(transdiode(1, R1, kind=kind)).log_transistors == (
        LogTransistor(part="Q1", amplifier="U1", summing_node="S1", drive="emitter", diode_connected=False),
    )


def test_emitter_driven_without_resistor():
    """The emitter may stand on the output itself."""
    logs = structure_of([R1, npn("Q1", "S1", "GND", "O1"), amplifier("U1", "GND", "S1", "O1")]).log_transistors
    assert [(log.part, log.drive) for log in logs] == [("Q1", "emitter")]


def test_base_driven_log_transistor():
    """The output leads the base through a divider, the collector stands at the non-inverting input."""
    parts = [
        R1,
        npn("Q1", "S1", "B", "GND"),
        resistor("R2", "1 kohm", "O1", "B"),
        resistor("R3", "1 kohm", "B", "GND"),
        amplifier("U1", "S1", "GND", "O1"),
    ]
    logs = structure_of(parts).log_transistors
    assert [(log.part, log.summing_node, log.drive) for log in logs] == [("Q1", "S1", "base")]


def test_both_transistors_of_a_shared_emitter_are_log_transistors():
    """Each is in the feedback of its own amplifier, one led through the other's base."""
    logs = structure_of(log_ratio(1, R1, resistor("R2", "10 kohm", "VY", "W1"), "VOUT")).log_transistors
    assert [(log.part, log.amplifier, log.summing_node) for log in logs] == [("Q1", "U1", "S1"), ("P1", "V1", "W1")]


@pytest.mark.parametrize(
    ("pins", "drive"),
    [(("S1", "S1", "O1"), "emitter"), (("O1", "O1", "S1"), "base")],
    ids=["collector at the node", "emitter at the node"],
)
def test_diode_connected_log_transistor(pins, drive):
    """Collector tied to base, either way round."""
    logs = structure_of([R1, npn("Q1", *pins), amplifier("U1", "GND", "S1", "O1")], USUAL).log_transistors
    assert logs == (LogTransistor(part="Q1", amplifier="U1", summing_node="S1", drive=drive, diode_connected=True),)


def test_stacked_log_transistors_both_count():
    """A transistor and a diode-connected one below it carry the same current."""
    parts = [R1, npn("Q1", "S1", "GND", "M"), npn("Q2", "M", "M", "O1"), amplifier("U1", "GND", "S1", "O1")]
    logs = structure_of(parts).log_transistors
    assert [(log.part, log.summing_node, log.diode_connected) for log in logs] == [
        ("Q1", "S1", False),
        ("Q2", "S1", True),
    ]


def test_log_transistor_behind_a_follower():
    """An amplifier or a transistor as a follower may stand between output and emitter."""
    common = [R1, npn("Q1", "S1", "GND", "E1"), amplifier("U1", "GND", "S1", "O1"), resistor("R2", "1 kohm", "F", "E1")]
    for follower in (
        [amplifier("U2", "O1", "F", "F")],
        [pnp("Q2", "VN", "O1", "F"), resistor("R3", "10 kohm", "F", "VP")],
    ):
        logs = structure_of([*common, *follower]).log_transistors
        assert [(log.part, log.amplifier) for log in logs] == [("Q1", "U1")]


def test_a_transistor_that_makes_a_current_source_is_no_log_transistor():
    """Its emitter is held, its collector feeds another node, and its junction voltage goes nowhere."""
    parts = [
        amplifier("U1", "VX", "E", "B"),
        npn("Q1", "S2", "B", "E"),
        resistor("R1", "10 kohm", "E", "GND"),
        amplifier("U2", "GND", "S2", "VOUT"),
        resistor("R2", "10 kohm", "S2", "VOUT"),
    ]
    structure = structure_of(parts)
    assert structure.log_transistors == structure.antilog_transistors == structure.junction_loops == ()


def test_log_diode():
    """A diode from the summing node to the output carries the current of a positive input."""
    structure = structure_of([R1, diode("D1", "S1", "O1"), amplifier("U1", "GND", "S1", "O1")])
    assert structure.log_diodes == (LogDiode(part="D1", amplifier="U1", summing_node="S1"),)


@pytest.mark.parametrize(("nets", "expected"), [(USUAL, "D1"), (NEGATIVE, "D2")], ids=["positive", "negative"])
def test_of_antiparallel_diodes_the_one_in_the_direction_of_the_current_is_the_log_diode(nets, expected):
    """The other is a clamp."""
    parts = [R1, diode("D1", "S1", "O1"), diode("D2", "O1", "S1"), amplifier("U1", "GND", "S1", "O1")]
    structure = structure_of(parts, nets)
    assert [log.part for log in structure.log_diodes] == [expected]
    assert structure.conducting == (expected,)


@pytest.mark.parametrize(
    "clamp",
    [
        diode("D", "O1", "S1"),
        diode("D", "S1", "O1"),
        npn("D", "O1", "O1", "S1"),
        diode("D", "E1", "GND"),
        diode("D", "S1", "GND"),
        diode("D", "GND", "S1"),
        diode("D", "S1", "VP"),
        diode("D", "VN", "S1"),
        diode("D", "O1", "VP"),
        diode("D", "GND", "O1"),
    ],
    ids=[
        "output to node, against the current",
        "output to node, with the current",
        "diode-connected transistor",
        "across the junction",
        "node to ground",
        "ground to node",
        "node to rail",
        "rail to node",
        "output to rail",
        "ground to output",
    ],
)
def test_clamps_are_not_at_work(clamp):
    """A clamp about a log transistor changes nothing in the structure."""
    bare = structure_of(transdiode(1, R1))
    clamped = structure_of([*transdiode(1, R1), clamp])
    assert clamped.conducting == ("Q1",)
    assert clamped.log_transistors == bare.log_transistors
    assert clamped.log_diodes == ()
    assert clamped.junction_loops == bare.junction_loops


def test_diodes_in_series_to_a_rail_are_clamps():
    """A string of diodes is judged by its ends."""
    parts = [*transdiode(1, R1), diode("D1", "S1", "K"), diode("D2", "K", "VP")]
    assert structure_of(parts).conducting == ("Q1",)


def test_clamps_about_a_driven_base_are_not_at_work():
    """Antiparallel diodes at a divider that leads a base only limit it."""
    divider = [resistor("R2", "15 kohm", "VX", "B"), resistor("R3", "1 kohm", "B", "GND")]
    stage = antilog(1, resistor("R1", "100 kohm", "VREF", "S1"), base="B", out="VOUT")
    clamps = [diode("D1", "B", "GND"), diode("D2", "GND", "B")]
    assert structure_of([*divider, *stage, *clamps]).junction_loops == structure_of([*divider, *stage]).junction_loops


def test_a_diode_across_a_feedback_resistor_is_a_clamp():
    """Where a resistor is the feedback, a diode beside it limits."""
    parts = [
        R1,
        resistor("R2", "10 kohm", "S1", "VOUT"),
        diode("D1", "S1", "VOUT"),
        amplifier("U1", "GND", "S1", "VOUT"),
    ]
    structure = structure_of(parts)
    assert structure.conducting == structure.log_diodes == ()


def test_a_rectifier_has_no_log_diodes():
    """Diodes that take turns with the sign of the input are not log elements."""
    parts = [
        R1,
        diode("D1", "O1", "S1"),
        diode("D2", "N", "O1"),
        resistor("R2", "10 kohm", "S1", "N"),
        amplifier("U1", "GND", "S1", "O1"),
        resistor("R3", "10 kohm", "N", "M"),
        resistor("R4", "10 kohm", "M", "VOUT"),
        amplifier("U2", "GND", "M", "VOUT"),
    ]
    structure = structure_of(parts, BIPOLAR)
    assert structure.log_diodes == structure.junction_loops == ()
    assert {node.net for node in structure.summing_nodes} == {"S1", "M"}


def test_a_limiter_in_waiting_holds_nothing():
    """An amplifier whose only feedback is a diode against the normal current is not at work."""
    parts = [
        resistor("R1", "10 kohm", "VX", "N"),
        diode("D1", "N", "O1"),
        amplifier("U1", "VP", "N", "O1"),
        *transdiode(2, resistor("R2", "10 kohm", "N", "S2")),
    ]
    structure = structure_of(parts)
    assert structure.conducting == ("Q2",)
    assert [node.net for node in structure.summing_nodes] == ["S2"]


def test_complementary_log_transistors_of_an_alternating_input():
    """Of npn and pnp in parallel the direction of the current picks one, else the first in the file."""
    parts = [*transdiode(1, R1), pnp("Q2", "S1", "GND", "E1")]
    assert [log.part for log in structure_of(parts).log_transistors] == ["Q1"]
    assert [log.part for log in structure_of(parts, NEGATIVE).log_transistors] == ["Q2"]
    assert [log.part for log in structure_of(parts, BIPOLAR).log_transistors] == ["Q1"]


def test_a_reference_diode_without_amplifier_is_at_work():
    """A diode-connected transistor fed by a resistor or a source makes a junction voltage."""
    for feed in (
        resistor("RF", "100 kohm", "VREF", "N"),
        current_source("RF", "10 uA", "N", "VP"),
        photodiode("RF", "N", "GND"),
    ):
        parts = [
            feed,
            npn("Q1", "N", "N", "GND"),
            resistor("R2", "100 kohm", "N", "M"),
            resistor("R3", "10 kohm", "M", "VOUT"),
        ]
        assert structure_of([*parts, amplifier("U1", "GND", "M", "VOUT")]).conducting == ("Q1",)


@pytest.mark.parametrize(
    ("collector", "load", "amp"),
    [
        ([amplifier("U9", "GND", "X", "VOUT"), resistor("RF", "10 kohm", "X", "VOUT")], "summing", "U9"),
        ([resistor("RF", "10 kohm", "X", "VP"), amplifier("U9", "X", "VOUT", "VOUT")], "resistor", None),
        (
            [
                pnp("M1", "X", "X", "VP"),
                pnp("M2", "Y", "X", "VP"),
                amplifier("U9", "GND", "Y", "VOUT"),
                resistor("RF", "10 kohm", "Y", "VOUT"),
            ],
            "mirror",
            None,
        ),
    ],
    ids=["summing", "resistor", "mirror"],
)
def test_antilog_transistors_by_what_they_feed(collector, load, amp):
    """The collector may feed a summing node, a resistor or a mirror; the mirror itself is not antilog."""
    parts = [
        resistor("R2", "15 kohm", "VX", "B"),
        resistor("R3", "1 kohm", "B", "GND"),
        *transdiode(1, resistor("R1", "100 kohm", "VREF", "S1"), base="B"),
        npn("A1", "X", "GND", "E1"),
        *collector,
    ]
    assert structure_of(parts).antilog_transistors == (
        AntilogTransistor(part="A1", collector_net="X", load=load, drive="emitter", amplifier=amp),
    )


@pytest.mark.parametrize(
    ("base", "emitter", "drive"), [("O1", "GND", "base"), ("GND", "E2", "emitter"), ("O1", "E2", "both")]
)
def test_antilog_transistors_by_what_leads_them(base, emitter, drive):
    """Base, emitter or both may move with a log voltage."""
    parts = [
        R1,
        pnp("Q1", "S1", "GND", "O1"),
        amplifier("U1", "GND", "S1", "O1"),
        *transdiode(2, resistor("R2", "10 kohm", "VY", "S2")),
        npn("A1", "X", base, emitter),
        amplifier("U9", "GND", "X", "VOUT"),
        resistor("RF", "10 kohm", "X", "VOUT"),
    ]
    found = structure_of(parts).antilog_transistors
    assert [(antilog_one.part, antilog_one.drive) for antilog_one in found] == [("A1", drive)]
