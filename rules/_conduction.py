"""Paths of direct current, and nets and outputs that ideal sources tie together."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Iterator

import networkx as nx

from rulecheck.api import Design, Net, Part

from ._rails import FIXED, stiff_parts

GROUND = ("ground",)
"""Node of the common ground; a tuple, since every text may be the name of a net."""
Node = str | tuple[str]
#: Pins between which each kind of part lets direct current through.
PATHS = {
    "resistor": ("0", "1"), "potentiometer": ("END1", "WIPER", "END2"), "diode": ("A", "K"),
    "photodiode": ("A", "K"), "npn": ("C", "B", "E"), "pnp": ("C", "B", "E"),
}  # fmt: skip


def floating(design: Design) -> list[list[str]]:
    """Groups of nets without a path of direct current to ground, in the order of the file."""
    graph: nx.Graph[Node] = nx.Graph()
    graph.add_nodes_from([GROUND, *design.nets])
    for name, net in design.nets.items():
        if _reaches_ground(net):
            graph.add_edge(name, GROUND)
    for part in design.parts.values():
        for a, b in _paths(part):
            graph.add_edge(a, b)
    order = {net: i for i, net in enumerate(design.nets)}
    afloat = [component for component in nx.connected_components(graph) if GROUND not in component]
    groups = [sorted((n for n in c if isinstance(n, str)), key=order.__getitem__) for c in afloat]
    return sorted(groups, key=lambda group: order[group[0]])


def _reaches_ground(net: Net) -> bool:
    """Whether a source or load of its own joins a net to ground; an ideal current drive does not."""
    loaded = net.load is not None or (net.drive == "current" and net.source_resistance is not None)
    return loaded or net.role in FIXED or net.drive == "voltage"


def _paths(part: Part) -> Iterator[tuple[Node, Node]]:
    if part.kind == "op-amp":
        yield from ((net, GROUND) for pin, net in part.pins.items() if pin == "OUT")
    elif part.kind == "voltage-source":
        yield from itertools.pairwise(part.pins.values())
    else:
        nets = [part.pins[pin] for pin in PATHS.get(part.kind, ()) if pin in part.pins]
        yield from itertools.pairwise(nets)


def is_ideal(net: Net) -> bool:
    """Whether an ideal source holds a net."""
    behind = net.source_resistance.typ if net.source_resistance is not None else 0.0
    return net.role in FIXED or (net.drive == "voltage" and behind == 0.0)


def tied_outputs(design: Design, amplifiers: Iterable[str]) -> Iterator[tuple[list[str], list[str], list[str]]]:
    """Groups of outputs, the held nets that they are tied to, and their own nets; by links and sources too."""
    graph: nx.Graph[str] = nx.Graph()
    graph.add_nodes_from(design.nets)
    graph.add_edges_from((a, b) for _, a, b, _ in stiff_parts(design))
    group_of = {net: number for number, group in enumerate(nx.connected_components(graph)) for net in group}
    held: dict[int, list[str]] = {}
    for name, net in design.nets.items():
        if is_ideal(net):
            held.setdefault(group_of[name], []).append(name)
    outputs: dict[int, dict[str, str]] = {}
    for ref in amplifiers:
        if (output := design.parts[ref].pins.get("OUT")) is not None:
            outputs.setdefault(group_of[output], {})[ref] = output
    for number, nets in outputs.items():
        if number in held or len(nets) > 1:
            yield list(nets), held.get(number, []), list(dict.fromkeys(nets.values()))


def source_loops(design: Design) -> Iterator[tuple[list[str], list[str]]]:
    """Loops of ideal voltage sources: the parts and nets of each.

    Links alone, and links between grounds, make no such loop: nothing drives a current in it.
    """
    tree: nx.Graph[Node] = nx.Graph()
    tree.add_node(GROUND)
    for name, net in design.nets.items():
        tree.add_node(name)
        if is_ideal(net):
            tree.add_edge(GROUND, name, part="", drives=net.role != "ground")
    for ref, a, b, rise in stiff_parts(design):
        drives = design.parts[ref].kind == "voltage-source" and rise != 0.0
        if a == b:
            continue  # a part with all pins on one net is told of as that
        if not nx.has_path(tree, a, b):
            tree.add_edge(a, b, part=ref, drives=drives)
            continue
        way = nx.shortest_path(tree, a, b)
        steps = [tree.edges[step] for step in itertools.pairwise(way)]
        if drives or any(step["drives"] for step in steps):
            yield [ref, *(s["part"] for s in steps if s["part"])], [n for n in way if isinstance(n, str)]
