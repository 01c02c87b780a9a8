"""Amplifier models of the catalogues that could take the place of the present one, and higher supplies."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import Any

from rulecheck.api import Part, Remedy, Review, Set, format_quantity, join_key

from ._edits import quantity, set_parameter
from ._rails import SUPPLY_PINS, Rails, SupplyPin

MOST_MODELS = 2
USUAL_SUPPLIES = (2.5, 3.0, 3.3, 5.0, 6.0, 9.0, 10.0, 12.0, 15.0, 18.0, 20.0, 24.0, 28.0, 30.0, 36.0, 48.0)


def other_models(
    review: Review, amplifiers: Sequence[str], fits: Callable[[Any], bool], parameters: tuple[str, ...], why: str
) -> list[Remedy]:
    """Remedies that give amplifiers, and those in their packages, another model; nearest in character first.

    Parameters
    ----------
    review : Review
    amplifiers : sequence of str
    fits : callable
        Whether the parameters of a model cure the fault.
    parameters : tuple of str
        What `fits` looks at: no model cures a figure that the part states itself.
    why : str
        What the model has that the present one has not.
    """
    parts = review.design.parts
    present = parts[amplifiers[0]]
    together = in_packages_of(review, amplifiers)
    written = review.design.data["parts"]
    if any(name in written[r] for r in together for name in parameters):
        return []
    found = [
        (_strangeness(model.parameters, present), name)
        for name, model in review.design.models.items()
        if model.kind == "op-amp" and name != present.model and fits(model.parameters)
        and all(_takes_supply(review, r, model.parameters) for r in together)
    ]  # fmt: skip
    return [
        Remedy(f"take {name} for {', '.join(together)}: {why}", [set_parameter(r, "model", name) for r in together])
        for _, name in sorted(found)[:MOST_MODELS]
    ]


def in_packages_of(review: Review, amplifiers: Sequence[str]) -> list[str]:
    """Amplifiers that share a package with any of these, themselves included; one model serves a package."""
    parts = review.design.parts
    packages = {parts[a].package for a in amplifiers}
    return [ref for ref, part in parts.items() if part.kind == "op-amp" and part.package in packages]


def _takes_supply(review: Review, ref: str, model: Any) -> bool:  # noqa: ANN401  # an amplifier's parameters
    if model.supply is None:
        return False
    low, high = total_supply(review, ref)
    return bool(model.supply.min <= low and high <= model.supply.max)


def total_supply(review: Review, ref: str) -> tuple[float, float]:
    """Least and greatest total supply of an amplifier over the review conditions [V]."""
    points, pins = review.operating_points, review.design.parts[ref].pins
    total = points.voltage(pins["V+"]) - points.voltage(pins["V-"])
    return float(points.least(total).value), float(points.worst(total).value)


def _strangeness(model: Any, part: Part) -> float:  # noqa: ANN401  # an amplifier's parameters
    """How far a model is from a part in speed, and how much worse in bias current and offset."""
    change = abs(math.log(model.gain_bandwidth.typ / part.gain_bandwidth.typ))
    for name in ("bias_current", "offset_voltage"):
        old, new = (_size(getattr(x, name)) for x in (part, model))
        change += max(0.0, math.log(new / old)) if old and new else 0.0
    return change


def _size(spread: Any) -> float:  # noqa: ANN401  # a spread or nothing
    return 0.0 if spread is None else max(abs(spread.min), abs(spread.max))


def higher_supply(review: Review, ref: str, pin: SupplyPin, missing: float) -> list[Remedy]:
    """Remedy that makes a supply greater by at least `missing` volts, where all amplifiers on it stand that.

    Parameters
    ----------
    review : Review
    ref, pin : str
        Amplifier and supply pin concerned.
    missing : float
        Volts missing at the worst condition.
    """
    rails = Rails(review.design)
    feed = rails.feed(review.design.parts[ref], pin)
    net = review.design.nets.get(feed.source) if feed else None
    if net is None or net.role != "supply" or net.voltage is None or not net.voltage.typ:
        return []
    typ, weakest = abs(net.voltage.typ), min(abs(net.voltage.min), abs(net.voltage.max))
    usual = next((u for u in USUAL_SUPPLIES if u > typ and (u - typ) * weakest / typ >= missing), None)
    if usual is None:
        return []
    scale = usual / typ
    more = (scale - 1) * max(abs(net.voltage.min), abs(net.voltage.max))
    parts = review.design.parts.items()
    on_it = [(r, p) for r, p in parts if p.kind == "op-amp" and net.name in _sources(rails, p)]
    if any(p.supply is not None and total_supply(review, r)[1] + more > p.supply.max for r, p in on_it):
        return []
    written = review.design.data["nets"][net.name]["voltage"]
    to: object = quantity(scale * net.voltage.typ, "V")
    if isinstance(written, dict):
        to = {end: quantity(scale * getattr(net.voltage, end), "V") for end in written}
    title = f"make {net.name} {format_quantity(scale * net.voltage.typ, 'V')}"
    return [Remedy(title, [Set(join_key(("nets", net.name, "voltage")), to)])]


def _sources(rails: Rails, part: Part) -> list[str]:
    feeds = (rails.feed(part, pin) for pin in SUPPLY_PINS)
    return [feed.source for feed in feeds if feed is not None]
