"""Amplifier models of the catalogues that could take the place of the present one, and higher supplies."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

from rulecheck.api import Part, Remedy, Review, Set, format_quantity, join_key

from ._edits import quantity, set_parameter

MOST_MODELS = 2
USUAL_SUPPLIES = (2.5, 3.0, 3.3, 5.0, 6.0, 9.0, 10.0, 12.0, 15.0, 18.0, 20.0, 24.0, 28.0, 30.0, 36.0, 48.0)


def other_models(
    review: Review, ref: str, fits: Callable[[Any], bool], parameters: tuple[str, ...], why: str
) -> list[Remedy]:
    """Remedies that give an amplifier, and those in its package, another model; those nearest in character first.

    Parameters
    ----------
    review : Review
    ref : str
        Amplifier.
    fits : callable
        Whether the parameters of a model cure the fault.
    parameters : tuple of str
        What `fits` looks at: no model cures a figure that the part states itself.
    why : str
        What the model has that the present one has not.
    """
    parts = review.design.parts
    together = [r for r, p in parts.items() if p.package == parts[ref].package and p.kind == "op-amp"]
    written = review.design.data["parts"]
    if any(name in written[r] for r in together for name in parameters):
        return []
    found = [
        (_strangeness(model.parameters, parts[ref]), name)
        for name, model in review.design.models.items()
        if model.kind == "op-amp" and name != parts[ref].model and fits(model.parameters)
        and all(_takes_supply(review, r, model.parameters) for r in together)
    ]  # fmt: skip
    return [
        Remedy(f"take {name} for {', '.join(together)}: {why}", [set_parameter(r, "model", name) for r in together])
        for _, name in sorted(found)[:MOST_MODELS]
    ]


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


def supply_behind(review: Review, net: str) -> str | None:
    """The supply net that feeds a net, itself or through one resistor; None for ground."""
    nets = review.design.nets
    if nets[net].role == "supply":
        return net
    beyond = [
        other
        for part in review.design.parts.values()
        if part.kind == "resistor" and net in part.pins.values()
        for other in part.pins.values()
    ]
    return next((other for other in beyond if nets[other].role == "supply"), None)


def higher_supply(review: Review, pin_net: str, missing: float) -> list[Remedy]:
    """Remedy that makes a supply greater by at least `missing` volts, where all amplifiers on it stand that.

    Parameters
    ----------
    review : Review
    pin_net : str
        Net of the supply pin concerned.
    missing : float
        Volts missing at the worst condition.
    """
    name = supply_behind(review, pin_net)
    if name is None:
        return []
    voltage = review.design.nets[name].voltage
    assert voltage is not None
    typ, weakest = abs(voltage.typ), min(abs(voltage.min), abs(voltage.max))
    fitting = (u for u in USUAL_SUPPLIES if u > typ and (u - typ) * weakest / typ >= missing) if typ else ()
    usual = next(iter(fitting), None)
    if usual is None or not all(_stands(review, ref, name, usual / typ) for ref in review.design.parts):
        return []
    key, written = join_key(("nets", name, "voltage")), review.design.data["nets"][name]["voltage"]
    scale = usual / typ
    ends = {end: quantity(scale * getattr(voltage, end), "V") for end in written} if isinstance(written, dict) else None
    to = quantity(math.copysign(usual, voltage.typ), "V") if ends is None else ends
    return [Remedy(f"make {name} {format_quantity(math.copysign(usual, voltage.typ), 'V')}", [Set(key, to)])]


def _stands(review: Review, ref: str, supply: str, scale: float) -> bool:
    """Whether an amplifier stands a supply made greater by a factor."""
    part, points = review.design.parts[ref], review.operating_points
    if part.kind != "op-amp" or supply not in [supply_behind(review, part.pins[p]) for p in ("V+", "V-")]:
        return True
    _, total = total_supply(review, ref)
    more = (scale - 1) * float(points.worst(abs(points.voltage(supply))).value)
    return bool(part.supply is None or total + more <= part.supply.max)
