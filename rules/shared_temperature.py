"""Temperature of compared junctions, and of the resistor that compensates them.

A base-emitter voltage falls by about 2 mV/K: 1 K between two junctions is 8 % of current.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Iterator, Sequence
from typing import Annotated

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    BaseModel,
    Cost,
    Edit,
    Evidence,
    Finding,
    Remedy,
    Review,
    Rule,
    Set,
    Severity,
    Unit,
    format_quantity,
    join_key,
    worst_cost,
)  # fmt: skip

from ._pairs import Pair, are_linked, chosen_pairs, cost_evidence, cost_words, is_linked, is_together, link, one_package

Array = npt.NDArray[np.float64]
LEAST_DIFFERENCE = 2e-3  # K: what the temperatures themselves are solved to
CLOSER = 2.0  # a link than what the excess asks, as other heat paths go round it


class SharedTemperature(Rule):
    """Junctions of a pair, or a tempco resistor and the junctions it compensates, that are not at one temperature.

    In different packages without a thermal link nothing keeps them together: that is a fault, a small one only where
    2 K between them would cost every output less than its share. Where they share a package or a link, the computed
    temperatures count: the circuit is solved again with them made equal, and the change is the error. Between
    pairs of one loop only the ratio of absolute temperatures matters, so packages of different pairs need no link.
    """

    name = "shared-temperature"
    title = "Junctions, or a tempco resistor and its junctions, at different temperatures"
    source = "dVBE/dT = (VBE - (3 kT/q + Eg))/T, textbook; 2 K between unlinked packages: common practice, no source"
    default_severity = Severity.MAJOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits."""

        unlinked_difference: Annotated[float, Unit("K")] = 2.0
        least_tempco: Annotated[float, Unit("ppm/K")] = 2000e-6
        most_tempco: Annotated[float, Unit("ppm/K")] = 5000e-6
        shares: float = 1.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge pairs, then loops of several pairs, then tempco resistors."""
        loops = review.structure.junction_loops
        for pair in dict.fromkeys(pair for loop in loops for pair in chosen_pairs(review, loop)):
            yield from _judge(review, settings, pair[1], [pair[0]], one_package(review.design, pair))
        for loop in loops:
            if len(chosen_pairs(review, loop)) > 1:
                yield from _ratio(review, settings, chosen_pairs(review, loop))
        for ref, junctions in _compensating(review, settings).items():
            yield from _judge(review, settings, ref, junctions, [])


def _compensating(review: Review, settings: SharedTemperature.Settings) -> dict[str, list[str]]:
    """Resistors with a tempco of about 1/T, with the junctions of the loops they weigh."""
    found: dict[str, list[str]] = {}
    for loop in review.structure.junction_loops:
        for ref in loop.level_shifts:
            tempco = abs(review.design.parts[ref].tempco.typ)
            if settings.least_tempco <= tempco <= settings.most_tempco:
                found[ref] = list(dict.fromkeys([*found.get(ref, []), *loop.parts]))
    return found


def _judge(
    review: Review, settings: SharedTemperature.Settings, ref: str, others: Sequence[str], package: list[Edit]
) -> Iterator[Finding]:
    """Judge one part against the junctions that it must be as warm as."""
    design = review.design
    pairs: list[Pair] = [(other, ref) for other in others]
    if not any(is_together(design, pair) or is_linked(design, pair) for pair in pairs):
        yield _apart(review, settings, ref, others, package)
        return
    temperatures = _temperatures(review, [ref, *others])
    own, mean = temperatures[ref], np.mean([temperatures[other] for other in others], axis=0)
    middle = (own + mean) / 2 if len(others) == 1 else mean
    equal = {ref: middle} | ({others[0]: middle} if len(others) == 1 else {})
    yield from _difference(review, settings, [*others, ref], own - mean, equal, "temperature difference")


def _apart(
    review: Review, settings: SharedTemperature.Settings, ref: str, others: Sequence[str], package: list[Edit]
) -> Finding:
    design, step = review.design, settings.unlinked_difference
    cost = worst_cost(review, temperatures={ref: _temperatures(review, [ref])[ref] + step})
    minor = cost is not None and cost.worst.value < settings.shares
    packages = [design.parts[others[0]].package, design.parts[ref].package]
    remedies = [Remedy(f"move {others[0]} and {ref} into one package", package)] if package else []
    remedies.append(Remedy(f"couple {packages[0]} and {packages[1]} thermally", [link(packages)]))
    return Finding(
        f"{ref} in {packages[1]} is to be as warm as {_listed(others)} in {packages[0]}, and no thermal link joins "
        "the packages",
        parts=[*others, ref], severity=Severity.MINOR if minor else Severity.MAJOR, subject="packages",
        consequence=_consequence(review, cost, f"for {format_quantity(step, 'K')} between them "),
        conditions=cost.worst.conditions if cost else None, at=join_key(("parts", ref, "package")),
        evidence=[Evidence("temperature difference supposed", step, "K", basis="limit"),
                  *([cost_evidence(cost.worst.value, cost.ratio, "limit")] if cost else [])],
        remedies=remedies,
    )  # fmt: skip


def _ratio(review: Review, settings: SharedTemperature.Settings, pairs: Sequence[Pair]) -> Iterator[Finding]:
    """Judge pairs of one loop in different packages, each pair by its mean temperature."""
    refs = list(dict.fromkeys(ref for pair in pairs for ref in pair))
    temperatures = _temperatures(review, refs)
    means = np.array([(temperatures[a] + temperatures[b]) / 2 for a, b in pairs])
    common = means.mean(axis=0)
    own = dict(zip([ref for pair in pairs for ref in pair], np.repeat(means, 2, axis=0), strict=True))
    equal = {ref: temperatures[ref] * common / own[ref] for ref in refs}
    spread = means.max(axis=0) - means.min(axis=0)
    yield from _difference(review, settings, refs, spread, equal, "temperature difference of pairs")


def _difference(
    review: Review, settings: SharedTemperature.Settings, refs: Sequence[str], apart: Array,
    equal: dict[str, Array], subject: str,
) -> Iterator[Finding]:  # fmt: skip
    if np.abs(apart).max() < LEAST_DIFFERENCE:
        return
    cost = worst_cost(review, temperatures=equal)
    if cost is None or cost.worst.value <= settings.shares:
        return
    at = cost.worst.index
    yield Finding(
        f"{_listed(refs)} are {format_quantity(abs(float(apart[at])), 'K', 3)} apart, which costs "
        f"{cost.worst.value:.3g} times its share at {cost.output}",
        parts=refs, severity=Severity.MINOR, subject=subject, conditions=cost.worst.conditions,
        consequence=_consequence(review, cost, ""),
        evidence=[Evidence(subject, abs(float(apart[at])), "K", over=np.abs(apart)),
                  cost_evidence(cost.worst.value, cost.ratio, "typ")],
        remedies=_closer(review, refs, cost.worst.value),
    )  # fmt: skip


def _closer(review: Review, refs: Sequence[str], excess: float) -> list[Remedy]:
    """A common die; thermal links where there are none; closer ones where they are too loose."""
    design = review.design
    packages = list(dict.fromkeys(design.parts[ref].package for ref in refs))
    if len(packages) == 1:
        title = f"use one with all of {packages[0]} on a single die"
        return [Remedy(title, [Set(join_key(("packages", packages[0], "die")), "single")])]
    missing = [ends for ends in itertools.pairwise(packages) if not are_linked(design, ends)]
    if missing:
        return [Remedy(f"couple {_listed(packages)} thermally", [link(ends) for ends in missing])]
    thetas = {i: entry.theta for i, entry in enumerate(design.thermal_links) if set(entry.between) <= set(packages)}
    closer = {i: format_quantity(theta / (CLOSER * excess), "K/W", 2) for i, theta in thetas.items()}
    edits = [Set(join_key(("thermal_links", str(i), "theta")), theta) for i, theta in closer.items()]
    return [Remedy(f"couple {_listed(packages)} more closely, {', '.join(closer.values())}", edits)]


def _temperatures(review: Review, refs: Iterable[str]) -> dict[str, Array]:
    """Temperatures of parts, at ambient where there is no operating point."""
    ambient = review.conditions.values["ambient"]
    found = {ref: review.operating_points.temperature(ref) for ref in refs}
    return {ref: np.where(np.isfinite(t), t, ambient) for ref, t in found.items()}


def _consequence(review: Review, cost: Cost | None, lead: str) -> str:
    if cost is None:
        return "each kelvin between them adds about 2 mV to the loop"
    at = cost.worst.index
    reading = float(review.operating_points.voltage(cost.output)[at])
    return lead + cost_words(cost.output, float(cost.error[at]), reading)


def _listed(names: Sequence[str]) -> str:
    return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)
