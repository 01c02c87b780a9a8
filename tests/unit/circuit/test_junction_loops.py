"""Junction loops: which junctions, which way round, with what weight, and what they say."""

import pytest
from circuits import (
    OUTPUT,
    USUAL,
    amplifier,
    antilog,
    current_input,
    current_source,
    design_of,
    diode,
    log_ratio,
    npn,
    photodiode,
    pnp,
    potentiometer,
    resistor,
    structure_of,
    transdiode,
    voltage_input,
    voltage_source,
    weights,
)

from rulecheck.circuit.graph import build_graph
from rulecheck.circuit.structure import find_structure

X1 = resistor("R1", "10 kohm", "VX", "S1")
Y1 = resistor("R2", "10 kohm", "VY", "W1")
REF1 = resistor("R2", "100 kohm", "VREF", "W1")


def only_loop(parts, nets=USUAL):
    """The one junction loop of a circuit."""
    (loop,) = structure_of(parts, nets).junction_loops
    return loop


def inverting(ref, gain, a, out):
    """Inverting stage of a gain, from net `a` to `out`."""
    return [
        resistor(f"RI{ref}", "10 kohm", a, f"M{ref}"),
        resistor(f"RO{ref}", f"{10 * gain} kohm", f"M{ref}", out),
        amplifier(ref, "GND", f"M{ref}", out),
    ]


def difference(ref, a, b, out, gain=1, foot="GND"):
    """Difference stage: `out` is `gain` times `b` less `a`, upon `foot`."""
    return [
        resistor(f"RA{ref}", "10 kohm", a, f"N{ref}"),
        resistor(f"RB{ref}", f"{10 * gain} kohm", f"N{ref}", out),
        resistor(f"RC{ref}", "10 kohm", b, f"P{ref}"),
        resistor(f"RD{ref}", f"{10 * gain} kohm", f"P{ref}", foot),
        amplifier(ref, f"P{ref}", f"N{ref}", out),
    ]


def test_shared_emitter_pair_reaching_an_output():
    """Two transistors with a shared emitter give the log of the ratio of their currents."""
    loop = only_loop(log_ratio(1, X1, Y1, "VOUT"))
    assert weights(loop) == {"Q1": 1.0, "P1": -1.0}
    assert loop.outputs == ("VOUT",)
    assert (loop.gain, loop.compensated, loop.translinear) == (1.0, True, False)
    assert loop.pairings == ((("Q1", "P1"),),)
    assert loop.product_law == "VOUT = kT/q·ln(I(Q1)/I(P1))"


def test_gain_stages_scale_the_output():
    """Inverting by 16 (160 kohm over 10 kohm) swaps the currents and multiplies the slope."""
    loop = only_loop([*log_ratio(1, X1, Y1, "L"), *inverting("U5", 16, "L", "VOUT")])
    assert loop.gain == -16.0
    assert loop.level_shifts == ("RIU5", "ROU5")
    assert loop.amplifiers == ("U5",)
    assert loop.product_law == "VOUT = 16·kT/q·ln(I(P1)/I(Q1))"


def test_base_driven_pair_behind_a_divider():
    """A divider of 15.7 to 1 before the base gives a slope of 16.7 times kT/q (1 + 15.7/1)."""
    parts = [
        *transdiode(1, X1, emitter="T"),
        resistor("R2", "100 kohm", "VREF", "S2"),
        npn("Q2", "S2", "B2", "T"),
        resistor("R3", "15.7 kohm", "VOUT", "B2"),
        resistor("R4", "1 kohm", "B2", "GND"),
        amplifier("U2", "S2", "GND", "VOUT"),
    ]
    loop = only_loop(parts)
    assert loop.gain == pytest.approx(-16.7)
    assert loop.level_shifts == ("R3", "R4")
    assert loop.product_law == "VOUT = 16.7·kT/q·ln(I(Q2)/I(Q1))"


def test_difference_amplifier_of_two_log_stages():
    """A difference amplifier sets two separate log junctions against each other."""
    stages = [*transdiode(1, X1), *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"))]
    loop = only_loop([*stages, *difference("U3", "E1", "E2", "VOUT", gain=4)])
    assert weights(loop) == {"Q1": 1.0, "Q2": -1.0}
    assert loop.gain == 4.0
    assert loop.level_shifts == ("RAU3", "RBU3", "RCU3", "RDU3")
    assert loop.drops == ()


def test_drops_of_emitter_resistors_stay_in_the_relation():
    """Taken from the amplifiers' outputs the log voltages bring their emitter resistors' drops along."""
    stages = [*transdiode(1, X1), *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"))]
    loop = only_loop([*stages, *difference("U3", "O1", "O2", "VOUT")])
    assert weights(loop) == {"Q1": 1.0, "Q2": -1.0}
    assert loop.drops == ("RE1", "RE2")
    assert loop.level_shifts == ("RAU3", "RBU3", "RCU3", "RDU3")
    assert loop.product_law == "VOUT = kT/q·ln(I(Q1)/I(Q2)) + 2.2 kohm·I(Q1) − 2.2 kohm·I(Q2)"


def test_three_amplifier_difference_stage():
    """Gain 1 + 2·10k/1k = 21 of the cross-coupled pair of amplifiers, by hand."""
    stages = [*transdiode(1, X1), *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"))]
    first = [
        amplifier("UA", "E1", "NA", "OA"),
        amplifier("UB", "E2", "NB", "OB"),
        resistor("RG", "1 kohm", "NA", "NB"),
        resistor("RA", "10 kohm", "OA", "NA"),
        resistor("RB", "10 kohm", "OB", "NB"),
    ]
    loop = only_loop([*stages, *first, *difference("UC", "OA", "OB", "VOUT")])
    assert loop.gain == 21.0
    assert {"RG", "RA", "RB"} <= set(loop.level_shifts)


def test_feedback_through_a_t_of_resistors():
    """A T of 10k, 1k to ground and 10k over an input of 10k gives −(10 + 10 + 10·10/1)/10 = −12, by hand."""
    tee = [
        resistor("R3", "10 kohm", "L", "M"),
        resistor("R4", "10 kohm", "M", "K"),
        resistor("R5", "1 kohm", "K", "GND"),
        resistor("R6", "10 kohm", "K", "VOUT"),
        amplifier("U5", "GND", "M", "VOUT"),
    ]
    loop = only_loop([*log_ratio(1, X1, Y1, "L"), *tee])
    assert loop.gain == -12.0
    assert loop.level_shifts == ("R3", "R4", "R5", "R6")


def test_a_single_log_stage_is_uncompensated():
    """One junction reaches the output with nothing against it."""
    loop = only_loop([X1, npn("Q1", "S1", "GND", "VOUT"), amplifier("U1", "GND", "S1", "VOUT")])
    assert (loop.parts, loop.outputs, loop.compensated, loop.pairings) == (("Q1",), ("VOUT",), False, ())
    assert loop.product_law == "VOUT = −kT/q·ln(I(Q1)/I_S(Q1))"


def test_a_single_log_stage_behind_an_emitter_resistor():
    """The output of a log amplifier before its emitter resistor holds the junction and the drop."""
    parts = [*transdiode(1, X1), resistor("R9", "10 kohm", "O1", "VOUT")]
    loop = only_loop(parts, {**USUAL, "VOUT": {**OUTPUT, "load": "10 kohm"}})
    assert (loop.gain, loop.drops, loop.compensated) == (-0.5, ("RE1",), False)


def test_two_junctions_of_unequal_weight_are_uncompensated():
    """A difference amplifier that weighs one side twice leaves a junction over."""
    stages = [*transdiode(1, X1), *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"))]
    adder = [
        resistor("R3", "10 kohm", "E1", "M"),
        resistor("R4", "20 kohm", "N", "M"),
        resistor("R5", "10 kohm", "M", "VOUT"),
        amplifier("U5", "GND", "M", "VOUT"),
    ]
    loop = only_loop([*stages, *inverting("U4", 1, "E2", "N"), *adder])
    assert weights(loop) == {"Q1": 1.0, "Q2": -0.5}
    assert not loop.compensated
    assert loop.pairings == ()
    assert "I_S(Q1)" in loop.product_law


def test_an_imbalance_of_resistors_does_not_spoil_the_comparison():
    """Resistors a per cent apart leave a pair compensated and bring in no further junction."""
    stages = [*transdiode(1, X1), *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"))]
    parts = [p for p in difference("U3", "E1", "E2", "VOUT") if p[0] != "RDU3"]
    loop = only_loop([*stages, *parts, resistor("RDU3", "10.1 kohm", "PU3", "GND")])
    assert loop.compensated
    assert loop.parts == ("Q1", "Q2")


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


def power_stage(*scaling):
    """Log ratio at L, what scales it to P, antilog pair."""
    return [
        *log_ratio(1, X1, REF1, "L"),
        *scaling,
        *antilog(3, resistor("R5", "100 kohm", "VREF", "S3"), base="P", out="VOUT"),
    ]


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


def test_log_diodes_keep_their_emission_coefficient():
    """The slope of a diode pair is its emission coefficient (1.8 in the test's catalogue) times kT/q."""
    stages = [
        X1,
        diode("D1", "S1", "O1"),
        amplifier("U1", "GND", "S1", "O1"),
        resistor("R2", "10 kohm", "VY", "S2"),
        diode("D2", "S2", "O2"),
        amplifier("U2", "GND", "S2", "O2"),
    ]
    loop = only_loop([*stages, *difference("U3", "O1", "O2", "VOUT")])
    assert weights(loop) == {"D1": 1.0, "D2": -1.0}
    assert loop.product_law == "VOUT = 1.8·kT/q·ln(I(D1)/I(D2))"


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


def test_an_output_upon_a_mid_rail():
    """A difference amplifier that stands on half the supply adds it to the log ratio."""
    nets = {**USUAL, "VP": {"role": "supply", "voltage": "5 V"}, "VN": {"role": "ground"}}
    parts = [
        resistor("R8", "10 kohm", "VP", "D"),
        resistor("R9", "10 kohm", "D", "GND"),
        amplifier("U9", "D", "MID", "MID"),
        X1,
        npn("Q1", "S1", "MID", "E1"),
        amplifier("U1", "MID", "S1", "E1"),
        resistor("R2", "10 kohm", "VREF", "S2"),
        npn("Q2", "S2", "MID", "E2"),
        amplifier("U2", "MID", "S2", "E2"),
        *difference("U3", "E1", "E2", "VOUT", gain=16, foot="MID"),
    ]
    assert only_loop(parts, nets).product_law == "VOUT = 16·kT/q·ln(I(Q1)/I(Q2)) + 0.5·VP"


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


def test_a_load_diode_at_the_output_is_no_loop():
    """A lamp driven by a log output has no part in it."""
    lamp = [resistor("R9", "1 kohm", "VOUT", "N"), diode("D1", "N", "GND")]
    loop = only_loop([*log_ratio(1, X1, Y1, "VOUT"), *lamp])
    assert loop.parts == ("Q1", "P1")


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


def test_two_outputs_of_one_pair_are_one_loop():
    """A pair that reaches two outputs is reported once with both laws."""
    nets = {**USUAL, "LOG": OUTPUT}
    loop = only_loop([*log_ratio(1, X1, REF1, "LOG"), *inverting("U5", 16, "LOG", "VOUT")], nets)
    assert loop.outputs == ("VOUT", "LOG")
    assert loop.product_law == "VOUT = 16·kT/q·ln(I(P1)/I(Q1)); LOG = kT/q·ln(I(Q1)/I(P1))"


def test_a_required_net_is_an_output():
    """A net that a requirement names is an output whatever its role."""
    parts = [X1, npn("Q1", "S1", "GND", "L"), amplifier("U1", "GND", "S1", "L")]
    design = design_of(
        {"VX": voltage_input()}, parts, **{"requirements.log": {"output": "L", "phase_margin": "45 deg"}}
    )
    (loop,) = find_structure(design, build_graph(design)).junction_loops
    assert loop.outputs == ("L",)


def test_channels_are_compared_with_their_common_reference():
    """Of the equivalent bases the loops close at the reference transistor, wherever it stands in the file."""
    nets = {**USUAL, "Y2": OUTPUT, "Y3": OUTPUT}
    channels = [
        part
        for n, source, out in (("1", "VX", "VOUT"), ("2", "VY", "Y2"), ("3", "VZ", "Y3"))
        for part in (
            *transdiode(n, resistor(f"R{n}", "10 kohm", source, f"S{n}")),
            *difference(f"D{n}", f"E{n}", "E0", out),
        )
    ]
    reference = transdiode("0", resistor("R0", "100 kohm", "VREF", "S0"))
    for parts in ([*reference, *channels], [*channels, *reference]):
        found = structure_of(parts, nets).junction_loops
        assert {frozenset(loop.parts) for loop in found} == {frozenset({"Q0", f"Q{n}"}) for n in "123"}


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


def test_base_stoppers_are_not_level_shifts():
    """A resistor in a base lead carries no current here and does not weigh."""
    parts = [
        *transdiode(1, X1, base="B1", emitter="T"),
        resistor("RB1", "100 ohm", "B1", "VOUT"),
        Y1,
        npn("P1", "W1", "B2", "T"),
        resistor("RB2", "100 ohm", "B2", "GND"),
        amplifier("V1", "GND", "W1", "VOUT"),
    ]
    loop = only_loop(parts)
    assert weights(loop) == {"Q1": 1.0, "P1": -1.0}
    assert loop.level_shifts == loop.drops == ()


def test_bulk_compensation_leaves_the_pair_compensated():
    """A little of the input added at a base (1/1001 of it) is named and leaves the pair as it is."""
    parts = [
        *transdiode(1, X1, base="VOUT", emitter="T"),
        Y1,
        npn("P1", "W1", "B", "T"),
        resistor("R8", "10 kohm", "VX", "B"),
        resistor("R9", "10 ohm", "B", "GND"),
        amplifier("V1", "GND", "W1", "VOUT"),
    ]
    loop = only_loop(parts)
    assert (loop.compensated, loop.inputs, loop.outputs) == (True, ("VX",), ("VOUT",))
    assert loop.product_law.startswith("VOUT = kT/q·ln(I(Q1)/I(P1)) + ")


def test_a_faulty_amplifier_takes_its_loops_with_it():
    """With the inputs of a difference amplifier swapped nothing is held, so nothing is claimed."""
    stages = [*transdiode(1, X1), *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"))]
    parts = [*stages, *difference("U3", "E1", "E2", "VOUT")[:-1], amplifier("U3", "NU3", "PU3", "VOUT")]
    assert structure_of(parts).junction_loops == ()
