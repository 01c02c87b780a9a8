"""Properties of the structure: it depends on the circuit alone, and every circuit has one."""

import pickle

import pytest
from circuits import (
    OUTPUT,
    USUAL,
    amplifier,
    antilog,
    capacitor,
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
from hypothesis import given, settings
from hypothesis import strategies as st

from rulecheck.circuit.graph import build_graph
from rulecheck.circuit.islands import equal_islands, islands
from rulecheck.circuit.structure import find_structure

POWER = [
    *log_ratio(1, resistor("R1", "10 kohm", "VX", "S1"), resistor("R2", "100 kohm", "VREF", "W1"), "L"),
    resistor("R5", "10 kohm", "L", "M"),
    resistor("R6", "30 kohm", "M", "P"),
    amplifier("U5", "GND", "M", "P"),
    *antilog(3, resistor("R7", "100 kohm", "VREF", "S3"), base="P", out="VOUT"),
]
MULTIPLIER = [
    *transdiode(1, resistor("R1", "10 kohm", "VX", "S1")),
    *transdiode(2, resistor("R2", "10 kohm", "VY", "S2"), base="E1"),
    *transdiode(3, resistor("R3", "10 kohm", "VZ", "S3")),
    npn("A4", "X4", "E3", "E2"),
    amplifier("U4", "GND", "X4", "VOUT"),
    resistor("R4", "10 kohm", "X4", "VOUT"),
    diode("D1", "O1", "S1"),
]
LOG_OUTPUT = [
    *transdiode(1, resistor("R1", "10 kohm", "VX", "S1"), kind=pnp),
    *transdiode(2, photodiode("PD", "S2", "GND")),
    resistor("R3", "10 kohm", "O1", "N"),
    resistor("R4", "20 kohm", "N", "VOUT"),
    resistor("R5", "10 kohm", "E2", "N"),
    amplifier("U3", "GND", "N", "VOUT"),
]
CIRCUITS = {"power": POWER, "multiplier": MULTIPLIER, "log output": LOG_OUTPUT}


def summary(structure, part=lambda ref: ref, net=lambda name: name):
    """What a structure says, whatever the order of the file: weights of loops by their greatest."""

    def scaled(loop):
        size = max(weights(loop).values(), key=abs)
        return frozenset((part(ref), round(weight / size, 9)) for ref, weight in weights(loop).items())

    def turned(loop):
        plain, mirrored = scaled(loop), frozenset((ref, -weight) for ref, weight in scaled(loop))
        return frozenset({plain, mirrored})

    return {
        "dc": {part(amp): word for amp, word in structure.dc_feedback.items()},
        "nodes": {(net(n.net), part(n.amplifier), n.input, net(n.level_net)) for n in structure.summing_nodes},
        "logs": {
            (part(q.part), part(q.amplifier), net(q.summing_node), q.drive, q.diode_connected)
            for q in structure.log_transistors
        },
        "antilogs": {(part(q.part), net(q.collector_net), q.load, q.drive) for q in structure.antilog_transistors},
        "loops": {
            (
                turned(loop),
                frozenset(map(part, loop.level_shifts)),
                frozenset(map(part, loop.drops)),
                frozenset(map(net, loop.outputs)),
                loop.translinear,
                loop.compensated,
                frozenset(frozenset((frozenset(map(part, pair))) for pair in pairing) for pairing in loop.pairings),
            )
            for loop in structure.junction_loops
        },
        "levels": {net(name): level.typ for name, level in structure.levels.items()},
        "paths": {
            (part(f.amplifier), f.input, tuple(map(part, f.parts)), tuple(map(net, f.nets)))
            for f in structure.feedback_loops
        },
    }


@settings(max_examples=25, deadline=None)
@given(st.sampled_from(sorted(CIRCUITS)), st.randoms(use_true_random=False))
def test_names_and_order_play_no_part(name, random):
    """Renaming every net and part and shuffling the file leaves the structure the same up to names."""
    parts = list(CIRCUITS[name])
    nets = {**USUAL}
    refs = {ref: f"Z {i}" for i, ref in enumerate(random.sample([ref for ref, _ in parts], len(parts)))}
    used = {net for _, table in parts for net in pin_nets(table)}
    names = {
        net: f'n"{i}' for i, net in enumerate(sorted(used - {"GND", "VP", "VN"} - nets.keys(), key=hash_of(random)))
    }
    random.shuffle(parts)
    renamed = [(refs[ref], with_nets(table, names)) for ref, table in parts]
    shuffled = dict(random.sample(list(nets.items()), len(nets)))
    there = summary(structure_of(CIRCUITS[name]), lambda ref: refs[ref], lambda net: names.get(net, net))
    assert summary(structure_of(renamed, shuffled)) == there


def hash_of(random):
    """Sort key that shuffles."""
    return lambda _: random.random()


def pin_nets(table):
    """Nets of a part's table."""
    pins = table["pins"]
    return pins.values() if isinstance(pins, dict) else pins


def with_nets(table, names):
    """Table of a part with its nets renamed."""
    pins = table["pins"]
    if isinstance(pins, dict):
        return {**table, "pins": {pin: names.get(net, net) for pin, net in pins.items()}}
    return {**table, "pins": [names.get(net, net) for net in pins]}


@pytest.mark.parametrize("name", CIRCUITS)
def test_scaling_all_resistors_changes_no_weight(name):
    """Weights are ratios: a hundred times every resistance leaves the loops the same."""
    scaled = [
        (ref, {**table, "value": table["value"].replace(" kohm", "00 kohm")} if table["kind"] == "resistor" else table)
        for ref, table in CIRCUITS[name]
    ]
    assert summary(structure_of(scaled)) == summary(structure_of(CIRCUITS[name]))


@pytest.mark.parametrize("name", CIRCUITS)
def test_an_unrelated_stage_changes_nothing(name):
    """A stage on the same supplies and inputs leaves the structure of the rest as it was."""
    more = [
        resistor("R90", "1 kohm", "VX", "S90"),
        resistor("R91", "1 kohm", "S90", "O90"),
        amplifier("U90", "GND", "S90", "O90"),
    ]
    whole, rest = summary(structure_of([*more, *CIRCUITS[name]])), summary(structure_of(CIRCUITS[name]))
    assert all(whole[key] == rest[key] for key in ("logs", "antilogs", "loops"))


def test_a_structure_is_frozen_and_can_be_sent_to_a_worker():
    """It refuses changes and survives pickling."""
    structure = structure_of(POWER)
    with pytest.raises(AttributeError, match="cannot assign"):
        structure.junction_loops = ()
    with pytest.raises(TypeError, match="cannot be changed"):
        structure.levels["GND"] = None
    copy = pickle.loads(pickle.dumps(structure))
    assert copy.junction_loops == structure.junction_loops
    assert copy.current_sources_of("S1") == structure.current_sources_of("S1")


NETS = ["GND", "VP", "VX", "VREF", "VOUT", *"ABCDEF"]
KINDS = {
    "resistor": lambda ref, a, b, c: resistor(ref, "10 kohm", a, b),
    "link": lambda ref, a, b, c: resistor(ref, "0 ohm", a, b),
    "capacitor": lambda ref, a, b, c: capacitor(ref, a, b),
    "diode": lambda ref, a, b, c: diode(ref, a, b),
    "npn": npn,
    "pnp": pnp,
    "op-amp": amplifier,
    "potentiometer": lambda ref, a, b, c: potentiometer(ref, "10 kohm", 0.3, a, b, c),
    "current source": lambda ref, a, b, c: current_source(ref, "10 uA", a, b),
    "voltage source": lambda ref, a, b, c: voltage_source(ref, "1 V", a, b),
    "photodiode": lambda ref, a, b, c: photodiode(ref, a, b),
}
ANY_PART = st.tuples(st.sampled_from(sorted(KINDS)), *[st.sampled_from(NETS)] * 3, st.integers(0, 20))


@settings(max_examples=150, deadline=None)
@given(st.lists(ANY_PART, min_size=1, max_size=12))
def test_any_circuit_has_a_structure(choices):
    """However broken a circuit is, pins left open too, its structure is found and consistent."""
    parts = [KINDS[kind](f"X{i}", a, b, c) for i, (kind, a, b, c, _) in enumerate(choices)]
    for (_, table), (*_, drop) in zip(parts, choices, strict=True):
        if isinstance(table["pins"], dict) and drop < len(table["pins"]):
            del table["pins"][sorted(table["pins"])[drop]]
    nets = {"VX": voltage_input("-1 V", "1 V"), "VREF": USUAL["VREF"], "VOUT": OUTPUT}
    design = design_of(nets, parts)
    graph = build_graph(design)
    structure = find_structure(design, graph)
    for loop in structure.junction_loops:
        assert set(loop.parts) <= set(structure.conducting)
        assert loop.compensated == bool(loop.pairings)
    for node in structure.summing_nodes:
        assert structure.dc_feedback[node.amplifier] == "negative"
        structure.current_sources_of(node.net)
    found = islands(design, graph)
    assert sorted(ref for island in found for ref in island.parts) == sorted(design.parts)
    assert sum(map(len, equal_islands(design, graph, found))) == len(found)
