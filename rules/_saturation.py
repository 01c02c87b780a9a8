"""Who drives whom, and which of several saturated amplifiers came first."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import networkx as nx
import numpy as np
import numpy.typing as npt

from rulecheck.api import Design, OperatingPoints, Part, Requirement, Review, above_cutoff

Mask = npt.NDArray[np.bool_]
Floats = npt.NDArray[np.floating[Any]]
Node = tuple[str, str]
TWO_TERMINAL = ("resistor", "diode", "voltage-source", "potentiometer")
OFF = 0.1
"""V_BE [V] below which a junction carries nothing that matters."""


def working(design: Design) -> dict[str, Part]:
    """Parts that are not spare: these have their pins connected, and are there to be judged."""
    return {ref: part for ref, part in design.parts.items() if not part.spare}


class SignalFlow:
    """Which nets and amplifiers the output of each amplifier moves.

    A signal passes through resistors, diodes, and transistors from base to collector and emitter and from
    emitter to collector. It ends at nets that an ideal source or another amplifier's output holds; from a
    virtual ground it goes on through that amplifier only.

    Parameters
    ----------
    review : Review
    """

    def __init__(self, review: Review) -> None:
        self._design, self._circuit, self._working = review.design, review.circuit, working(review.design)
        nodes = review.structure.summing_nodes
        self._following = [n for n in nodes if review.structure.held_at(n.level_net) is None]
        self._held = {n.net for n in nodes if n not in self._following}
        self.amplifiers = [r for r, p in self._working.items() if p.kind == "op-amp"]
        self._driven = {review.design.parts[a].pins["OUT"] for a in self.amplifiers}
        self._graph: nx.DiGraph[Node] = nx.DiGraph(self._edges())
        self._graph.add_nodes_from(("part", a) for a in self.amplifiers)

    def nets(self, amplifier: str) -> set[str]:
        """Nets that an amplifier's output moves, its own included."""
        return {name for kind, name in nx.descendants(self._graph, ("part", amplifier)) if kind == "net"}

    def drives(self, amplifier: str, other: str) -> bool:
        """Whether an amplifier's output moves an input of another, also by way of more amplifiers."""
        return bool(nx.has_path(self._graph, ("part", amplifier), ("part", other)))

    def _edges(self) -> Iterator[tuple[Node, Node]]:
        for ref in self.amplifiers:
            pins = self._design.parts[ref].pins
            for pin in ("IN+", "IN-"):
                yield ("net", pins[pin]), ("part", ref)
            for net in (pins["OUT"], *self._beside(pins["OUT"])):
                yield ("part", ref), ("net", net)
        for node in self._following:
            yield ("part", node.amplifier), ("net", node.net)
        for net in self._design.nets:
            if net not in self._held | self._driven and not self._is_fixed(net):
                for other in self._beside(net):
                    yield ("net", net), ("net", other)

    def _beside(self, net: str) -> Iterator[str]:
        """Nets that a signal on a net reaches through one part."""
        for _, (_, ref), pin in self._circuit.edges(("net", net), keys=True):
            if ref in self._working:
                pins = self._working[ref].pins
                exits = _exits(self._working[ref], pin)
                yield from (pins[out] for out in exits if not self._is_fixed(pins[out]))

    def _is_fixed(self, name: str) -> bool:
        net = self._design.nets[name]
        ideal = net.role == "input" and net.drive == "voltage" and net.source_resistance is None
        return ideal or net.role in ("ground", "supply", "reference")


def _exits(part: Part, pin: str) -> Iterator[str]:
    if part.kind in TWO_TERMINAL:
        yield from (p for p in part.pins if p != pin)
    elif part.kind in ("npn", "pnp"):
        yield from {"B": "CE", "E": "C", "C": "E" if part.pins["C"] == part.pins["B"] else ""}[pin]


def is_at_limit(points: OperatingPoints, amplifier: str) -> Mask:
    """Whether an amplifier's output is at its high or low limit, at each condition."""
    mask: Mask = np.isin(points.state(amplifier), ("high", "low")) & points.converged
    return mask


def first_at_limit(
    flow: SignalFlow, at_limit: Mapping[str, Mask], elsewhere: Mapping[str, Mask]
) -> list[tuple[list[str], Mask]]:
    """Amplifiers at a limit that no other one at a limit explains.

    Amplifiers that drive each other around count as one cause, unless one of them is found alone at a limit.

    Parameters
    ----------
    flow : SignalFlow
    at_limit : mapping of amplifier to ndarray of bool, shape (conditions,)
    elsewhere : mapping of amplifier to ndarray of bool
        Where the limit has a cause that is another rule's; what follows from it is passed over too.

    Returns
    -------
    list of (amplifiers, ndarray of bool)
        A cause, and the conditions at which it is one.
    """
    names = list(at_limit)
    if not names:
        return []
    state = np.array([[*at_limit.values()], [*elsewhere.values()]])  # (2, amplifiers, conditions)
    patterns, which = np.unique(state, axis=2, return_inverse=True)
    causes: dict[frozenset[str], Mask] = {}
    for k in range(patterns.shape[2]):
        foreign = {n for n, e in zip(names, patterns[1, :, k], strict=True) if e}
        for group in _sources(flow, [n for n, x in zip(names, patterns[0, :, k], strict=True) if x]):
            if not group & foreign:
                there = which.ravel() == k
                causes[group] = causes.get(group, np.zeros_like(there)) | there
    least = [g for g in causes if not any(other < g for other in causes)]
    return [
        ([n for n in names if n in g], np.any([m for other, m in causes.items() if g <= other], axis=0)) for g in least
    ]


def _sources(flow: SignalFlow, names: list[str]) -> Iterator[frozenset[str]]:
    graph: nx.DiGraph[str] = nx.DiGraph((a, b) for a in names for b in names if a != b and flow.drives(a, b))
    graph.add_nodes_from(names)
    condensed = nx.condensation(graph)
    yield from (frozenset(condensed.nodes[c]["members"]) for c in condensed if condensed.in_degree(c) == 0)


def causes_of(flow: SignalFlow, points: OperatingPoints, index: int, nets: set[str]) -> list[str]:
    """Amplifiers at a limit at one condition that move any of some nets and that no other one explains."""
    names = [a for a in flow.amplifiers if is_at_limit(points, a)[index] and flow.nets(a) & nets]
    first = set().union(*_sources(flow, names))
    return [name for name in names if name in first]


def lacks_signal(review: Review, amplifier: str) -> Mask:
    """Where the junction in an amplifier's feedback is off because the signal has the wrong sign, or is none."""
    points, structure = review.operating_points, review.structure
    mask = np.zeros(points.converged.shape, bool)
    for log in structure.log_transistors:
        if log.amplifier == amplifier and structure.current_sources_of(log.summing_node).inputs:
            sign = 1 if review.design.parts[log.part].kind == "npn" else -1
            mask |= sign * points.vbe(log.part) < OFF
    for diode in structure.log_diodes:
        if diode.amplifier == amplifier and structure.current_sources_of(diode.summing_node).inputs:
            pins = review.design.parts[diode.part].pins
            mask |= points.voltage(pins["A"]) - points.voltage(pins["K"]) < OFF
    return mask


def asked_for(review: Review, flow: SignalFlow, amplifier: str) -> Mask:
    """Conditions at which an output that an amplifier moves is asked for: in range, above cutoff, trims set.

    Where no requirement with a law says, the inputs' own ranges hold.
    """
    moved = flow.nets(amplifier)
    laws = [r for r in review.design.requirements.values() if r.law is not None]
    return _asked_by(review, [r for r in laws if r.output in moved] or laws)


def asked_everywhere(review: Review) -> Mask:
    """Conditions at which any output is asked for."""
    return _asked_by(review, [r for r in review.design.requirements.values() if r.law is not None])


def _asked_by(review: Review, laws: list[Requirement]) -> Mask:
    mask: Mask = np.any([_inside(review, ranges) for ranges in [r.range for r in laws] or [{}]], axis=0)
    return mask & review.operating_points.converged


def _inside(review: Review, ranges: Mapping[str, tuple[float, float]]) -> Mask:
    inside = np.ones(review.conditions.size, bool)
    for name, source in review.design.inputs.items():
        x = review.conditions.values[name]
        low, high = ranges.get(name, (source.low, source.high))
        slack = 1e-9 * max(abs(low), abs(high))
        inside &= (x >= low - slack) & (x <= high + slack)
        inside &= above_cutoff(source, x)
    for ref, part in review.design.parts.items():
        if part.kind == "potentiometer" and part.adjusts is not None:
            inside &= review.conditions.values[ref] == review.typical[ref]
    return inside


def nets_without_a_level(review: Review) -> set[str]:
    """Nets that an amplifier with positive feedback moves: where its loop would balance says nothing of them."""
    flow, feedback = SignalFlow(review), review.structure.dc_feedback
    return set().union(*(flow.nets(a) for a in flow.amplifiers if feedback.get(a) == "positive"))
