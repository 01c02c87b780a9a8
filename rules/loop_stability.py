"""Loops that oscillate or ring.

Natural frequencies decide: margins of single amplifiers can all be comfortable while two loops that
share a node ring together. Margins say which amplifier and how far.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Annotated

import numpy as np

from rulecheck.api import (
    BaseModel,
    Evidence,
    Finding,
    IslandLoops,
    Loops,
    Remedy,
    Review,
    Ringing,
    Rule,
    Severity,
    Unit,
    format_quantity,
    ringing,
)

from ._compensation import calmed, remedies
from ._words import figures


class LoopStability(Rule):
    """Natural frequencies in the right half-plane, or with little damping; amplifiers with little margin.

    The gain around a log loop moves over decades with the signal current, so a loop that is calm at one
    current may ring at another: every review condition is judged at which no amplifier is saturated.
    One finding names all amplifiers whose loops take part in the same modes; they are cured together. Thin
    margins of the others count where they stay thin without the ringing.
    """

    name = "loop-stability"
    title = "Loop that oscillates or rings"
    source = "Nyquist and natural frequencies, textbook theory; limits: common practice, no source"
    default_severity = Severity.MINOR
    needs = ("operating_points", "loops")

    class Settings(BaseModel):
        """Limits."""

        damping: float = 0.3
        serious_damping: float = 0.15
        phase_margin: Annotated[float, Unit("deg")] = 45.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge the modes first, then the margins of amplifiers that take part in no ringing."""
        for island in review.loops.islands:
            signs = [review.loops.dc_return_ratio(a) for a in island.amplifiers]
            # where feedback is positive at DC, that is the fault to mend first
            judged = island.judged & np.all([~(t < 0) for t in signs], axis=0) if signs else np.zeros(0, bool)
            if judged.any():
                yield from self._island(review, settings, island, judged)

    def _island(self, review: Review, settings: Settings, island: IslandLoops, judged: np.ndarray) -> Iterable[Finding]:
        groups = ringing(island, settings.damping, judged)
        for group in groups:
            beside = [a for other in groups if other is not group for a in other.amplifiers]
            yield self._ringing(review, settings, group, beside)
        loud = [a for group in groups for a in group.amplifiers]
        others = [a for a in island.amplifiers if a not in loud]
        calm = _calm(review, settings.damping, loud, judged) if loud and others else review
        if calm is None:
            return
        for amplifier in others:
            margin = np.where(judged, calm.loops.phase_margin(amplifier), np.nan)
            if np.isfinite(margin).any() and np.nanmin(margin) < settings.phase_margin:
                cures = remedies(review, [amplifier], settings.damping, settings.phase_margin, beside=loud)
                yield self._thin(calm.loops, settings, amplifier, margin, cures)

    def _ringing(self, review: Review, settings: Settings, group: Ringing, beside: list[str]) -> Finding:
        loops, parts = review.loops, group.amplifiers
        unstable = bool(np.nanmax(group.growth) > 0)
        worst = loops.points.worst(group.growth) if unstable else loops.points.least(group.damping)
        ratio, frequency = float(group.damping[worst.index]), float(group.frequency[worst.index])
        rings = ratio > -1  # else a real mode grows, without ringing
        at = f" near {format_quantity(frequency, 'Hz', 3)}" if rings else ""
        who = ", ".join(parts)
        evidence = [
            Evidence("damping ratio", ratio if rings else np.nan, "1", settings.damping, ">=", over=group.damping),
            Evidence("rightmost natural frequency", float(group.growth[worst.index]), "1/s", 0.0, "<",
                     over=group.growth),
            *(Evidence(f"phase margin of {a}", float(loops.phase_margin(a)[worst.index]), "deg",
                       settings.phase_margin, ">=", over=loops.phase_margin(a)) for a in parts),
        ]  # fmt: skip
        if unstable:
            message, consequence = (
                f"{who}: unstable{at}",
                "the circuit oscillates or latches instead of computing",
            )
        else:
            message = f"{who}: damping ratio {ratio:.2f}{at}, limit {settings.damping:g}"
            overshoot = 100 * np.exp(-np.pi * ratio / np.sqrt(max(1 - ratio**2, 1e-9)))
            consequence = f"a step rings with about {overshoot:.0f} % overshoot"
        serious = unstable or ratio < settings.serious_damping
        return Finding(
            message, parts=parts, severity=Severity.MAJOR if serious else Severity.MINOR, consequence=consequence,
            conditions=worst.conditions, evidence=figures(evidence),
            remedies=remedies(review, parts, settings.damping, settings.phase_margin, beside=beside),
        )  # fmt: skip

    def _thin(
        self, loops: Loops, settings: Settings, amplifier: str, margin: np.ndarray, cures: list[Remedy]
    ) -> Finding:
        worst = loops.points.least(margin)
        crossover = float(loops.crossover(amplifier)[worst.index])
        return Finding(
            f"{amplifier}: phase margin {worst.value:.1f}° at {format_quantity(crossover, 'Hz', 3)}, "
            f"limit {settings.phase_margin:g}°",
            parts=[amplifier], severity=Severity.MINOR, conditions=worst.conditions,
            consequence="strays and spread of the parts may make the loop ring",
            evidence=figures([
                Evidence("phase margin", worst.value, "deg", settings.phase_margin, ">=", over=margin),
                Evidence("modulus margin", float(loops.modulus_margin(amplifier)[worst.index]), "1"),
            ]),
            remedies=cures,
        )  # fmt: skip


def _calm(review: Review, damping: float, loud: list[str], judged: np.ndarray) -> Review | None:
    """The review without the ringing, in which the margins of the others are their own; None where it will not stop."""
    for calm in calmed(review, loud):
        if not ringing(calm.loops.island_of(loud[0]), damping, judged):
            return calm
    return None
