"""Total supply of amplifiers against what their models allow."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator

import numpy as np

from rulecheck.api import (
    Edit,
    Evidence,
    Finding,
    Remedy,
    Review,
    Rule,
    Set,
    Severity,
    Spread,
    format_quantity,
    join_key,
)

from ._edits import quantity, set_parameter
from ._rails import SUPPLY_PINS, Rails, powered

USUAL_SUPPLIES = (1.8, 2.5, 3.3, 5.0, 6.0, 8.0, 9.0, 10.0, 12.0, 15.0, 18.0, 24.0, 30.0, 36.0, 48.0)
"""Volts that regulators are sold for."""
MOST_MODELS = 2
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
        """Judge amplifiers of one model on the same rails together: they have one cause."""
        groups: dict[tuple[str | None, float, float, str, str], list[str]] = {}
        for ref, part in powered(review.design).items():
            if part.supply is not None:
                rails = (part.pins["V+"], part.pins["V-"])
                groups.setdefault((part.model, part.supply.min, part.supply.max, *rails), []).append(ref)
        for (_, low, high, positive, negative), refs in groups.items():
            yield from _judge(review, refs, (low, high), (positive, negative))


def _judge(review: Review, refs: list[str], span: tuple[float, float], rails: tuple[str, str]) -> Iterator[Finding]:
    points = review.operating_points
    total = points.voltage(rails[0]) - points.voltage(rails[1])
    least, most = points.least(total), points.worst(total)
    who, (low, high) = ", ".join(refs), span
    if most.value > high * (1 + SAME):
        worst, limit, relation, than = most, high, "<=", "over"
        consequence = "the amplifier may break down"
    elif least.value < low * (1 - SAME):
        worst, limit, relation, than = least, low, ">=", "under"
        consequence = "none of its data holds"
    else:
        return
    spread = Spread(least.value, float(np.nanmedian(total)), most.value)
    yield Finding(
        f"{who}: total supply {format_quantity(worst.value, 'V')} is {than} the limit of {format_quantity(limit, 'V')}",
        parts=refs, conditions=worst.conditions, consequence=consequence,
        evidence=[Evidence("total supply", worst.value, "V", limit, relation, over=total, basis="limit")],
        remedies=[*_supplies(review, refs[0], spread), *_models(review, refs, spread)],
    )  # fmt: skip


def _models(review: Review, refs: list[str], total: Spread) -> Iterator[Remedy]:
    """Amplifier models that take the supply, the ones nearest in speed and input current first."""
    own = review.design.parts[refs[0]]
    fitting = [
        (_distance(own, model.parameters), name)
        for name, model in review.design.models.items()
        if model.kind == "op-amp" and name != own.model and (supply := model.parameters.supply) is not None
        and supply.min <= total.min and total.max <= supply.max
    ]  # fmt: skip
    for _, name in sorted(fitting)[:MOST_MODELS]:
        yield Remedy(f"take {name}, which allows it", [set_parameter(ref, "model", name) for ref in refs])
    if not fitting:
        yield Remedy("take an amplifier for this supply: no catalogue has one")


def _distance(own: object, other: object) -> float:
    """How unlike two amplifiers are, in decades of gain-bandwidth and of bias current."""
    speeds = [getattr(a, "gain_bandwidth").typ for a in (own, other)]  # noqa: B009 - parts and models alike
    biases = [_most(getattr(a, "bias_current", None)) for a in (own, other)]
    return abs(math.log10(speeds[0] / speeds[1])) + abs(math.log10(biases[0] / biases[1]))


def _most(bias: Spread | None) -> float:
    return max(abs(bias.min), abs(bias.max), 1e-15) if bias is not None else 1e-15


def _supplies(review: Review, ref: str, total: Spread) -> Iterator[Remedy]:
    """The usual supply nearest to what there is that the amplifier allows, its supplies kept in proportion."""
    design, part = review.design, review.design.parts[ref]
    rails = Rails(design)
    sources = dict.fromkeys(feed.source for pin in SUPPLY_PINS if (feed := rails.feed(part, pin)) is not None)
    volts = {n: v for n in sources if (v := design.nets[n].voltage) is not None and design.nets[n].role == "supply"}
    # A voltage written as a table states its limits itself; one value in its place would drop them.
    if not volts or not all(isinstance(design.data["nets"][name]["voltage"], str) for name in volts):
        return
    largest = max(abs(v.typ) for v in volts.values())
    fitting = [
        usual for usual in USUAL_SUPPLIES
        if part.supply.min <= total.min * usual / largest and total.max * usual / largest <= part.supply.max
    ]  # fmt: skip
    if not fitting:
        return
    usual = min(fitting, key=lambda usual: abs(math.log(usual / largest)))
    new = {name: quantity(v.typ * usual / largest, "V") for name, v in volts.items()}
    edits: list[Edit] = [Set(join_key(("nets", name, "voltage")), text) for name, text in new.items()]
    yield Remedy("make " + " and ".join(f"{name} {text}" for name, text in new.items()), edits)
