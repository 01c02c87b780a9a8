"""Questions that several rules ask of a review: which junctions carry what, and where the circuit is at work."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..circuit.structure import CurrentSources, LogDiode
from ..devices.constants import Array, BoolArray
from .conditions import Conditions, above_cutoff
from .operating_points import OperatingPoints

if TYPE_CHECKING:
    from .review import Review

STEADY = 0.05  # of a current: base currents and Early voltages of the others move a fixed one by less
CARRYING = 0.1  # of the largest current at a node
FOLLOWING = 0.1  # of the inputs' own relative change


@dataclass(frozen=True, slots=True)
class Carrier:
    """A junction at work and the current it carries.

    Attributes
    ----------
    part : str
        Transistor or log diode.
    node : str
        Net at which its current arrives: the summing node, else the net of its collector or anode.
    amplifier : str, optional
        The amplifier that holds the node.
    is_log : bool
        Turns a current into a voltage; else its current follows a voltage, or nothing.
    is_fixed : bool
        No input moves its current.
    sources : CurrentSources
        What sets the current of the node.
    """

    part: str
    node: str
    amplifier: str | None
    is_log: bool
    is_fixed: bool
    sources: CurrentSources


def carriers(review: Review) -> tuple[Carrier, ...]:
    """Log and antilog junctions, and those that stand against them, with their currents, in the order of the file.

    The current of a log transistor is fixed where no input reaches its summing node; that of another where it
    does not vary with the inputs over the review conditions.

    Parameters
    ----------
    review : Review
    """
    structure, parts = review.structure, review.design.parts
    nodes = {log.part: log.summing_node for log in structure.log_transistors}
    nodes |= {log.part: log.summing_node for log in structure.log_diodes if _carries(review, log)}
    others = {antilog.part for antilog in structure.antilog_transistors}
    # A mirror compares junctions too, but takes no logarithm.
    loops = [loop for loop in structure.junction_loops if others.union(nodes) & set(loop.parts)]
    others.update(ref for loop in loops for ref in loop.parts)
    found = []
    for ref in parts:
        if ref not in nodes and ref not in others:
            continue
        pins = parts[ref].pins
        node = nodes.get(ref) or pins.get("C") or pins["A"]
        sources = structure.current_sources_of(node)
        is_fixed = not sources.inputs if ref in nodes else not _follows_inputs(review, ref)
        found.append(Carrier(ref, node, structure.amplifier_of(node), ref in nodes, is_fixed, sources))
    return tuple(found)


def _carries(review: Review, log: LogDiode) -> bool:
    """Whether a log diode ever carries its part of what flows at its node; one that never does is a clamp."""
    points, design, node = review.operating_points, review.design, log.summing_node
    working = points.linear(log.amplifier)
    pins = [(ref, pin) for ref, part in design.parts.items() for pin, net in part.pins.items() if net == node]
    flows = [np.abs(points.current(ref, pin))[working].max(initial=0.0) for ref, pin in pins if ref != log.part]
    if node in design.inputs:
        flows.append(np.abs(review.conditions.values[node]).max(initial=0.0))
    own = forward_current(points, log.part)[working].max(initial=0.0)
    return not working.any() or bool(own > CARRYING * max(flows, default=0.0))


def _follows_inputs(review: Review, ref: str) -> bool:
    """Whether a current varies with the inputs at typical ambient, supplies and potentiometers."""
    values, inputs = review.conditions.values, review.design.inputs
    rows = at_typical(review, [name for name in values if name not in inputs]) & review.operating_points.converged
    current = forward_current(review.operating_points, ref)[rows]
    own = max((_change(values[name][rows]) for name in inputs), default=0.0)
    return _change(current) > min(STEADY, FOLLOWING * own)


def _change(values: Array) -> float:
    """Span of values over the largest magnitude."""
    largest = float(np.abs(values).max(initial=0.0))
    return float(np.ptp(values)) / largest if largest else 0.0


def at_typical(review: Review, names: Sequence[str]) -> BoolArray:
    """Review conditions at which the quantities named are at their typ."""
    values, typical = review.conditions.values, review.typical
    masks = [values[name] == typical[name] for name in names]
    return np.logical_and.reduce(masks) if masks else np.ones(review.conditions.size, dtype=bool)


def potentiometers(review: Review) -> list[str]:
    """References of the potentiometers."""
    return [ref for ref, part in review.design.parts.items() if part.kind == "potentiometer"]


def in_use(review: Review) -> BoolArray:
    """Review conditions at which the circuit is asked to compute: above the cutoffs, potentiometers as set."""
    below = _below_cutoff(review)
    mask = at_typical(review, potentiometers(review)) & review.operating_points.converged
    return mask & ~np.logical_or.reduce([*below.values(), np.zeros_like(mask)])


def points_in_use(review: Review) -> OperatingPoints:
    """Operating points of the review conditions, inputs below their cutoff raised to it."""
    values: dict[str, Array] = {}
    for name, below in _below_cutoff(review).items():
        source = review.design.inputs[name]
        sign = 1.0 if source.high >= -source.low else -1.0
        values[name] = np.where(below, sign * (source.cutoff or 0.0), review.conditions.values[name])
    return review.solve(Conditions({**review.conditions.values, **values})) if values else review.operating_points


def _below_cutoff(review: Review) -> dict[str, BoolArray]:
    """By input with a cutoff, the conditions at which it is below; only the larger side of a range counts."""
    values = review.conditions.values
    return {n: ~above_cutoff(s, values[n]) for n, s in review.design.inputs.items() if s.cutoff is not None}


def is_regulated(review: Review, points: OperatingPoints, *nets: str) -> BoolArray:
    """Conditions at which no amplifier that holds the nets, or leads to them, is at a limit.

    Parameters
    ----------
    review : Review
    points : OperatingPoints
        Of this design, at any conditions.
    *nets : str
    """
    structure, parts = review.structure, review.design.parts
    leading = {ref for net in nets for ref in structure.current_sources_of(net).parts if parts[ref].kind == "op-amp"}
    holding = {structure.amplifier_of(net) for net in nets} - {None}
    states = [points.linear(str(amplifier)) for amplifier in leading | holding]
    return np.logical_and.reduce([points.converged, *states])


def forward_current(points: OperatingPoints, ref: str) -> Array:
    """Current of a junction in its forward direction: of a transistor its collector current [A]."""
    kind = points.design.parts[ref].kind
    if kind == "diode":
        return points.current(ref, "A")
    return points.current(ref, "C") * (1 if kind == "npn" else -1)


def forward_voltage(points: OperatingPoints, ref: str) -> Array:
    """Voltage across a junction in its forward direction [V]."""
    part = points.design.parts[ref]
    if part.kind == "diode":
        return points.voltage(part.pins["A"]) - points.voltage(part.pins["K"])
    return points.vbe(ref) * (1 if part.kind == "npn" else -1)


def partner_of(review: Review, ref: str) -> str | None:
    """The junction that a junction is compared with in its loop, None where nothing stands against it."""
    for loop in review.structure.loops_of(ref):
        for pairing in loop.pairings[:1]:
            for one, other in pairing:
                if ref in (one, other):
                    return other if ref == one else one
    return None
