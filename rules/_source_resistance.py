"""The resistance that drives a net, and the resistors that make it up."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import networkx as nx
import numpy as np

from rulecheck.api import Part, Review

from ._conduction import is_ideal

LINK = 1e-6  # ohm: what stands for a link
SOURCE = "source of "


@dataclass(frozen=True)
class Drive:
    """What drives a net.

    Attributes
    ----------
    ohm : float
        Resistance from the net to all nets that something stiff holds; nil where it is held itself.
    resistors : tuple of str
        References.
    """

    ohm: float
    resistors: tuple[str, ...]


def drive_of_base(review: Review, ref: str) -> Drive:
    """What drives the base of a transistor; nil where a junction holds it, or nothing that is stiff is reached."""
    base = review.design.parts[ref].pins["B"]
    ways, stiff = _ways(review), _stiff(review)
    if base not in ways or base in stiff or _is_at_a_junction(review, ref):
        return Drive(0.0, ())
    free = nx.node_connected_component(ways.subgraph(set(ways) - stiff), base)
    edges = [(a, b, data) for a, b, data in ways.edges(free, data=True) if a != b]
    if not any(a in stiff or b in stiff for a, b, _ in edges):
        return Drive(0.0, ())
    order = {net: i for i, net in enumerate(sorted(free))}
    conductance = np.zeros((len(order), len(order)))
    for a, b, data in edges:
        held = [order[net] for net in (a, b) if net in order]
        conductance[np.ix_(held, held)] += (2 * np.eye(len(held)) - 1) / data["ohm"]
    refs = tuple(sorted({data["ref"] for _, _, data in edges} - {""}))
    return Drive(float(np.linalg.inv(conductance)[order[base], order[base]]), refs)


def _is_at_a_junction(review: Review, ref: str) -> bool:
    """Whether the base is on a diode, an emitter, or a transistor connected as a diode."""
    base = review.design.parts[ref].pins["B"]
    others = [part for part in review.design.parts.values() if part.ref != ref]
    diodes = [p for p in others if p.kind == "diode" and p.ref in review.structure.conducting]
    transistors = [p for p in others if p.kind in ("npn", "pnp")]
    return any(base in p.pins.values() for p in diodes) or any(
        base == p.pins["E"] or base == p.pins["C"] == p.pins["B"] for p in transistors
    )


def _stiff(review: Review) -> set[str]:
    design = review.design
    ideal = {net for net, entry in design.nets.items() if is_ideal(entry)}
    driven = {p.pins["OUT"] for p in design.parts.values() if p.kind == "op-amp" and "OUT" in p.pins}
    held = {node.net for node in review.structure.summing_nodes}
    return ideal | driven | held | {SOURCE + net for net in design.nets}


def _ways(review: Review) -> nx.MultiGraph[str]:
    ways: nx.MultiGraph[str] = nx.MultiGraph()
    for part in review.design.parts.values():
        for a, b, ohm in _resistances(review, part):
            ways.add_edge(a, b, ohm=max(ohm, LINK), ref=part.ref if part.kind == "resistor" else "")
    for net, entry in review.design.nets.items():
        if entry.source_resistance is not None:
            ways.add_edge(net, SOURCE + net, ohm=max(entry.source_resistance.typ, LINK), ref="")
    return ways


def _resistances(review: Review, part: Part) -> Iterator[tuple[str, str, float]]:
    if part.kind == "resistor":
        a, b = part.pins.values()
        yield a, b, part.value.typ
    elif part.kind == "potentiometer":
        at = review.typical[part.ref]
        yield part.pins["END1"], part.pins["WIPER"], part.value.typ * at
        yield part.pins["END2"], part.pins["WIPER"], part.value.typ * (1 - at)
