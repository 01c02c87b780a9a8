"""Amplifier models of the catalogues that could take the place of the present one, and higher supplies."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from rulecheck.api import Net, Part, Remedy, Review, Set, format_quantity, join_key

from ._edits import quantity, set_parameter
from ._rails import SUPPLY_PINS, Rails

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
        if model.kind == "op-amp" and name != present.model and _says(model.parameters, "gain_bandwidth", *parameters)
        and fits(model.parameters)
        and all(_takes_supply(review, r, model.parameters) for r in together if not parts[r].spare)
    ]  # fmt: skip
    return [
        Remedy(f"take {name} for {', '.join(together)}: {why}", [set_parameter(r, "model", name) for r in together])
        for _, name in sorted(found)[:MOST_MODELS]
    ]


def _says(model: Any, *parameters: str) -> bool:  # noqa: ANN401  # an amplifier's parameters
    return all(getattr(model, name) is not None for name in parameters)


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


def higher_supplies(review: Review, ref: str, missing: Mapping[str, float]) -> list[Remedy]:
    """Remedy that makes supplies of an amplifier greater, where all amplifiers on them stand that.

    Parameters
    ----------
    review : Review
    ref : str
        Amplifier.
    missing : mapping of supply pin to float
        Volts missing at the worst condition, for ``V+`` and ``V-``; nothing is missing where not positive.
    """
    rails, edits, words = Rails(review.design), [], []
    added = dict.fromkeys(review.design.nets, 0.0)
    for pin in SUPPLY_PINS:
        if missing.get(pin, 0.0) <= 0:
            continue
        feed = rails.feed(review.design.parts[ref], pin)
        net = review.design.nets.get(feed.source) if feed else None
        volts = _usual_beyond(net, missing[pin]) if net is not None else None
        if net is None or volts is None:
            return []
        edits.append(Set(join_key(("nets", net.name, "voltage")), _scaled_voltage(review, net, volts)))
        words.append(f"{net.name} {format_quantity(volts, 'V')}")
        added[net.name] = _largest(net) * (volts / _typ(net) - 1)
    for other, part in review.design.parts.items():
        if part.kind == "op-amp" and part.supply is not None and not part.spare:
            more = sum(added[source] for source in _sources(rails, part))
            if more and total_supply(review, other)[1] + more > part.supply.max:
                return []
    return [Remedy(f"make {' and '.join(words)}", edits)] if edits else []


def _typ(net: Net) -> float:
    return net.voltage.typ if net.voltage is not None else 0.0


def _largest(net: Net) -> float:
    return max(abs(net.voltage.min), abs(net.voltage.max)) if net.voltage is not None else 0.0


def _usual_beyond(net: Net, missing: float) -> float | None:
    """The next usual voltage of a supply that is greater by so much at the low end of its tolerance too."""
    if net.role != "supply" or net.voltage is None or not net.voltage.typ:
        return None
    typ, weakest = abs(net.voltage.typ), min(abs(net.voltage.min), abs(net.voltage.max))
    usual = next((u for u in USUAL_SUPPLIES if u > typ and (u - typ) * weakest / typ >= missing), None)
    return None if usual is None else usual * (1 if net.voltage.typ > 0 else -1)


def _scaled_voltage(review: Review, net: Net, volts: float) -> object:
    """The voltage as the file has it, its limits in proportion."""
    written = review.design.data["nets"][net.name]["voltage"]
    if not isinstance(written, dict):
        return quantity(volts, "V")
    return {end: quantity(getattr(net.voltage, end) * volts / _typ(net), "V") for end in written}


def _sources(rails: Rails, part: Part) -> list[str]:
    feeds = (rails.feed(part, pin) for pin in SUPPLY_PINS)
    return [feed.source for feed in feeds if feed is not None]
