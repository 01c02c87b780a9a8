"""Total supply of amplifiers against what their models allow."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator

import numpy as np

from rulecheck.api import (
    Edit,
    Evidence,
    Finding,
    Part,
    Remedy,
    Review,
    Rule,
    Set,
    Severity,
    format_quantity,
    join_key,
)

from ._edits import quantity
from ._models import USUAL_SUPPLIES, other_models
from ._rails import SUPPLY_PINS, Rails, powered

SAME = 1e-9
"""Rounding of a sum of supplies, as a fraction; no limit of a data sheet is that fine."""


class SupplyRating(Rule):
    """Amplifiers whose total supply leaves the range of their model.

    The total is what stands between V+ and V- at the extremes of the supplies' tolerances, behind whatever is
    in series with the pins. Above the range the amplifier breaks down; below it, nothing of its data holds.
    """

    name = "supply-rating"
    title = "Amplifier supply outside its rating"
    source = "the maker's absolute ratings and supply range, as the model states them"
    default_severity = Severity.MAJOR
    needs = ("operating_points",)

    def check(self, review: Review, settings: object) -> Iterable[Finding]:
        """Judge amplifiers of one model on the same supplies together: they have one cause."""
        rails = Rails(review.design)
        groups: dict[tuple[object, ...], list[str]] = {}
        for ref, part in powered(review.design).items():
            if part.supply is not None:
                groups.setdefault((part.model, part.supply, *_sources(rails, part)), []).append(ref)
        for refs in groups.values():
            yield from _judge(review, refs)


def _sources(rails: Rails, part: Part) -> list[str]:
    """What feeds the supply pins; the pin's own net where nothing does."""
    feeds = ((rails.feed(part, pin), part.pins[pin]) for pin in SUPPLY_PINS)
    return [feed.source if feed is not None else net for feed, net in feeds]


def _judge(review: Review, refs: list[str]) -> Iterator[Finding]:
    points, parts = review.operating_points, review.design.parts
    supply = parts[refs[0]].supply
    totals = [points.voltage(parts[ref].pins["V+"]) - points.voltage(parts[ref].pins["V-"]) for ref in refs]
    highest, lowest = np.max(totals, axis=0), np.min(totals, axis=0)
    most, least = points.worst(highest), points.least(lowest)
    if most.value > supply.max * (1 + SAME):
        worst, over, limit, relation, than = most, highest, supply.max, "<=", "over"
        consequence = "the amplifier may break down"
    elif least.value < supply.min * (1 - SAME):
        worst, over, limit, relation, than = least, lowest, supply.min, ">=", "under"
        consequence = "none of its data holds"
    else:
        return
    who = ", ".join(refs)
    yield Finding(
        f"{who}: total supply {format_quantity(worst.value, 'V')} is {than} the limit of {format_quantity(limit, 'V')}",
        parts=refs, conditions=worst.conditions, consequence=consequence,
        evidence=[Evidence("total supply", worst.value, "V", limit, relation, over=over, basis="limit")],
        remedies=[*_supplies(review, refs[0], least.value, most.value), *_models(review, refs)],
    )  # fmt: skip


def _models(review: Review, refs: list[str]) -> list[Remedy]:
    # whatever takes the supply fits: that is all that is wrong
    found = other_models(review, refs, lambda model: True, ("supply",), "it takes this supply")
    return found or [Remedy("take an amplifier for this supply: no catalogue of the design has one")]


def _supplies(review: Review, ref: str, least: float, most: float) -> Iterator[Remedy]:
    """The usual supply nearest to what there is that the amplifier allows, its supplies kept in proportion."""
    design, part = review.design, review.design.parts[ref]
    rails = Rails(design)
    sources = _sources(rails, part)
    volts = {n: v for n in sources if design.nets[n].role == "supply" and (v := design.nets[n].voltage) is not None}
    # A voltage written as a table states its limits itself; one value in its place would drop them.
    if not volts or not all(isinstance(design.data["nets"][name]["voltage"], str) for name in volts):
        return
    largest = max(abs(v.typ) for v in volts.values())
    low, high = part.supply.min / least, part.supply.max / most
    fitting = [usual for usual in USUAL_SUPPLIES if low <= usual / largest <= high]
    if not fitting:
        return
    usual = min(fitting, key=lambda usual: abs(math.log(usual / largest)))
    new = {name: quantity(v.typ * usual / largest, "V") for name, v in volts.items()}
    edits: list[Edit] = [Set(join_key(("nets", name, "voltage")), text) for name, text in new.items()]
    yield Remedy("make " + " and ".join(f"{name} {text}" for name, text in new.items()), edits)
