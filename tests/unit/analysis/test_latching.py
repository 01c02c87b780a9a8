"""Second stable operating points: found where they are, and nothing where a circuit has but one."""

import itertools

import numpy as np
import pytest
from designs import PINS, SELF_BIASED, board
from pieces import amplifier, capacitor, resistor, review_of, transistor

from rulecheck.analysis import latching
from rulecheck.analysis.latching import corners, find_latching
from rulecheck.analysis.latching_starts import PUSH, Push, from_faults
from rulecheck.analysis.review import Review
from rulecheck.testing import design_from

LIMIT = 14.0  # V: what the amplifier of these tests reaches on 15 V
SHARE = 1 / 11


def comparator(low, high, i=""):
    """Net and parts of an amplifier with 1/11 of its output fed back to IN+, its input X at IN-."""
    net = f'X{i} = {{ role = "input", drive = "voltage", range = ["{low} V", "{high} V"] }}\n'
    ends = resistor(f"R1{i}", f"Y{i}", f"P{i}", 10e3) + resistor(f"R2{i}", f"P{i}", "GND", 1e3)
    return net, amplifier(f"U1{i}", f"P{i}", f"X{i}", f"Y{i}") + ends


PRECISE = 'kind = "op-amp", model = "bifet-precision"'
LOG_RATIO = f"""
U1 = {{ {PRECISE}, pins = {{ "IN+" = "GND", IN- = "S", OUT = "O", {PINS} }} }}
U2 = {{ {PRECISE}, pins = {{ "IN+" = "T", IN- = "N", OUT = "Y", {PINS} }} }}
"""


def base_driven(tail):
    """A log-ratio stage: U1 drives the emitters of the pair through `tail`, U2 the base of the reference's."""
    return review_of(
        'X = { role = "input", drive = "voltage", range = ["0.1 V", "10 V"] }\nY = { role = "output" }\n',
        LOG_RATIO,
        transistor("Q1", "S", "GND", "E", ', package = "M"') + transistor("Q2", "T", "B", "E", ', package = "M"'),
        resistor("R1", "X", "S", 100e3) + resistor("RE", "O", "E", tail) + capacitor("C1", "O", "S", 220e-12),
        resistor("R2", "VREF", "T", 250e3) + resistor("R3", "N", "GND", 100e3) + capacitor("C2", "Y", "N", 1e-9),
        resistor("R4", "Y", "B", 1.5e3) + resistor("R5", "B", "GND", 100.0),
    )


def test_an_amplifier_with_positive_feedback_has_a_point_at_either_limit():
    """Inside its thresholds of 14 V/11 both limits are found, and not the third solution, which is no stable one."""
    found = find_latching(review_of(*comparator(-1.0, 1.0)))
    assert found.lost == 0
    for index, x in enumerate(found.points.conditions.values["X"]):
        here = [second for second in found.found if second.index == index]
        assert sorted(s.voltages["Y"] for s in here) == pytest.approx([-LIMIT, LIMIT])
        assert found.points.voltage("Y")[index] == pytest.approx(x / SHARE, rel=1e-3)
        assert all(s.voltages["P"] == pytest.approx(s.voltages["Y"] * SHARE) for s in here)
        assert {s.states["U1"] for s in here} == {"low", "high"}
        assert {s.part for s in here} == {"U1"}


def test_beyond_its_thresholds_there_is_one_point():
    """The same amplifier with inputs of 1.5 V, beyond 14 V/11, has nothing to choose."""
    assert find_latching(review_of(*comparator(1.5, 2.0))).found == ()


def test_two_transistors_that_hold_each_other():
    """Either conducts and cuts the other off: both states are found, by cutting one off and letting it go."""
    pair = "".join(
        transistor(f"Q{i}", f"C{i}", f"B{i}", "GND")
        + resistor(f"RC{i}", "VP", f"C{i}", 10e3)
        + resistor(f"RB{i}", f"C{i}", f"B{3 - i}", 47e3)
        for i in (1, 2)
    )
    found = find_latching(review_of("", pair))
    for index in range(found.points.conditions.size):
        on = {s.part: s.voltages["C1"] < s.voltages["C2"] for s in found.found if s.index == index}
        assert on == {"Q1": False, "Q2": True}
    assert {s.start for s in found.found} == {"Q1 cut off", "Q2 cut off"}


WITHOUT_START = "\n".join(line for line in SELF_BIASED.splitlines() if not line.startswith("RS"))
LEAKY = ', leakage_saturation_current = "1 pA", forward_beta'


@pytest.mark.parametrize(("text", "points"), [(WITHOUT_START, 2), (SELF_BIASED, 0)])
def test_a_self_biased_reference_without_a_start_up_path_may_stay_off(text, points):
    """Leakage in the bases takes the gain of the loop at no current; a resistor of 20 Mohm starts it."""
    found = find_latching(Review(design_from(text.replace(", forward_beta", LEAKY))))
    assert len(found.found) == points
    for second in found.found:
        assert second.voltages["A"] < 0.05 < 0.3 < found.points.voltage("A")[second.index]


@pytest.mark.parametrize(("tail", "latches"), [(22e3, True), (4.7e3, False)])
def test_a_base_driven_log_transistor_may_saturate_for_good(tail, latches):
    """A weak tail lets the base lift the emitters, so that the saturated collector holds U2 at its limit.

    The output is then at its positive limit at either end of the input; a stronger tail leaves one solution.
    """
    review = base_driven(tail)
    assert (review.loops.rightmost < 0).all()
    found = find_latching(review)
    assert {s.index for s in found.found} == (set(range(found.points.conditions.size)) if latches else set())
    for second in found.found:
        assert (second.states["U1"], second.states["U2"]) == ("low", "high")
        assert second.voltages["T"] > 0
        assert second.voltages["Y"] > 12 > 2 > abs(found.points.voltage("Y")[second.index])


def test_currents_of_a_latched_stage_add_up():
    """What the amplifier drives into the base, with the collector's current, is what the tail draws (Kirchhoff)."""
    for second in find_latching(base_driven(22e3)).found:
        v = second.voltages
        base = (v["Y"] - v["B"]) / 1.5e3 - v["B"] / 100
        collector = (v["VREF"] - v["T"]) / 250e3
        assert base + collector == pytest.approx((v["E"] - v["O"]) / 22e3, rel=1e-4)


def test_a_second_point_has_its_own_heat():
    """An amplifier at its limit warms itself, and its bias current doubles with every 10 K of that."""
    warm = ', theta_ja = "200 K/W", bias_current = "1 uA", bias_current_doubling = "10 K"'
    parts = resistor("R1", "Y", "P", 10e3) + resistor("R2", "P", "GND", 1e3) + resistor("RL", "Y", "GND", 1e3)
    net, _ = comparator(-1.0, 1.0)
    found = find_latching(review_of(net, parts, amplifier("U1", "P", "X", "Y", warm)))
    for second in found.found:
        y, p = second.voltages["Y"], second.voltages["P"]
        power = (15 - abs(y)) * (abs(y) / 1e3 + abs(y - p) / 10e3)
        heat = found.points.conditions.values["ambient"][second.index] - 298.15 + 200 * power
        assert power > 0.014
        assert p == pytest.approx(y * SHARE - 1e-6 * 2 ** (heat / 10) * 10e3 * SHARE, abs=1e-8)
    assert len(found.found) == 2 * found.points.conditions.size


def test_sound_channels_have_one_point_each_and_every_start_leads_there():
    """Log-ratio stages driven at the emitter: no second solution, and no start that settles nowhere."""
    found = find_latching(Review(design_from(board(2))))
    assert found.found == ()
    assert found.starts > 50
    assert found.lost == 0


def test_equal_channels_have_their_own_names():
    """A latch that stands on the board twice is told twice, each with the names of its place."""
    nets, parts = zip(*(comparator(-1.0, 1.0, i) for i in "ab"), strict=True)
    found = find_latching(review_of("".join(nets), *parts)).found
    for i in "ab":
        own = [s for s in found if s.part == f"U1{i}"]
        assert {s.voltages[f"Y{i}"] for s in own} == {-LIMIT, LIMIT}
        assert {s.start for s in own} == {f"U1{i} pushed to its {end} limit" for end in ("low", "high")}


def test_fault_states_are_starts_at_the_ends_of_the_inputs():
    """Each goes to the conditions of its own ambient, and is a state of the circuit without clamps."""
    review = Review(design_from(board(1)))
    points, faults = review.solve(corners(review.design, review.typical)), review.faults
    solution, fault = points.placed[0].solution, faults.placed[0].solution
    starts = from_faults(solution, fault)
    rows = starts.cause
    assert len(rows) == faults.conditions.size * 2  # low and high end of one input
    heat = solution.conditions.values["ambient"][starts.rows]
    assert (heat == fault.conditions.values["ambient"][rows]).all()
    for net in ("S0", "E0", "Y0"):
        assert (starts.state.x[:, solution.network.nodes[net]] == fault.voltage(net)[rows]).all()


def test_a_point_that_a_fault_leads_to_is_found_from_there(monkeypatch):
    """Without the push that would find it too: an input of 5 V leaves the amplifier at its low limit."""
    up = Push("U1", "pushed to its high limit", PUSH)
    monkeypatch.setattr(latching, "pushes_of", lambda network: (up,))
    net, parts = comparator(-1.0, 1.0)
    found = find_latching(review_of(net.replace(" }", ', survives = ["-5 V", "5 V"] }'), parts)).found
    starts = {s.start: (s.part, s.voltages["Y"]) for s in found}
    assert starts["X at 5 V, all supplies present"] == (None, pytest.approx(-LIMIT))
    assert starts["U1 pushed to its high limit"] == ("U1", pytest.approx(LIMIT))


def test_conditions_stay_few_with_many_inputs():
    """All corners as long as they are few, then all at one end and each alone."""
    few, many = (
        review_of("".join(comparator(-1.0, 1.0, i)[0] for i in range(count)), resistor("R", "X0", "GND", 1e3))
        for count in (3, 9)
    )
    conditions = corners(few.design, few.typical)
    names = [f"X{i}" for i in range(3)]
    there = set(zip(*(conditions.values[n] for n in names), strict=True))
    assert there == set(itertools.product((-1.0, 1.0), repeat=3))
    assert conditions.size == 16
    assert corners(many.design, many.typical).size == 2 * (2 + 2 * 9)
    assert np.unique(conditions.values["ambient"]).size == 2
