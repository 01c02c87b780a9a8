"""What clamp diodes leak into summing nodes, against the signal there."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from rulecheck.api import Part, Review

from ._saturation import Floats, Mask, asked_everywhere, working

NEARLY_NOTHING = 1e-4
"""Share of its largest value below which a signal is taken to go through zero."""


@dataclass(frozen=True)
class Leakage:
    """Current of a clamp at a summing node at the highest ambient, at its limits; NaN where it is not judged.

    Attributes
    ----------
    part : Part
        The diode.
    net : str
    current : ndarray, shape (conditions,) [A]
    ratio : ndarray
        To the signal current.
    """

    part: Part
    net: str
    current: Floats
    ratio: Floats


def leakages(review: Review) -> Iterator[Leakage]:
    """Leakages of all diodes at summing nodes that carry no signal themselves."""
    points, nodes = review.operating_points, {n.net: n.amplifier for n in review.structure.summing_nodes}
    at_work = _at_work(review)
    clamps = [p for p in working(review.design).values() if p.kind == "diode" and p.ref not in at_work]
    at_nodes = [(part, pin, net) for part in clamps for pin, net in part.pins.items() if net in nodes]
    if not at_nodes:
        return
    names = ("saturation_current", "reverse_leakage")
    leaking = review.re_solve(values={(p.ref, name): getattr(p, name).max for p, _, _ in at_nodes for name in names})
    hot = asked_everywhere(review) & (review.conditions.values["ambient"] == review.design.ambient.max)
    for part, pin, net in at_nodes:
        judged = hot & points.linear(nodes[net]) & leaking.converged
        if judged.any():
            current = np.where(judged, np.abs(leaking.current(part.ref, pin)), np.nan)
            with np.errstate(all="ignore"):
                ratio = current / carried_signal(review, nodes[net], judged)
            yield Leakage(part, net, current, ratio)


def _at_work(review: Review) -> set[str]:
    """Diodes that carry a signal."""
    loops = review.structure.junction_loops
    return {log.part for log in review.structure.log_diodes} | {ref for loop in loops for ref in loop.parts}


def carried_signal(review: Review, amplifier: str, judged: Mask) -> Floats:
    """Current of the part that carries most to the summing node of an amplifier or from it, clamps apart [A].

    A signal that goes through zero, and is not logged, is compared by its largest value.
    """
    points, structure, at_work = review.operating_points, review.structure, _at_work(review)
    nets = {node.net for node in structure.summing_nodes if node.amplifier == amplifier}
    parts = [p for p in working(review.design).values() if p.kind != "diode" or p.ref in at_work]
    # Behind a stopper there is nothing but the input and clamps: the signal is on its other side.
    brought = [p for p in parts if p.kind != "op-amp" and nets & set(p.pins.values())]
    if len(brought) == 1 and brought[0].kind == "resistor":
        nets |= set(brought[0].pins.values())
    currents = [points.current(p.ref, pin) for p in parts for pin, net in p.pins.items() if net in nets]
    signal: Floats = np.max(np.abs(currents), axis=0)
    carrier = max((np.where(judged, c, np.nan) for c in currents), key=lambda c: float(np.nanmax(np.abs(c))))
    most = float(np.nanmax(np.abs(carrier)))
    crosses = np.nanmin(carrier) * np.nanmax(carrier) <= 0 or np.nanmin(np.abs(carrier)) < NEARLY_NOTHING * most
    is_logged = amplifier in {log.amplifier for log in structure.log_transistors} | {
        log.amplifier for log in structure.log_diodes
    }
    return np.full(signal.shape, most) if crosses and not is_logged else signal
