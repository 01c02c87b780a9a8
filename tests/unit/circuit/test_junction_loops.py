"""Closed junction loops: which junctions, which way round, with what weight, and what they say."""

import pytest
from circuits import (
    OUTPUT,
    USUAL,
    amplifier,
    antilog,
    current_input,
    current_source,
    inverting,
    log_ratio,
    npn,
    photodiode,
    pnp,
    potentiometer,
    resistor,
    structure_of,
    transdiode,
    voltage_source,
    weights,
)

X1 = resistor("R1", "10 kohm", "VX", "S1")
Y1 = resistor("R2", "10 kohm", "VY", "W1")
REF1 = resistor("R2", "100 kohm", "VREF", "W1")


def only_loop(parts, nets=USUAL):
    """The one junction loop of a circuit."""
    (loop,) = structure_of(parts, nets).junction_loops
    return loop


def power_stage(*scaling):
    """Log ratio at L, what scales it to P, antilog pair."""
    return [
        *log_ratio(1, X1, REF1, "L"),
        *scaling,
        *antilog(3, resistor("R5", "100 kohm", "VREF", "S3"), base="P", out="VOUT"),
    ]


def test_four_junctions_multiply_and_divide():
    """Bases and emitters stacked: X·Y/Z, no resistor in the loop."""
    parts = [
        *transdiode(1, X1),
        *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"), base="E1"),
        *transdiode(3, resistor("R3", "10 kohm", "VZ", "S3")),
        npn("A4", "X4", "E3", "E2"),
        amplifier("U4", "GND", "X4", "VOUT"),
        resistor("R4", "10 kohm", "X4", "VOUT"),
    ]
    loop = only_loop(parts)
    assert weights(loop) == {"Q1": 1.0, "Q2": 1.0, "Q3": -1.0, "A4": -1.0}
    assert loop.translinear
    assert loop.level_shifts == loop.amplifiers == loop.outputs == ()
    assert loop.product_law == "I(Q1)·I(Q2) = I(Q3)·I(A4)"
    assert set(loop.pairings) == {(("Q1", "Q3"), ("Q2", "A4")), (("Q1", "A4"), ("Q2", "Q3"))}


def test_power_by_an_inverting_gain():
    """A gain of −3 between the pairs gives the antilog pair a third of the weight: Y = X to the −3."""
    loop = only_loop(power_stage(*inverting("U5", 3, "L", "P")))
    assert weights(loop) == pytest.approx({"Q1": 1.0, "P1": -1.0, "Q3": 1 / 3, "A3": -1 / 3})
    assert loop.product_law == "I(Q1)·I(Q3)^0.333 = I(P1)·I(A3)^0.333"
    assert loop.pairings == ((("Q1", "P1"), ("Q3", "A3")),)
    assert loop.translinear


def test_root_by_a_potentiometer_at_its_position():
    """Gain −(30 kohm ‖ 100 kohm)/20 kohm = −1.1538 at position 0.4 of 50 kohm, by hand."""
    scaling = [
        potentiometer("RV1", "50 kohm", 0.4, "L", "M", "P"),
        resistor("R9", "100 kohm", "M", "P"),
        amplifier("U5", "GND", "M", "P"),
    ]
    loop = only_loop(power_stage(*scaling))
    assert weights(loop)["Q3"] == pytest.approx(1 / (30e3 * 100e3 / 130e3 / 20e3))
    assert loop.level_shifts == ("RV1", "R9")


def test_power_by_two_taps_of_one_divider():
    """The log pair's base sees 1/2 of the output and the antilog pair's 1/4, so the latter weighs half."""
    log = log_ratio(1, X1, REF1, "O", base="B")
    divider = [
        resistor("R6", "2 kohm", "O", "B"),
        resistor("R7", "1 kohm", "B", "P"),
        resistor("R8", "1 kohm", "P", "GND"),
    ]
    loop = only_loop([*log, *divider, *antilog(3, resistor("R5", "100 kohm", "VREF", "S3"), base="P", out="VOUT")])
    assert weights(loop) == {"Q1": 1.0, "P1": -1.0, "Q3": -2.0, "A3": 2.0}


def test_six_junctions_through_two_level_shifts():
    """Two log ratios summed with 1/2 and 1/3 (10 over 20 and 30 kohm) lead an antilog pair."""
    shifts = [
        resistor("R5", "20 kohm", "L1", "M"),
        resistor("R6", "30 kohm", "L2", "M"),
        resistor("R7", "10 kohm", "M", "P"),
        amplifier("U5", "GND", "M", "P"),
    ]
    parts = [
        *log_ratio(1, X1, REF1, "L1"),
        *log_ratio(2, resistor("R3", "10 kohm", "VY", "S2"), resistor("R4", "100 kohm", "VREF", "W2"), "L2"),
        *shifts,
        *antilog(3, resistor("R8", "100 kohm", "VREF", "S3"), base="P", out="VOUT"),
    ]
    loop = only_loop(parts)
    assert weights(loop) == pytest.approx({"Q1": 1, "P1": -1, "Q2": 2 / 3, "P2": -2 / 3, "Q3": 2, "A3": -2})
    assert loop.level_shifts == ("R5", "R6", "R7")
    assert loop.pairings == ((("Q1", "P1"), ("Q2", "P2"), ("Q3", "A3")),)
    assert loop.product_law == "I(Q1)·I(Q2)^0.667·I(Q3)^2 = I(P1)·I(P2)^0.667·I(A3)^2"


def test_stacked_diode_connected_transistors_square():
    """Two junctions of one current against two others: X² = Y·Z."""
    parts = [
        X1,
        npn("Q1", "S1", "S1", "N"),
        npn("Q2", "N", "N", "O1"),
        amplifier("U1", "GND", "S1", "O1"),
        *transdiode(3, resistor("R3", "10 kohm", "VZ", "S3")),
        npn("A4", "X4", "E3", "O1"),
        amplifier("U4", "GND", "X4", "VOUT"),
        resistor("R4", "10 kohm", "X4", "VOUT"),
    ]
    loop = only_loop(parts)
    assert weights(loop) == {"Q1": 1.0, "Q2": 1.0, "Q3": -1.0, "A4": -1.0}
    assert loop.amplifiers == ("U1",)


def test_a_doubled_junction_stands_against_two():
    """A log voltage doubled by a stage of gain 2 is compared with two junctions in series."""
    parts = [
        *transdiode(1, X1),
        *inverting("U5", 2, "E1", "P"),
        npn("Q2", "P2", "P", "N2"),
        resistor("R6", "1 kohm", "VP", "P2"),
        npn("Q3", "X3", "N2", "GND"),
        current_source("I2", "10 uA", "GND", "N2"),
        amplifier("U3", "GND", "X3", "VOUT"),
        resistor("R7", "10 kohm", "X3", "VOUT"),
    ]
    loop = only_loop(parts)
    assert weights(loop) == {"Q1": 1.0, "Q2": -0.5, "Q3": -0.5}
    assert loop.pairings == ((("Q1", "Q2"), ("Q1", "Q3")),)


def test_junctions_without_amplifiers():
    """A translinear loop of transistors alone, fed by currents, is found like any other."""
    nets = {"IX": current_input(), "VOUT": OUTPUT}
    parts = [
        npn("Q1", "IX", "IX", "N"),
        npn("Q2", "N", "N", "GND"),
        npn("Q3", "VP", "IX", "W"),
        current_source("I3", "10 uA", "GND", "W"),
        npn("Q4", "X", "W", "GND"),
        amplifier("U4", "GND", "X", "VOUT"),
        resistor("R4", "10 kohm", "X", "VOUT"),
    ]
    loop = only_loop(parts, nets)
    assert weights(loop) == {"Q1": 1.0, "Q2": 1.0, "Q3": -1.0, "Q4": -1.0}
    assert loop.translinear


def test_npn_and_pnp_in_one_loop():
    """A pnp log transistor leads the base of an npn: both junctions count, against each other."""
    parts = [
        X1,
        pnp("Q1", "S1", "GND", "O1"),
        amplifier("U1", "GND", "S1", "O1"),
        npn("A2", "X2", "O1", "GND"),
        amplifier("U2", "GND", "X2", "VOUT"),
        resistor("R2", "10 kohm", "X2", "VOUT"),
    ]
    loop = only_loop(parts)
    assert weights(loop) == {"Q1": 1.0, "A2": -1.0}
    assert loop.product_law == "I(Q1) = I(A2)"


def test_an_input_leads_an_antilog_pair():
    """The pair is compared; what it adds up to is the divided input (1/16 of it)."""
    divider = [resistor("R6", "15 kohm", "VX", "B"), resistor("R7", "1 kohm", "B", "GND")]
    loop = only_loop([*divider, *antilog(1, resistor("R1", "100 kohm", "VREF", "S1"), base="B", out="VOUT")])
    assert weights(loop) == {"Q1": 1.0, "A1": -1.0}
    assert (loop.inputs, loop.compensated, loop.translinear) == (("VX",), True, False)
    assert loop.level_shifts == ("R6", "R7")
    assert loop.product_law == "I(Q1) = I(A1)·exp(q/kT·0.0625·VX)"


def test_a_single_antilog_transistor_is_uncompensated():
    """One junction led by an input, with nothing against it."""
    divider = [resistor("R6", "15 kohm", "VX", "B"), resistor("R7", "1 kohm", "B", "GND")]
    stage = [npn("A1", "X", "B", "GND"), amplifier("U1", "GND", "X", "VOUT"), resistor("R1", "10 kohm", "X", "VOUT")]
    loop = only_loop([*divider, *stage])
    assert (loop.parts, loop.inputs, loop.compensated) == (("A1",), ("VX",), False)


def test_a_constant_in_the_loop_is_named():
    """A source in the base circuit of a pair is a voltage that its junctions add up to."""
    parts = [
        voltage_source("VS", "100 mV", "B", "GND"),
        *antilog(1, photodiode("PD", "S1", "GND"), base="B", out="VOUT"),
    ]
    loop = only_loop(parts)
    assert (loop.references, loop.inputs, loop.translinear) == (("VS",), (), False)


def test_a_mirror_is_a_loop_of_two():
    """Two transistors base to base are compared though they make no log voltage."""
    parts = [npn("M1", "IX", "IX", "GND"), npn("M2", "X", "IX", "GND")]
    load = [amplifier("U1", "GND", "X", "VOUT"), resistor("R1", "10 kohm", "X", "VOUT")]
    loop = only_loop([*parts, *load], {"IX": current_input(), "VOUT": OUTPUT})
    assert loop.product_law == "I(M1) = I(M2)"


def test_bias_of_single_transistors_is_no_loop():
    """Transistors that a divider biases through emitter resistors are current sources, not compared."""
    bias = [resistor("R1", "10 kohm", "VP", "B"), resistor("R2", "5 kohm", "B", "VN")]
    sources = [
        part
        for n in "12"
        for part in (
            npn(f"Q{n}", f"A{n}", "B", f"E{n}"),
            resistor(f"RE{n}", "1 kohm", f"E{n}", "VN"),
            resistor(f"RL{n}", "1 kohm", f"A{n}", "VP"),
        )
    ]
    assert structure_of([*bias, *sources]).junction_loops == ()


def test_bias_of_stacked_junctions_is_no_loop():
    """A divider across two junctions in series sets a current, it compares nothing."""
    bias = [
        resistor("R1", "10 kohm", "VP", "B"),
        resistor("R2", "1 kohm", "B", "GND"),
        resistor("R3", "1 kohm", "VP", "C"),
    ]
    assert structure_of([*bias, npn("Q1", "C", "B", "N"), npn("Q2", "VP", "N", "GND")]).junction_loops == ()


def test_a_loop_with_a_junction_missing_is_uncompensated():
    """Two log junctions against one antilog junction: the loop is there, and it does not cancel."""
    parts = [
        *transdiode(1, X1),
        *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"), base="E1"),
        npn("A4", "X4", "GND", "E2"),
        amplifier("U4", "GND", "X4", "VOUT"),
        resistor("R4", "10 kohm", "X4", "VOUT"),
    ]
    loop = only_loop(parts)
    assert weights(loop) == {"Q1": 1.0, "Q2": 1.0, "A4": -1.0}
    assert (loop.compensated, loop.translinear, loop.pairings) == (False, False, ())


def test_the_drop_in_a_pair_of_unequal_currents_is_named():
    """A pair whose difference stands across a resistor is compared, and the resistor is a drop."""
    parts = [
        pnp("M1", "B", "B", "VP"),
        pnp("M2", "C", "B", "VP"),
        npn("Q3", "B", "C", "E"),
        npn("Q4", "C", "C", "VN"),
        resistor("R1", "600 ohm", "E", "VN"),
    ]
    mirror, pair = structure_of(parts).junction_loops
    assert (mirror.parts, pair.parts) == (("M1", "M2"), ("Q3", "Q4"))
    assert (pair.drops, pair.translinear, pair.compensated) == (("R1",), False, True)


def test_a_log_voltage_that_makes_a_current_is_still_compared():
    """The log of a log: the first pair's voltage feeds the second stage through a resistor."""
    second = log_ratio(2, resistor("R3", "10 kohm", "L", "S2"), resistor("R4", "100 kohm", "VREF", "W2"), "VOUT")
    first, last = structure_of([*log_ratio(1, X1, REF1, "L"), *second]).junction_loops
    assert (first.parts, first.drops, first.outputs) == (("Q1", "P1"), ("R3",), ())
    assert (last.parts, last.outputs) == (("Q2", "P2"), ("VOUT",))


def test_a_log_output_inside_a_longer_loop_is_reported_beside_it():
    """An intermediate output does not cut the loop through it in two."""
    parts = [
        *log_ratio(1, X1, REF1, "VOUT"),
        *antilog(3, resistor("R5", "100 kohm", "VREF", "S3"), base="VOUT", out="Y"),
    ]
    output, loop = structure_of(parts).junction_loops
    assert (output.parts, output.outputs) == (("Q1", "P1"), ("VOUT",))
    assert (loop.parts, loop.translinear) == (("Q1", "P1", "Q3", "A3"), True)


def test_shared_log_pair_of_two_antilog_pairs():
    """Two antilog pairs on one log voltage are each compared with the log pair, not with each other."""
    parts = [
        *log_ratio(1, X1, REF1, "L"),
        *antilog(3, resistor("R5", "100 kohm", "VREF", "S3"), base="L", out="VOUT"),
        *antilog(4, resistor("R6", "100 kohm", "VREF", "S4"), base="L", out="Y"),
    ]
    first, second = structure_of(parts).junction_loops
    assert first.parts == ("Q1", "P1", "Q3", "A3")
    assert second.parts == ("Q1", "P1", "Q4", "A4")
