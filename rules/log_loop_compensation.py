"""Log loops whose stability rests on the transistors' own capacitances."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Annotated

import numpy as np

from rulecheck.api import BaseModel, Evidence, Finding, Review, Rule, Severity, Unit

from ._compensation import remedies
from ._words import figures

CAPACITANCES = ("emitter_capacitance", "collector_capacitance")


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
        """Judge every amplifier with a junction in its feedback and no capacitor across it."""
        loops = review.loops
        bare = [a for a in _bare(review) if not self._rings(review, settings, a)]
        spread = {factor: review.loops_with(_scaled(review, factor)) for factor in (0.5, 2.0)} if bare else {}
        for amplifier in bare:
            margin = loops.phase_margin(amplifier)
            if not (np.isfinite(margin).any() and np.nanmin(margin) < settings.phase_margin):
                moved = {f: s.phase_margin(amplifier) for f, s in spread.items()}
                yield from self._judge(review, settings, amplifier, margin, moved)

    @staticmethod
    def _rings(review: Review, settings: Settings, amplifier: str) -> bool:
        """Whether its island rings as it is, which is the finding of loop-stability."""
        island = review.loops.island_of(amplifier)
        return bool(np.any(island.least_damping[island.judged] < settings.damping))

    def _judge(
        self,
        review: Review,
        settings: Settings,
        amplifier: str,
        margin: np.ndarray,
        moved: dict[float, np.ndarray],
    ) -> Iterable[Finding]:
        points = review.operating_points
        movement = np.fmax.reduce([np.abs(m - margin) for m in moved.values()])
        least = np.fmin.reduce(list(moved.values()))
        undefined = _without_capacitances(review, amplifier)
        if not np.isfinite(movement).any():
            return
        falls = np.nanmin(least) < settings.phase_margin
        if not (undefined or falls or np.nanmax(movement) > settings.movement):
            return
        worst = points.least(least) if falls else points.worst(movement)
        evidence = [
            Evidence("phase margin", float(margin[worst.index]), "deg", settings.phase_margin, ">=", over=margin),
            Evidence("margin with capacitances halved or doubled", float(least[worst.index]), "deg",
                     settings.phase_margin, ">=", over=least),
            Evidence("movement of the margin", float(movement[worst.index]), "deg", settings.movement, "<=",
                     over=movement),
        ]  # fmt: skip
        if undefined:
            message = f"{amplifier}: no capacitor across the log loop, and no capacitances in the model of {undefined}"
        else:
            message = (f"{amplifier}: no capacitor across the log loop; its phase margin moves by "
                       f"{movement[worst.index]:.0f}° to {least[worst.index]:.0f}° when the transistors' "
                       f"capacitances halve or double (limit {settings.movement:g}°)")  # fmt: skip
        yield Finding(
            message, parts=[amplifier], consequence="whether the loop rings is left to strays and to the next batch",
            conditions=worst.conditions, evidence=figures(evidence),
            remedies=remedies(review, [amplifier], settings.damping, settings.phase_margin),
        )  # fmt: skip


def _log_parts(review: Review, amplifier: str) -> list[str]:
    """Transistors in the feedback of an amplifier."""
    parts = review.design.parts
    found = [ref for loop in review.structure.feedback_loops if loop.amplifier == amplifier and loop.input == "IN-"
             for ref in loop.parts if parts[ref].kind in ("npn", "pnp")]  # fmt: skip
    return list(dict.fromkeys(found))


def _bare(review: Review) -> list[str]:
    """Amplifiers with a transistor in their feedback and no capacitor to their summing node."""
    return [ref for ref, part in review.design.parts.items()
            if part.kind == "op-amp" and _log_parts(review, ref) and not _compensated(review, ref)]  # fmt: skip


def _compensated(review: Review, amplifier: str) -> bool:
    """Whether a capacitor lies from either side of the emitter resistor to the summing node."""
    parts = review.design.parts
    pins = parts[amplifier].pins
    sides = {pins["OUT"]}
    for ref in _log_parts(review, amplifier):
        sides.update(n for p in parts.values() if p.kind == "resistor" and pins["OUT"] in p.pins.values()
                     and parts[ref].pins["E"] in p.pins.values() for n in p.pins.values())  # fmt: skip
    return any(p.kind == "capacitor" and pins["IN-"] in p.pins.values() and sides & set(p.pins.values())
               for p in parts.values())  # fmt: skip


def _scaled(review: Review, factor: float) -> dict[tuple[str, str], float]:
    """All transistors' capacitances times `factor`."""
    return {(ref, name): factor * getattr(part, name).typ for ref, part in review.design.parts.items()
            if part.kind in ("npn", "pnp") for name in CAPACITANCES}  # fmt: skip


def _without_capacitances(review: Review, amplifier: str) -> str:
    """First transistor in the loop whose model gives no capacitances."""
    parts = review.design.parts
    bare = [r for r in _log_parts(review, amplifier) if not parts[r].given.intersection(CAPACITANCES)]
    return bare[0] if bare else ""
