"""The structure of a log-domain circuit: feedback, summing nodes, log and antilog elements, junction loops.

All of it is found from the circuit's topology and nominal values; names play no part.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import TYPE_CHECKING, Literal

from rulecheck.design.frozen import FrozenDict
from rulecheck.units import Spread

from .conduction import Conduction, candidates, conduction
from .constraints import constraints, fixed_spread, is_diode_like
from .elimination import Row
from .feedback import FeedbackLoop, Step, SummingNode, feedback_loops, summing_nodes
from .junctions import JunctionLoop, junction_loops
from .logs import AntilogTransistor, LogDiode, LogTransistor, antilog_transistors, log_elements
from .pairings import Junction, Pairing
from .relations import fixed_voltages
from .sources import CurrentSources, current_sources
from .surrogate import Feedback, dc_feedback
from .wiring import GROUND, Wiring, build_wiring

if TYPE_CHECKING:
    from rulecheck.design.model import Design

    from .graph import Circuit

__all__ = [
    "AntilogTransistor",
    "CurrentSources",
    "FeedbackLoop",
    "Junction",
    "JunctionLoop",
    "LogDiode",
    "LogTransistor",
    "Pairing",
    "Step",
    "Structure",
    "SummingNode",
    "find_structure",
]

DCFeedback = Literal["negative", "positive", "absent"]


@dataclass(frozen=True)
class Structure:
    """Structure of a circuit.

    Attributes
    ----------
    feedback_loops : tuple of FeedbackLoop
        Every way from an amplifier's output to its inputs, capacitors included.
    dc_feedback : mapping of amplifier to str
        ``negative``, ``positive`` or ``absent``, from the sign of a DC return ratio with every diode conducting.
    summing_nodes : tuple of SummingNode
    log_transistors : tuple of LogTransistor
    log_diodes : tuple of LogDiode
    antilog_transistors : tuple of AntilogTransistor
    junction_loops : tuple of JunctionLoop
    conducting : tuple of str
        Transistors and diodes at work; the others are clamps.
    levels : mapping of net to Spread
        Nets at a fixed voltage: ground, supplies, references, and what dividers, followers and virtual
        grounds make of them. The spreads are those of the sources, without the resistors'.
    """

    feedback_loops: tuple[FeedbackLoop, ...]
    dc_feedback: Mapping[str, DCFeedback]
    summing_nodes: tuple[SummingNode, ...]
    log_transistors: tuple[LogTransistor, ...]
    log_diodes: tuple[LogDiode, ...]
    antilog_transistors: tuple[AntilogTransistor, ...]
    junction_loops: tuple[JunctionLoop, ...]
    conducting: tuple[str, ...]
    levels: Mapping[str, Spread]
    _wiring: Wiring = field(repr=False, compare=False)

    def held_at(self, net: str) -> Spread | None:
        """Give the fixed voltage of a net, None where it moves with a signal."""
        return self.levels.get(net)

    def summing_node(self, net: str) -> SummingNode | None:
        """Find the summing node that a net is, if any."""
        return next((node for node in self.summing_nodes if node.net == net), None)

    def amplifier_of(self, net: str) -> str | None:
        """Name the amplifier that holds a net as its summing node."""
        node = self.summing_node(net)
        return node.amplifier if node is not None else None

    def level_of(self, net: str) -> str | None:
        """Name the net at whose level a summing node is held."""
        node = self.summing_node(net)
        return node.level_net if node is not None else None

    def amplifiers_of(self, net: str) -> tuple[str, ...]:
        """Amplifiers with an input or the output on a net, in the order of the file."""
        pins = self._wiring.pins_on.get(net, ())
        return tuple(dict.fromkeys(ref for ref, pin in pins if pin in ("IN+", "IN-", "OUT")))

    def loops_of(self, part: str) -> tuple[JunctionLoop, ...]:
        """Junction loops that a part's junction takes part in."""
        return tuple(loop for loop in self.junction_loops if part in loop.parts)

    def current_sources_of(self, net: str) -> CurrentSources:
        """Trace what sets the current into a net; for a summing node without its amplifier's feedback."""
        wiring = self._wiring
        point = wiring.point_of[net]
        held = {wiring.point_of[node.net]: node for node in self.summing_nodes}
        amplifier = held[point].amplifier if point in held else None
        own = {log.part for log in self.log_transistors if log.amplifier == amplifier}
        own |= {log.part for log in self.log_diodes if log.amplifier == amplifier}
        levels = {at: wiring.point_of[node.level_net] for at, node in held.items()}
        return current_sources(wiring, levels, point, own, amplifier, self.conducting)


def find_structure(design: Design, graph: Circuit) -> Structure:
    """Find the structure of a circuit.

    Parameters
    ----------
    design : Design
    graph : networkx.MultiGraph
        Its graph.

    Returns
    -------
    Structure
    """
    wiring = build_wiring(design)
    feedback = dc_feedback(wiring, candidates(wiring))
    nodes = summing_nodes(wiring, feedback)
    loops = feedback_loops(wiring, _holders(wiring, nodes))
    work = _conduction(wiring, loops, nodes)
    nodes = tuple(node for node in nodes if node.amplifier not in work.idle)
    held, equal = _holders(wiring, nodes), _equal_inputs(wiring, nodes)
    rows = constraints(wiring, work.junctions, equal)
    levels = _levels(wiring, rows)
    voltages = {wiring.point_of[net]: spread.typ for net, spread in levels.items()}
    transistors, diodes = log_elements(wiring, work.log_routes)
    found = junction_loops(wiring, graph, rows, work.junctions)
    logs = [log.part for log in transistors] + [log.part for log in diodes]
    return Structure(
        feedback_loops=loops,
        dc_feedback=FrozenDict({f.amplifier: _word(f) for f in feedback}),
        summing_nodes=nodes,
        log_transistors=transistors,
        log_diodes=diodes,
        antilog_transistors=antilog_transistors(wiring, found, logs, held, voltages),
        junction_loops=found,
        conducting=work.junctions,
        levels=FrozenDict(levels),
        _wiring=wiring,
    )


def _holders(wiring: Wiring, nodes: Iterable[SummingNode]) -> dict[str, str]:
    """Held points with the amplifiers that hold them."""
    return {wiring.point_of[node.net]: node.amplifier for node in nodes}


def _equal_inputs(wiring: Wiring, nodes: Iterable[SummingNode]) -> dict[str, tuple[str, str]]:
    """Points of the inputs that feedback makes equal, by amplifier."""
    return {n.amplifier: (wiring.point(n.amplifier, "IN+"), wiring.point(n.amplifier, "IN-")) for n in nodes}


def _conduction(wiring: Wiring, loops: Iterable[FeedbackLoop], nodes: Sequence[SummingNode]) -> Conduction:
    """Junctions at work, judged by the levels that hold whatever the diodes do."""
    certain = [ref for ref in candidates(wiring) if not is_diode_like(wiring, ref)]
    levels = _levels(wiring, constraints(wiring, certain, _equal_inputs(wiring, nodes)))
    voltages = {wiring.point_of[net]: spread.typ for net, spread in levels.items()}
    inputs = {(node.amplifier, node.input) for node in nodes}
    led = [loop for loop in loops if (loop.amplifier, loop.input) in inputs]
    return conduction(wiring, led, _holders(wiring, nodes), voltages)


def _levels(wiring: Wiring, rows: list[Row]) -> dict[str, Spread]:
    """Find the fixed voltages of nets, in the order of the file."""
    found = fixed_voltages(rows, lambda column: fixed_spread(wiring, column) is not None)
    found |= {p: {("K", name): Fraction(1)} for p, name in wiring.known.items() if _is_fixed(wiring, name)}
    found[GROUND] = {}
    made = {point: _spread(wiring, row) for point, row in found.items()}
    return {net: made[point] for net in wiring.design.nets if (point := wiring.point_of[net]) in made}


def _is_fixed(wiring: Wiring, name: str) -> bool:
    return bool(name) and fixed_spread(wiring, ("K", name)) is not None


def _spread(wiring: Wiring, row: Row) -> Spread:
    """Spread of a sum of fixed quantities."""
    low = typ = high = 0.0
    for column, factor in row.items():
        size = float(factor)
        if (spread := fixed_spread(wiring, column)) is not None:
            ends = sorted((size * spread.min, size * spread.max))
            low, typ, high = low + ends[0], typ + size * spread.typ, high + ends[1]
    return Spread(low, typ, high)


def _word(feedback: Feedback) -> DCFeedback:
    if feedback.sign == 0:
        return "absent"
    return "negative" if feedback.sign > 0 else "positive"
