"""Supply rails: which ideal source feeds a net through links, beads, small resistors and diodes."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Literal

import networkx as nx

from rulecheck.api import Design, Part

SupplyPin = Literal["V+", "V-"]
SUPPLY_PINS: tuple[SupplyPin, SupplyPin] = ("V+", "V-")
FIXED = ("ground", "supply", "reference")


@dataclass(frozen=True)
class Feed:
    """What feeds a net with direct current.

    Attributes
    ----------
    source : str
        Net that an ideal source holds: ground, a supply, a reference or what a voltage source makes of them.
    volts : float
        Its nominal voltage [V].
    ohm : float
        Resistance on the way.
    nets : tuple of str
        Nets on the way, the source first.
    """

    source: str
    volts: float
    ohm: float
    nets: tuple[str, ...]


class Rails:
    """Feeds of all nets, for current out of a positive rail and into a negative one."""

    def __init__(self, design: Design) -> None:
        self.design = design
        self.held = held_voltages(design)
        self._ways = {pin: self._nearest(pin) for pin in SUPPLY_PINS}

    def feed(self, part: Part, pin: SupplyPin) -> Feed | None:
        """Feed of an amplifier's supply pin by the way of least resistance; None where nothing feeds it."""
        ohms, ways = self._ways[pin]
        net = part.pins.get(pin)
        if net is None or net not in ways:
            return None
        source = ways[net][0]
        return Feed(source, self.held[source], ohms[net], tuple(ways[net]))

    def _nearest(self, pin: SupplyPin) -> tuple[dict[str, float], dict[str, list[str]]]:
        graph: nx.DiGraph[str] = nx.DiGraph()
        graph.add_nodes_from(self.held)
        for a, b, ohm in _ways_of_current(self.design, pin):
            if not graph.has_edge(a, b) or graph[a][b]["ohm"] > ohm:
                graph.add_edge(a, b, ohm=ohm)
        if not self.held:
            return {}, {}
        found: Any = nx.multi_source_dijkstra(graph, set(self.held), weight="ohm")
        return found[0], found[1]


def _ways_of_current(design: Design, pin: SupplyPin) -> Iterator[tuple[str, str, float]]:
    """Steps away from a source, with their resistance; a diode is one only in its forward direction."""
    for part in design.parts.values():
        if part.kind == "resistor":
            a, b = part.pins.values()
            yield a, b, part.value.typ
            yield b, a, part.value.typ
        elif part.kind == "diode" and {"A", "K"} <= part.pins.keys():
            anode, cathode = part.pins["A"], part.pins["K"]
            yield (anode, cathode, 0.0) if pin == "V+" else (cathode, anode, 0.0)


def held_voltages(design: Design) -> dict[str, float]:
    """Nominal voltage of each net that ideal sources hold: fixed nets, and others through voltage sources."""
    volts = {n: net.voltage.typ if net.voltage else 0.0 for n, net in design.nets.items() if net.role in FIXED}
    steps: dict[str, list[tuple[str, float]]] = {}
    for _, a, b, rise in stiff_parts(design):
        steps.setdefault(a, []).append((b, rise))
        steps.setdefault(b, []).append((a, -rise))
    front = list(volts)
    while front:
        net = front.pop()
        for other, rise in steps.get(net, ()):
            if other not in volts:
                volts[other] = volts[net] + rise
                front.append(other)
    return volts


def stiff_parts(design: Design) -> Iterator[tuple[str, str, str, float]]:
    """Links and voltage sources: reference, both nets, and how far the second lies above the first [V]."""
    for ref, part in design.parts.items():
        if part.kind == "resistor" and part.value.typ == 0:
            a, b = part.pins.values()
            yield ref, a, b, 0.0
        elif part.kind == "voltage-source" and len(part.pins) == 2:
            positive, negative = part.pins.values()
            yield ref, negative, positive, part.value.typ


def powered(design: Design) -> dict[str, Part]:
    """Amplifiers in use, by reference."""
    return {ref: part for ref, part in design.parts.items() if part.kind == "op-amp" and not part.spare}


def grounds(design: Design) -> list[str]:
    """Ground nets in the order of the file."""
    return [name for name, net in design.nets.items() if net.role == "ground"]
