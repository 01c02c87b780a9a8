"""The noise that a requirement allows at its output."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator, Mapping

import numpy as np

from rulecheck.api import (
    Evidence,
    Finding,
    Remedy,
    Requirement,
    Review,
    Rule,
    RulecheckError,
    Set,
    Severity,
    format_quantity,
    is_regulated,
    join_key,
    nearest,
)

from ._models import other_models
from ._words import percent

MOST_NAMED = 3
MOST_REMEDIES = 2
LARGER = (1.5, 2.2, 4.7, 10.0, 22.0)
"""Factors by which a capacitor is raised."""
QUIETER = 0.7


class Noise(Rule):
    """The computed noise at an output over the band of its requirement, RMS, against what it allows.

    Thermal noise of resistors, shot noise of junctions, voltage and current noise of amplifiers with their 1/f
    corners where these are given, at the ends and the middle of the inputs' ranges and of ambient. What an amplifier
    does not state is not counted, and the finding says so; supplies, references and inputs are quiet.
    """

    name = "noise"
    title = "More noise than required"
    source = "4kTR and 2qI, textbook; uncorrelated sources add by their squares"
    default_severity = Severity.MAJOR
    needs = ("operating_points",)

    def check(self, review: Review, settings: object) -> Iterator[Finding]:
        """Judge each requirement with a limit of noise."""
        for requirement in review.design.requirements.values():
            yield from self._judge(review, requirement)

    def _judge(self, review: Review, requirement: Requirement) -> Iterator[Finding]:
        asked, net = requirement.noise, requirement.output
        if asked is None:
            return
        points, found = review.noise_of(requirement)
        rms = np.where(is_regulated(review, points, net), found.rms, np.nan)
        who, key = f"requirement {requirement.name}", join_key(("requirements", requirement.name, "noise"))
        unknown = _unknown(found.missing)
        if not np.isfinite(rms).any():
            yield Finding(
                f"{who}: no figure for the noise of {net}", nets=[net], subject=requirement.name, at=key,
                severity=Severity.OBSERVATION,
                consequence="nowhere are the amplifiers inside their limits and the circuit stable",
                remedies=[Remedy("see the other findings first")],
            )  # fmt: skip
            return
        worst = points.worst(rms)
        if worst.value <= asked.max:
            return
        sources: dict[str, float] = defaultdict(float)
        for one in found.sorted_at(worst.index):
            sources[one.owner] += float(np.nan_to_num(one.rms[worst.index])) ** 2
        order = sorted(sources, key=lambda owner: -sources[owner])
        named = [f"{owner} {percent(sources[owner] / worst.value**2)}" for owner in order[:MOST_NAMED]]
        band = " to ".join(format_quantity(end, "Hz") for end in asked.bandwidth)
        yield Finding(
            f"{who}: noise of {net} is {format_quantity(worst.value, 'V', 3)} RMS from {band}, "
            f"{format_quantity(asked.max, 'V', 3)} are allowed{unknown}",
            nets=[net], subject=requirement.name, conditions=worst.conditions, at=key,
            consequence=f"a reading of {net} jitters by {percent(worst.value / asked.max)} of what it may; of its "
                        f"power {', '.join(named)}" + _of_allowed(requirement, worst.value),
            evidence=[Evidence("noise, RMS", worst.value, "V", asked.max, "<=", over=rms),
                      Evidence(f"noise of {order[0]}, RMS", float(np.sqrt(sources[order[0]])), "V")],
            remedies=list(_remedies(review, requirement, order)) if review.seeks_remedies else [],
        )  # fmt: skip


def _unknown(missing: Mapping[str, tuple[str, ...]]) -> str:
    """What is not in the figure, in words."""
    words = [f"{', '.join(keys)} of {ref}" for ref, keys in missing.items()]
    return f" (without {' and '.join(words)}, not stated)" if words else ""


def _of_allowed(requirement: Requirement, rms: float) -> str:
    if not requirement.absolute:
        return ""
    error = format_quantity(requirement.absolute, "V", 3)
    return f"; that is {percent(rms / requirement.absolute)} of the error of {error} allowed"


def _remedies(review: Review, requirement: Requirement, order: list[str]) -> Iterator[Remedy]:
    parts = review.design.parts
    found = 0
    for remedy in _quieter_amplifier(review, requirement, order[0]) if order[0] in parts else []:
        found += 1
        yield remedy
    larger = sorted(_larger_capacitors(review, requirement), key=lambda one: one[0])
    for _, ref, words in larger[:MOST_REMEDIES]:
        found += 1
        yield Remedy(f"make {ref} {words}: less bandwidth", [Set(join_key(("parts", ref, "value")), words)])
    if not found:
        yield Remedy(
            f"{order[0]} makes most of it: a lower resistance or more signal current there, or a narrower band"
        )


def _quieter_amplifier(review: Review, requirement: Requirement, ref: str) -> list[Remedy]:
    """Amplifier models of less noise in place of the one that makes most of it, tried."""
    part = review.design.parts[ref]
    if part.kind != "op-amp" or part.voltage_noise is None:
        return []
    present, current = part.voltage_noise.typ, part.current_noise

    def fits(model: object) -> bool:
        voltage, flow = getattr(model, "voltage_noise", None), getattr(model, "current_noise", None)
        quiet = voltage is not None and voltage.typ <= QUIETER * present
        return quiet or (current is not None and flow is not None and flow.typ <= QUIETER * current.typ)

    options = other_models(review, [ref], fits, ("voltage_noise", "current_noise"), "it has less noise")
    return [r for r in options if r.edits and _is_met(review, requirement, r)]


def _larger_capacitors(review: Review, requirement: Requirement) -> Iterator[tuple[float, str, str]]:
    """Factor, capacitor and value that bring the noise down to its limit, for each capacitor of an amplifier's loop."""
    outputs = {part.pins["OUT"] for part in review.design.parts.values() if part.kind == "op-amp"}
    for ref, part in review.design.parts.items():
        if part.kind != "capacitor" or not outputs & set(part.pins.values()):
            continue
        for factor in LARGER:
            words = format_quantity(nearest(part.value.typ * factor, "E12"), "F", 3)
            if _is_met(review, requirement, Remedy("", [Set(join_key(("parts", ref, "value")), words)])):
                yield factor, ref, words
                break


def _is_met(review: Review, requirement: Requirement, remedy: Remedy) -> bool:
    try:
        after = review.edited(remedy.edits)
        asked = after.design.requirements[requirement.name]
        points, found = after.noise_of(asked)
    except RulecheckError:
        return False
    rms = np.where(is_regulated(after, points, asked.output), found.rms, np.nan)
    return asked.noise is not None and bool(np.isfinite(rms).any() and np.nanmax(rms) <= asked.noise.max)
