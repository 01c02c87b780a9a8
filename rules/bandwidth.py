"""The bandwidth that a requirement asks for.

A log stage is slowest where its signal is least: the resistance of the junction, kT/(q·I), works against the
compensation capacitor, so that its bandwidth is q·I/(2π·kT·C).
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    Evidence,
    Finding,
    OperatingPoints,
    Remedy,
    Requirement,
    Review,
    Rule,
    RulecheckError,
    Set,
    Severity,
    format_quantity,
    forward_current,
    is_regulated,
    join_key,
    nearest,
)

Array = npt.NDArray[np.float64]
MOST_REMEDIES = 2
ROUNDS = 6
MARGIN = 1.1
HALVED = 0.5
MATTERS = 1.02
"""Gain in bandwidth by halving a capacitor from which it has a part in the matter."""


class Bandwidth(Rule):
    """The computed small-signal −3 dB bandwidth at the point that the requirement names, over ambient and supplies.

    It is judged where the amplifiers before the output are inside their limits. A point that gives the input its least
    current is the one to ask for. Slewing is not looked at.
    """

    name = "bandwidth"
    title = "Bandwidth less than required"
    source = "-3 dB by the linearised network; I/(2 pi VT C) of a log stage is textbook"
    default_severity = Severity.MAJOR
    needs = ("operating_points",)

    def check(self, review: Review, settings: object) -> Iterator[Finding]:
        """Judge each requirement with a bandwidth."""
        for requirement in review.design.requirements.values():
            yield from self._judge(review, requirement)

    def _judge(self, review: Review, requirement: Requirement) -> Iterator[Finding]:
        asked = requirement.bandwidth
        if asked is None:
            return
        points, found = _computed(review, requirement)
        key = join_key(("requirements", requirement.name, "bandwidth"))
        who = f"requirement {requirement.name}"
        if np.isnan(found).all():
            yield Finding(
                f"{who}: no bandwidth from {asked.input} to {requirement.output} at the point it is asked for",
                nets=[requirement.output], subject=requirement.name, severity=Severity.OBSERVATION, at=key,
                consequence="nothing of the input arrives there, an amplifier is at its limit, or the circuit is not "
                            "stable",
                remedies=[Remedy("see the other findings, or ask for the bandwidth at a point inside the range")],
            )  # fmt: skip
            return
        worst = points.least(found)
        if worst.value >= asked.min:
            return
        signal = format_quantity(worst.conditions[asked.input], review.design.inputs[asked.input].unit, 3)
        yield Finding(
            f"{who}: the bandwidth from {asked.input} to {requirement.output} is "
            f"{format_quantity(worst.value, 'Hz', 3)} at {signal}, {format_quantity(asked.min, 'Hz', 3)} are asked",
            nets=[requirement.output], subject=requirement.name, conditions=worst.conditions, at=key,
            consequence=f"{requirement.output} does not follow changes of {asked.input} faster than that"
                        + _slowest(review, points, worst.index),
            evidence=[Evidence("bandwidth", worst.value, "Hz", asked.min, ">=", over=found)],
            remedies=list(_remedies(review, requirement, worst.value)) if review.seeks_remedies else [],
        )  # fmt: skip


def _computed(review: Review, requirement: Requirement) -> tuple[OperatingPoints, Array]:
    """Operating points and bandwidths, NaN where an amplifier before the output is at its limit."""
    points, found = review.bandwidth_of(requirement)
    return points, np.where(is_regulated(review, points, requirement.output), found, np.nan)


def _slowest(review: Review, points: OperatingPoints, index: int) -> str:
    """The log transistor with the least current at a point, in words."""
    logs = [log.part for log in review.structure.log_transistors]
    currents = {ref: float(forward_current(points, ref)[index]) for ref in logs}
    if not currents:
        return ""
    ref = min(currents, key=lambda r: abs(currents[r]))
    return f"; {ref} works with {format_quantity(currents[ref], 'A', 3)} there"


def _least(review: Review, requirement: Requirement) -> float:
    """Least bandwidth of a requirement [Hz], 0 where there is none."""
    _, found = _computed(review, review.design.requirements[requirement.name])
    return float(np.nanmin(found)) if np.isfinite(found).any() else 0.0


def _remedies(review: Review, requirement: Requirement, present: float) -> Iterator[Remedy]:
    parts = review.design.parts
    gains = {}
    for ref, part in parts.items():
        if part.kind == "capacitor" and part.value.typ > 0:
            gain = _with(review, requirement, ref, part.value.typ * HALVED) / present
            if gain > MATTERS:
                gains[ref] = gain
    found = 0
    for ref in sorted(gains, key=lambda r: -gains[r]):
        value = _smaller(review, requirement, ref, present)
        if value is not None and found < MOST_REMEDIES:
            found += 1
            words = format_quantity(value, "F", 3)
            yield Remedy(f"make {ref} {words}", [Set(join_key(("parts", ref, "value")), words)])
    ranged = _from_a_larger_signal(review, requirement)
    if ranged is not None:
        yield ranged
    if not found and ranged is None:
        yield Remedy("no smaller capacitor and no narrower range meets it: take more signal current, or fewer stages")


def _with(review: Review, requirement: Requirement, ref: str, farad: float) -> float:
    """Least bandwidth with another value of a capacitor."""
    words = format_quantity(farad, "F", 3)
    try:
        return _least(review.edited([Set(join_key(("parts", ref, "value")), words)]), requirement)
    except RulecheckError:
        return 0.0


def _smaller(review: Review, requirement: Requirement, ref: str, present: float) -> float | None:
    """The value of the E12 series, or less, that brings the bandwidth up to what is asked; None where none does."""
    least = requirement.bandwidth.min if requirement.bandwidth is not None else 0.0
    value, reached = review.design.parts[ref].value.typ, present
    for _ in range(ROUNDS):
        value = nearest(value * min(reached / (MARGIN * least), 0.9), "E12")
        before, reached = reached, _with(review, requirement, ref, value)
        if reached >= least:
            return value
        if reached <= before * MATTERS:
            return None
    return None


def _from_a_larger_signal(review: Review, requirement: Requirement) -> Remedy | None:
    """Ask the bandwidth from a larger signal upwards, where it is met."""
    asked = requirement.bandwidth
    if asked is None or asked.input not in review.design.inputs:
        return None
    source = review.design.inputs[asked.input]
    start = asked.at.get(asked.input, review.typical[asked.input])
    end = source.high if abs(source.high) >= abs(source.low) else source.low
    if start == 0 or start * end <= 0 or abs(end) <= abs(start):
        return None
    for value in np.geomspace(start, end, 9)[1:]:
        words = format_quantity(float(value), source.unit, 2)
        others = {n: format_quantity(v, _unit(review, n)) for n, v in asked.at.items() if n != asked.input}
        edit = Set(join_key(("requirements", requirement.name, "bandwidth", "at")), {asked.input: words, **others})
        try:
            met = _least(review.edited([edit]), requirement) >= asked.min
        except RulecheckError:
            return None
        if met:
            return Remedy(f"ask it from {asked.input} of {words} upwards only, where it is met", [edit])
    return None


def _unit(review: Review, name: str) -> str:
    if name in review.design.inputs:
        return review.design.inputs[name].unit
    if name == "ambient":
        return "degC"
    return "1" if name in review.design.parts else "V"
