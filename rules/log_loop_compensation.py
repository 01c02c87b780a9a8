"""Log loops whose stability rests on the transistors' own capacitances."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Annotated

import numpy as np

from rulecheck.api import BaseModel, Evidence, Finding, Review, Rule, Severity, Unit

from ._compensation import remedies
from ._words import figures

CAPACITANCES = {
    "npn": ("emitter_capacitance", "collector_capacitance"),
    "pnp": ("emitter_capacitance", "collector_capacitance"),
    "diode": ("capacitance",),
}
FACTORS = (0.5, 2.0)


class LogLoopCompensation(Rule):
    """A log or antilog loop without a capacitor, that is calm only as long as strays are what the model says.

    The capacitor from the amplifier's output to its summing node sets the loop's bandwidth by a part that is
    specified. Without one the bandwidth is set by junction and stray capacitances, which no maker guarantees:
    the rule halves and doubles them and looks at the margin.
    """

    name = "log-loop-compensation"
    title = "Log loop without a compensation capacitor that it needs"
    source = "maker's application notes show 30 pF to 4.7 nF in such loops; limits: common practice, no source"
    default_severity = Severity.MINOR
    needs = ("operating_points", "loops")

    class Settings(BaseModel):
        """Limits."""

        movement: Annotated[float, Unit("deg")] = 8.0
        phase_margin: Annotated[float, Unit("deg")] = 45.0
        damping: float = 0.3

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge every amplifier with a log junction in its feedback and no capacitor across it."""
        for amplifier in _bare(review):
            if _is_calm(review, settings, amplifier):
                yield from self._judge(review, settings, amplifier)

    def _judge(self, review: Review, settings: Settings, amplifier: str) -> Iterable[Finding]:
        spread, undefined = _spread(review, amplifier), _without_capacitances(review, amplifier)
        if not (spread.is_over(settings) or undefined):
            return
        points, falls = review.operating_points, np.nanmin(spread.least) < settings.phase_margin
        worst = points.least(spread.least) if falls else points.worst(spread.movement)
        margin, least, movement = (float(a[worst.index]) for a in (spread.margin, spread.least, spread.movement))
        evidence = [
            Evidence("phase margin", margin, "deg", settings.phase_margin, ">=", over=spread.margin),
            Evidence("margin with capacitances halved or doubled", least, "deg", settings.phase_margin, ">=",
                     over=spread.least),
            Evidence("movement of the margin", movement, "deg", settings.movement, "<=", over=spread.movement),
        ]  # fmt: skip
        if undefined:
            message = f"{amplifier}: no capacitor across the log loop, and no capacitances in the model of {undefined}"
        else:
            limit = f"{settings.phase_margin:g}° to be left" if falls else f"limit {settings.movement:g}°"
            message = (f"{amplifier}: no capacitor across the log loop; its phase margin moves by {movement:.0f}° to "
                       f"{least:.0f}° when the junctions' capacitances halve or double ({limit})")  # fmt: skip
        yield Finding(
            message, parts=[amplifier], consequence="whether the loop rings is left to strays and to the next batch",
            conditions=worst.conditions, evidence=figures(evidence),
            remedies=remedies(review, [amplifier], settings.damping, settings.phase_margin,
                              accepts=lambda mended: not _spread(mended, amplifier).is_over(settings)),
        )  # fmt: skip


@dataclass(frozen=True)
class _Spread:
    """Phase margin where judged, the least with capacitances halved or doubled, and how far it moves [deg]."""

    margin: np.ndarray
    least: np.ndarray
    movement: np.ndarray

    def is_over(self, settings: LogLoopCompensation.Settings) -> bool:
        """Whether the margin moves too far or falls below its limit, or there is none."""
        most, least = np.fmax.reduce(self.movement), np.fmin.reduce(self.least)
        return not (most <= settings.movement and least >= settings.phase_margin)


def _spread(review: Review, amplifier: str) -> _Spread:
    judged = review.loops.island_of(amplifier).judged
    margins = [np.where(judged, loops.phase_margin(amplifier), np.nan)
               for loops in (review.loops, *(review.loops_with(_scaled(review, f)) for f in FACTORS))]  # fmt: skip
    margin, *moved = margins
    return _Spread(margin, np.fmin.reduce(moved), np.fmax.reduce([np.abs(m - margin) for m in moved]))


def _is_calm(review: Review, settings: LogLoopCompensation.Settings, amplifier: str) -> bool:
    """Whether it has margins, and it and its island are within their limits as they are: loop-stability's matter."""
    island = review.loops.island_of(amplifier)
    if not island.judged.any():
        return False
    margin = np.fmin.reduce(review.loops.phase_margin(amplifier)[island.judged])
    return bool(margin >= settings.phase_margin and island.least_damping[island.judged].min() >= settings.damping)


def _junctions(review: Review, amplifier: str) -> list[str]:
    """Transistors and log diodes in the feedback of an amplifier, none where it makes no logarithm."""
    structure, parts = review.structure, review.design.parts
    logs = {log.amplifier for log in structure.log_transistors} | {log.amplifier for log in structure.log_diodes}
    if amplifier not in logs:
        return []
    found = [ref for loop in structure.feedback_loops if loop.amplifier == amplifier and loop.input == "IN-"
             for ref in loop.parts if parts[ref].kind in CAPACITANCES and ref in structure.conducting]  # fmt: skip
    return list(dict.fromkeys(found))


def _bare(review: Review) -> list[str]:
    """Amplifiers with a log junction in their feedback and no capacitor to their summing node."""
    return [ref for ref, part in review.design.parts.items()
            if part.kind == "op-amp" and _junctions(review, ref) and not _compensated(review, ref)]  # fmt: skip


def _compensated(review: Review, amplifier: str) -> bool:
    """Whether a capacitor lies from either side of the emitter resistor to the summing node or the input behind it."""
    parts, output = review.design.parts, review.design.parts[amplifier].pins["OUT"]
    nodes = {node.net for node in review.structure.summing_nodes if node.amplifier == amplifier}
    driven = {net for ref in _junctions(review, amplifier) for pin, net in parts[ref].pins.items() if pin in "EAK"}
    ends = {
        kind: [set(p.pins.values()) for p in parts.values() if p.kind == kind] for kind in ("resistor", "capacitor")
    }
    sides = {output}.union(*(pair for pair in ends["resistor"] if output in pair and pair & driven - nodes))
    return any(pair & nodes and pair & sides - nodes for pair in ends["capacitor"])


def _scaled(review: Review, factor: float) -> dict[tuple[str, str], float]:
    """The capacitances of all transistors and log diodes times `factor`; those of clamps would help."""
    logs = {log.part for log in review.structure.log_diodes}
    return {(ref, name): factor * getattr(part, name).typ for ref, part in review.design.parts.items()
            if part.kind != "diode" or ref in logs for name in CAPACITANCES.get(part.kind, ())}  # fmt: skip


def _without_capacitances(review: Review, amplifier: str) -> str:
    """First junction in the loop whose model gives no capacitances."""
    parts = review.design.parts
    bare = [r for r in _junctions(review, amplifier) if not parts[r].given.intersection(CAPACITANCES[parts[r].kind])]
    return bare[0] if bare else ""
