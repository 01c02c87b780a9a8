"""Second stable operating points.

A log loop holds its sign only while its transistor is active: once the transistor saturates, its collector follows
the base, and what was negative feedback holds the circuit where it is. A self-biased reference may likewise stay
without current. Power-on or an overdriven input decides which of the points such a circuit goes to.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np

from rulecheck.api import Evidence, Finding, Review, Rule, SecondPoint, Severity, format_quantity

from ._latching import released

MOST_NETS = 3


class LatchUp(Rule):
    """A circuit that has a second stable operating point, in which it does not compute and which it does not leave.

    At the ends of the inputs' ranges and of ambient every amplifier is pushed to each of its limits, every transistor
    is cut off, and the states of the fault scenarios are taken, each time as the start of another solution. One that
    settles elsewhere, with all its natural frequencies left of the axis, is a second point: found as a solution, not
    by the look of the circuit. The search is no proof that there is none. Circuits whose feedback is positive at DC
    are left to `feedback-sign`.
    """

    name = "latch-up"
    title = "Second stable operating point"
    source = "solutions of the circuit's own equations; starts from limits and faults: common practice, no source"
    default_severity = Severity.MAJOR
    needs = ("operating_points", "loops", "faults", "latching")

    def check(self, review: Review, settings: object) -> Iterable[Finding]:
        """Judge each part of the circuit that has nets of its own; of its second points the one furthest off counts."""
        groups: dict[frozenset[str], list[SecondPoint]] = {}
        for point in review.latching.found:
            groups.setdefault(frozenset(point.voltages), []).append(point)
        for points in groups.values():
            kept = [point for point in points if not _has_another_cause(review, point)]
            if kept:
                yield self._finding(review, kept)

    def _finding(self, review: Review, points: Sequence[SecondPoint]) -> Finding:
        worst = max(points, key=lambda point: max(_distances(review, point).values()))
        nominal = review.latching.points
        nets = _far_nets(review, worst)
        parts = sorted({ref for point in points for ref in _stuck(review, point)})
        here, there = (float(nominal.voltage(nets[0])[worst.index]), worst.voltages[nets[0]])
        where = f"with {', '.join(parts)} " + ("at a limit" if worst.states else "cut off or saturated")
        return Finding(
            f"a second stable operating point {where}: {nets[0]} stands at {format_quantity(there, 'V', 3)} instead of "
            f"{format_quantity(here, 'V', 3)} (reached from: {worst.start})",
            parts=parts, conditions=nominal.conditions.at(worst.index),
            consequence=_consequence(review, worst, nets),
            evidence=[e for net in nets for e in (
                Evidence(f"{net} in the second point", worst.voltages[net], "V"),
                Evidence(f"{net} nominally", float(nominal.voltage(net)[worst.index]), "V"),
            )],
            remedies=released(review, points) if review.seeks_remedies else [],
        )  # fmt: skip


def _distances(review: Review, point: SecondPoint) -> dict[str, float]:
    """How far each net stands from its nominal voltage [V]."""
    nominal = review.latching.points
    return {n: abs(v - float(nominal.voltage(n)[point.index])) for n, v in point.voltages.items()}


def _far_nets(review: Review, point: SecondPoint) -> list[str]:
    """Outputs first, then the nets that are furthest off."""
    distances = _distances(review, point)
    nets = review.design.nets
    return sorted(distances, key=lambda n: (nets[n].role != "output", -distances[n]))[:MOST_NETS]


def _stuck(review: Review, point: SecondPoint) -> list[str]:
    """Amplifiers at a limit there and not nominally; without such, the transistors whose junctions changed state."""
    nominal, design = review.latching.points, review.design
    stuck = [a for a, state in point.states.items() if state != "linear" and nominal.linear(a)[point.index]]
    if stuck:
        return stuck
    moved = {}
    for ref, part in design.parts.items():
        if part.kind in ("npn", "pnp") and {part.pins["B"], part.pins["E"]} <= set(point.voltages):
            there = point.voltages[part.pins["B"]] - point.voltages[part.pins["E"]]
            moved[ref] = abs(there - float(nominal.vbe(ref)[point.index]))
    most = max(moved.values(), default=0.0)
    return [ref for ref, change in moved.items() if change > most / 2] or [point.part or next(iter(point.states))]


def _has_another_cause(review: Review, point: SecondPoint) -> bool:
    """Positive feedback, or an amplifier that is at its limit in either point."""
    loops, nominal = review.loops, review.latching.points
    ratios = [loops.dc_return_ratio(amplifier) for amplifier in point.states]
    at_limit = [not nominal.linear(a)[point.index] and state != "linear" for a, state in point.states.items()]
    return any((ratio < 0).any() for ratio in ratios) or any(at_limit)


def _consequence(review: Review, point: SecondPoint, nets: Sequence[str]) -> str:
    off = _distances(review, point)[nets[0]]
    words = f"{nets[0]} is {format_quantity(off, 'V', 3)} off"
    allowed = review.allowed_error(nets[0])
    if np.isfinite(allowed).any():
        words += f", where at most {format_quantity(float(np.nanmax(allowed)), 'V', 3)} are allowed"
    return f"{words}, and stays there until the power is switched off; it may come up so, too"
