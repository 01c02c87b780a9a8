"""Feedback that comes back with the wrong sign, or not at all."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np

from rulecheck.api import BaseModel, Evidence, Finding, Remedy, Review, Rule, Severity

from ._edits import swap_pins
from ._rails import powered

Array = np.ndarray[Any, np.dtype[np.float64]]


class FeedbackSign(Rule):
    """Amplifiers whose feedback at DC is positive or absent.

    Such an amplifier computes nothing: its output runs to a limit and stays there. The sign is that of the
    return ratio at zero frequency, with all other amplifiers at work, at every review point at which the
    amplifier is inside its limits; where it never is, that of the circuit with all junctions conducting.
    An amplifier with nothing but a capacitor around it is an integrator: inside an outer loop that is a
    choice, and worth knowing; by itself it runs away. Where several amplifiers come out positive, the ones
    are told of whose exchanged inputs set the others right.
    """

    name = "feedback-sign"
    title = "Positive feedback, or none"
    source = "return ratio at zero frequency, textbook theory"
    default_severity = Severity.MAJOR
    needs = ("operating_points", "loops")

    class Settings(BaseModel):
        """Magnitude of the return ratio below which there is no feedback to speak of."""

        least_return_ratio: float = 1.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge every amplifier that is in use."""
        words = {ref: _feedback(review, ref, settings.least_return_ratio) for ref in powered(review.design)}
        positive = [ref for ref, word in words.items() if word == "positive"]
        for ref, others in _causes(review, positive, settings.least_return_ratio).items():
            yield _positive(review, ref, others)
        ways = _ways_back(review)
        for ref, word in words.items():
            if word == "absent":
                yield _absent(review, ref)
            elif word == "negative" and _is_integrator(ways.get(ref, [])):
                yield _integrator(review, ref)


def _ratio(review: Review, ref: str) -> Array:
    """DC return ratio where the amplifier is inside its limits, NaN elsewhere."""
    ratio: Array = np.where(review.operating_points.linear(ref), review.loops.dc_return_ratio(ref), np.nan)
    return ratio


def _feedback(review: Review, ref: str, least: float) -> str:
    """``positive``, ``negative`` or ``absent``."""
    ratio = _ratio(review, ref)
    if not np.isfinite(ratio).any():
        return str(review.structure.dc_feedback.get(ref, "absent"))
    if np.nanmin(ratio) <= -least:
        return "positive"
    return "negative" if np.nanmax(ratio) >= least else "absent"


def _causes(review: Review, positive: list[str], least: float) -> dict[str, list[str]]:
    """Amplifiers to turn round so that all are right, with the others that each sets right.

    Where turning round any one of several does, the one that leaves the calmest circuit is the cause.
    """
    if len(positive) < 2:
        return {ref: [] for ref in positive}
    cured: dict[str, set[str]] = {}
    calm: dict[str, float] = {}
    for ref in positive:
        turned = review.edited(swap_pins(review.design, ref, "IN+", "IN-"))
        cured[ref] = {other for other in positive if _feedback(turned, other, least) != "positive"}
        calm[ref] = -float(np.nanmax(turned.loops.rightmost, initial=-np.inf))
    left, causes = list(positive), {}
    while left:
        best = max(left, key=lambda ref: (len(cured[ref].intersection(left)), calm[ref]))
        causes[best] = [ref for ref in left if ref in cured[best] and ref != best]
        left = [ref for ref in left if ref not in cured[best] and ref != best]
    return causes


def _positive(review: Review, ref: str, others: list[str]) -> Finding:
    ratio = _ratio(review, ref)
    remedies = [Remedy(f"swap the inputs of {ref}", swap_pins(review.design, ref, "IN+", "IN-"))]
    consequence = "its output runs to a limit and stays there"
    if not np.isfinite(ratio).any():
        return Finding(
            f"{ref}: feedback at DC is positive, and it is at a limit at every review point", parts=[ref],
            consequence=consequence, remedies=remedies,
        )  # fmt: skip
    worst = review.operating_points.least(ratio)
    too = f"; with it around {', '.join(others)}" if others else ""
    return Finding(
        f"{ref}: feedback at DC is positive, return ratio {worst.value:.3g}{too}", parts=[ref],
        conditions=worst.conditions, consequence=consequence, remedies=remedies,
        evidence=[Evidence("DC return ratio", worst.value, "1", 0.0, ">", over=ratio)],
    )  # fmt: skip


def _absent(review: Review, ref: str) -> Finding:
    ratio = _ratio(review, ref)
    evidence = []
    if np.isfinite(ratio).any():
        most = review.operating_points.worst(ratio)
        evidence = [Evidence("DC return ratio", most.value, "1", 0.0, ">", over=ratio)]
    return Finding(
        f"{ref}: no feedback at DC from its output to its inputs", parts=[ref], evidence=evidence,
        consequence="its output runs to a limit and stays there",
        remedies=[Remedy("close the loop from OUT to IN-, or say spare = true where it is not used")],
    )  # fmt: skip


def _integrator(review: Review, ref: str) -> Finding:
    outer = sorted({part for loop in review.structure.feedback_loops if loop.amplifier == ref
                    for part in loop.parts if review.design.parts[part].kind == "op-amp"})  # fmt: skip
    return Finding(
        f"{ref}: only a capacitor leads around it; at DC its loop closes through {', '.join(outer)}", parts=[ref],
        severity=Severity.OBSERVATION, consequence="it integrates: it settles only as the outer loop does",
        remedies=[Remedy("nothing to mend where an integrator is meant")],
    )  # fmt: skip


def _is_integrator(ways: list[set[str]]) -> bool:
    """Whether there are ways back without another amplifier, and all of them lead through a capacitor."""
    own = [kinds for kinds in ways if "op-amp" not in kinds]
    return bool(own) and all("capacitor" in kinds for kinds in own)


def _ways_back(review: Review) -> dict[str, list[set[str]]]:
    """Kinds of parts on each way from an amplifier's output to its inverting input, by amplifier."""
    ways: dict[str, list[set[str]]] = {}
    for loop in review.structure.feedback_loops:
        if loop.input == "IN-":
            ways.setdefault(loop.amplifier, []).append({review.design.parts[part].kind for part in loop.parts})
    return ways
