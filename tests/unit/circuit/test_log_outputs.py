"""Junction loops that reach an output: slopes, gains, and what stands against what."""

import pytest
from circuits import (
    OUTPUT,
    USUAL,
    amplifier,
    design_of,
    difference,
    diode,
    inverting,
    log_ratio,
    npn,
    resistor,
    structure_of,
    transdiode,
    voltage_input,
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


def test_a_load_diode_at_the_output_is_no_loop():
    """A lamp driven by a log output has no part in it."""
    lamp = [resistor("R9", "1 kohm", "VOUT", "N"), diode("D1", "N", "GND")]
    loop = only_loop([*log_ratio(1, X1, Y1, "VOUT"), *lamp])
    assert loop.parts == ("Q1", "P1")


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
