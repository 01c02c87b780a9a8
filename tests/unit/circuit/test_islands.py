"""Islands and which of them are the same circuit."""

import pytest
from circuits import (
    OUTPUT,
    USUAL,
    VREF,
    amplifier,
    capacitor,
    current_input,
    design_of,
    log_ratio,
    npn,
    resistor,
    transdiode,
    voltage_input,
    voltage_source,
)

from rulecheck.circuit.graph import build_graph
from rulecheck.circuit.islands import Island, equal_islands, islands


def islands_of(parts, nets=USUAL, **tables):
    """Cut the design of these parts into islands."""
    design = design_of(nets, parts, **tables)
    return islands(design, build_graph(design))


def groups_of(parts, nets=USUAL, **tables):
    """Group the islands of the design of these parts."""
    design = design_of(nets, parts, **tables)
    graph = build_graph(design)
    return equal_islands(design, graph, islands(design, graph))


def channel(n, source="VX", value="10 kohm", **more):
    """A log stage of its own."""
    return transdiode(n, resistor(f"R{n}", value, source, f"S{n}"), **more)


def test_the_circuit_is_cut_at_ground_and_ideal_sources():
    """Two log stages that share ground, supplies and an input are two islands."""
    first, second = islands_of([*channel(1), *channel(2)])
    assert first == Island(
        parts=("R1", "Q1", "U1", "RE1", "C1"), nets=("S1", "E1", "O1"), boundary=("GND", "VP", "VN", "VX")
    )
    assert second.parts == ("R2", "Q2", "U2", "RE2", "C2")


def test_ordinary_nets_join():
    """A filtered supply rail is an ordinary net and joins what stands on it."""
    parts = [*channel(1), *channel(2), resistor("RF", "10 ohm", "VP", "RAIL"), capacitor("CF", "RAIL", "GND")]
    rail = [(r, {**t, "pins": {**t["pins"], "V+": "RAIL"}} if r in ("U1", "U2") else t) for r, t in parts]
    assert len(islands_of(rail)) == 1


@pytest.mark.parametrize(
    ("table", "count"),
    [
        (voltage_input(), 2),
        (voltage_input(source_resistance="100 ohm"), 1),
        (current_input(), 1),
        (OUTPUT, 1),
        (VREF, 2),
    ],
    ids=["voltage input", "source resistance", "current input", "output", "reference"],
)
def test_only_ideal_voltages_cut(table, count):
    """An input with source resistance, a current input and an output join; an ideal voltage cuts."""
    assert len(islands_of([*channel(1, "N"), *channel(2, "N")], {**USUAL, "N": table})) == count


def test_a_voltage_source_part_cuts():
    """A net that a voltage source holds against ground cuts too; the source is an island by itself."""
    parts = [voltage_source("VS", "1 V", "B", "GND"), *channel(1, base="B"), *channel(2, base="B")]
    assert [island.parts[0] for island in islands_of(parts)] == ["VS", "R1", "R2"]


def test_a_part_between_held_nets_is_an_island_by_itself():
    """A decoupling capacitor joins nothing."""
    assert islands_of([capacitor("C1", "VP", "GND")]) == (Island(("C1",), (), ("GND", "VP")),)


def test_equal_channels_are_found_with_their_correspondence():
    """Channels on different inputs of the same range are the same circuit, part for part."""
    (group,) = groups_of([*channel(1, "VX"), *channel(2, "VY"), *channel(3, "VZ")])
    assert [copy.island.parts[0] for copy in group] == ["R1", "R2", "R3"]
    assert group[0].parts["Q1"] == "Q1"
    assert group[2].parts == {"R1": "R3", "Q1": "Q3", "U1": "U3", "RE1": "RE3", "C1": "C3"}
    assert group[2].nets["VX"] == "VZ"
    assert group[2].nets["S1"] == "S3"


def test_resistors_may_lie_either_way_round():
    """Turning a resistor round does not make a different circuit; turning a pair's transistor does."""
    turned = [resistor("R2", "10 kohm", "S2", "VX") if ref == "R2" else (ref, table) for ref, table in channel(2)]
    assert len(groups_of([*channel(1), *turned])) == 1


@pytest.mark.parametrize(
    "other",
    [
        channel(2, value="11 kohm"),
        channel(2, base="VREF"),
        [*channel(2), capacitor("CX", "S2", "GND")],
        [part for part in channel(2) if part[0] != "C2"],
        [(r, {**t, "model": "test-pnp", "kind": "pnp"} if r == "Q2" else t) for r, t in channel(2)],
        [(r, {**t, "package": "M1"} if r in ("Q2", "U2") else t) for r, t in channel(2)],
        [(r, {**t, "offset": "1 mV"} if r == "U2" else t) for r, t in channel(2)],
        channel(2, source="VREF"),
    ],
    ids=["value", "driving net", "more", "less", "kind", "package", "parameter", "role of the driving net"],
)
def test_any_difference_sets_channels_apart(other):
    """Values, parameters, parts, packages and driving nets all count."""
    assert [len(group) for group in groups_of([*channel(1), *other])] == [1, 1]


def test_inputs_of_different_range_set_channels_apart():
    """The range of the driving input counts, its name does not."""
    nets = {**USUAL, "VY": voltage_input("10 mV", "5 V")}
    assert [len(group) for group in groups_of([*channel(1, "VX"), *channel(2, "VY")], nets)] == [1, 1]


def test_the_same_parts_differently_joined_are_not_equal():
    """Two pairs of the same parts, one with a base on the wrong side, differ."""

    def pair(n):
        return log_ratio(
            n, resistor(f"RA{n}", "10 kohm", "VX", f"S{n}"), resistor(f"RB{n}", "10 kohm", "VY", f"W{n}"), f"L{n}"
        )

    crossed = [npn("P2", "W2", "L2", "T2") if ref == "P2" else (ref, table) for ref, table in pair(2)]
    assert [len(group) for group in groups_of([*pair(1), *pair(2)])] == [2]
    assert [len(group) for group in groups_of([*pair(1), *crossed])] == [1, 1]


def test_a_shared_package_keeps_channels_equal():
    """Two halves of a dual amplifier in one package are the same circuit."""
    parts = [
        part for n in (1, 2) for part in ((r, {**t, "package": "DUAL"} if r == f"U{n}" else t) for r, t in channel(n))
    ]
    assert [len(group) for group in groups_of(parts)] == [2]


def test_thermal_links_count():
    """A link of one channel alone, or to a package outside, sets it apart; the like in both does not."""
    parts = [*channel(1), *channel(2), amplifier("U9", "VX", "F", "F")]

    def sizes(*pairs):
        links = [{"between": list(pair), "theta": "50 K/W"} for pair in pairs]
        return [len(group) for group in groups_of(parts, thermal_links=links)]

    assert sizes() == sizes(("Q1", "U1"), ("Q2", "U2")) == sizes(("Q1", "U9"), ("Q2", "U9")) == [2, 1]
    assert sizes(("Q1", "U1")) == sizes(("Q1", "U9")) == [1, 1, 1]
