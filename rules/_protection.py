"""Remedies of faults: clamp diodes, series resistors, sturdier models."""

from __future__ import annotations

import bisect
import math
from collections.abc import Callable, Iterator
from functools import partial
from typing import Any

import numpy as np

from rulecheck.api import Edit, LogTransistor, Model, Remedy, Review, decade_values, format_quantity

from ._edits import add_diode, add_in_series, set_parameter
from ._models import other_models

KNEE = 0.3
"""Volts up to which a diode across a signal carries nothing that matters."""
SEARCHED = 1e3
"""Factor over which the values of a series resistor are searched."""


def against_reversal(review: Review, parts: list[str], causes: list[str], index: int) -> list[Remedy]:
    """Keep base-emitter junctions from reversing: clamps in the amplifiers' loops, or diodes across them.

    Parameters
    ----------
    review : Review
    parts : list of str
        Transistors reversed.
    causes : list of str
        Amplifiers at their limits that reverse them.
    index : int
        The worst fault scenario.
    """
    if not review.seeks_remedies:
        return []
    diode = quietest_diode(review)
    if diode is None:
        return [Remedy("clamp the junction with a diode of low leakage; the catalogues have none")]
    edits: list[Edit] = []
    words = []
    for amplifier in causes:
        ends = _clamp_in_loop(review, amplifier, index) if amplifier in review.design.parts else None
        if ends is not None:
            edits.append(add_diode(review.design, diode, *ends, edits))
            words.append(f"{amplifier} from {ends[0]} to {ends[1]}")
    remedies = [Remedy(f"clamp {', '.join(words)} with {diode}", edits)] if edits else []
    across: list[Edit] = []
    for ref in parts:
        part = review.design.parts[ref]
        anode, cathode = ("E", "B") if part.kind == "npn" else ("B", "E")
        across.append(add_diode(review.design, diode, part.pins[anode], part.pins[cathode], across))
    way = "emitter to base" if review.design.parts[parts[0]].kind == "npn" else "base to emitter"
    return [*remedies, Remedy(f"{diode} across {', '.join(parts)}, from {way}", across)]


def _clamp_in_loop(review: Review, amplifier: str, index: int) -> tuple[str, str] | None:
    """Anode and cathode of a diode between output and summing node that takes over when the loop opens."""
    pins = review.design.parts[amplifier].pins
    node = next((n for n in review.structure.summing_nodes if n.amplifier == amplifier), None)
    if node is None:
        return None
    out, held = pins["OUT"], pins[node.input]
    fault = float((review.faults.voltage(out) - review.faults.voltage(held))[index])
    normal = review.operating_points.voltage(out) - review.operating_points.voltage(held)
    if fault > 0 and np.nanmax(normal) < KNEE:
        return out, held
    if fault < 0 and np.nanmin(normal) > -KNEE:
        return held, out
    return None


def _logs_at(review: Review, parts: list[str], emitter: str | None) -> list[LogTransistor]:
    """Log transistors among some parts, or with their emitter on a net."""
    pins = {ref: part.pins for ref, part in review.design.parts.items()}
    return [log for log in review.structure.log_transistors if log.part in parts or pins[log.part]["E"] == emitter]


def leakage_bound(model: Any) -> float:  # noqa: ANN401  # a diode's parameters
    """Greatest reverse current at 25 °C that a diode's parameters allow [A]."""
    return float(model.saturation_current.max + model.reverse_leakage.max)


def quietest_diode(review: Review) -> str | None:
    """The diode model of the catalogues with the least leakage that stands the supplies."""
    nets = review.design.nets.values()
    rails = [v for net in nets if net.role == "supply" and net.voltage for v in (net.voltage.min, net.voltage.max)]
    span = max([0.0, *rails]) - min([0.0, *rails])
    diodes = (m for m in review.design.models.values() if m.kind == "diode")
    fitting = [m for m in diodes if m.parameters.saturation_current is not None and _stands(m, span)]
    return min(fitting, key=lambda m: (leakage_bound(m.parameters), m.name)).name if fitting else None


def _stands(model: Model, volts: float) -> bool:
    limit = model.parameters.reverse_voltage
    return limit is not None and bool(limit.max >= volts)


def series_resistor(
    review: Review, ref: str, pin: str, limit: float, current: Callable[[Review], float]
) -> Iterator[Remedy]:
    """Resistor between a pin and its net that brings a fault current down to its limit: the least that does.

    Amplifiers that leave their limits on the way bend the relation, so the preferred values up to that which
    takes all the voltage there is are searched by solving the faults again.

    Parameters
    ----------
    review : Review
    ref, pin : str
    limit : float
        Current allowed [A].
    current : callable
        Greatest fault current of a review [A].
    """
    if not review.seeks_remedies:
        return None
    largest = _greatest_span(review) / limit
    values = decade_values("E24", largest / SEARCHED, largest * 1.2)

    def suffices(ohm: float) -> bool:
        return current(review.edited(add_in_series(review.design, ohm, ref, pin))) <= limit

    if suffices(values[-1]):
        value = values[bisect.bisect_left(values, True, key=suffices)]
        title = f"put {format_quantity(value, 'ohm')} in series with {pin} of {ref}"
        yield Remedy(title, add_in_series(review.design, value, ref, pin))


def _greatest_span(review: Review) -> float:
    """Largest voltage that supplies, inputs and drives have between them in any fault [V]."""
    conditions, nets = review.faults.conditions, review.design.nets
    ends = [0.0]
    for name, net in nets.items():
        if net.role in ("supply", "reference") or net.drive == "voltage":
            ends += [float(np.nanmin(conditions.values[name])), float(np.nanmax(conditions.values[name]))]
        elif net.drive == "current":
            ends += [-net.compliance, net.compliance]
    return max(ends) - min(ends)


def against_current(review: Review, ref: str, rating: str, limit: float) -> list[Remedy]:
    """Less current through a part in faults: a resistor in series, or a model that stands it.

    Parameters
    ----------
    review : Review
    ref, rating : str
        Part and which of its current ratings is exceeded.
    limit : float
        Current allowed [A].
    """
    if not review.seeks_remedies:
        return []
    design = review.design
    pin = {"output_current": "OUT", "collector_current": "C", "forward_current": "A"}[rating]

    def current(other: Review) -> float:
        return float(np.nanmax(np.abs(other.faults.current(ref, pin))))

    at = next(((log.amplifier, "OUT") for log in _logs_at(review, [ref], design.parts[ref].pins.get("E"))), (ref, pin))
    remedies = list(series_resistor(review, *at, limit, current))
    return [*remedies, *sturdier(review, ref, rating, current(review))]


def sturdier(review: Review, ref: str, rating: str, needed: float) -> list[Remedy]:
    """Another model with the rating that is needed, for the part and those it is matched or packaged with.

    Parameters
    ----------
    review : Review
    ref : str
    rating : str
        Parameter that is exceeded.
    needed : float
        What the part must stand.
    """
    if not review.seeks_remedies:
        return []
    part = review.design.parts[ref]
    if part.kind == "op-amp":
        fits = partial(_has, rating, needed)
        return other_models(review, [ref], fits, (rating,), "it stands " + format_quantity(needed, "A", 3))
    found = [
        (abs(math.log(m.parameters.saturation_current.typ / part.saturation_current.typ)), m.name)
        for m in review.design.models.values()
        if part.model and m.kind == part.kind and m.name != part.model and m.parameters.saturation_current is not None
        and _has(rating, needed, m.parameters)
        and (part.kind == "diode" or m.parameters.monolithic == part.monolithic)
    ]  # fmt: skip
    together = _alike(review, ref)
    if not found or any(rating in review.design.data["parts"][r] for r in together):
        return [Remedy(f"take a part for {ref} that stands {format_quantity(needed, _unit(rating), 3)}")]
    model = min(found)[1]
    return [Remedy(f"take {model} for {', '.join(together)}", [set_parameter(r, "model", model) for r in together])]


def _has(rating: str, needed: float, model: Any) -> bool:  # noqa: ANN401  # a model's parameters
    limit = rated(model, rating)
    return limit is not None and limit >= needed


def rated(parameters: Any, rating: str) -> float | None:  # noqa: ANN401  # a part's or a model's parameters
    """Limit that a rating sets: of a breakdown the least voltage, else the greatest of what is allowed."""
    spread = getattr(parameters, rating)
    if spread is None:
        return None
    return float(spread.min if rating.endswith("breakdown") else spread.max)


def _unit(rating: str) -> str:
    return "A" if rating.endswith("current") else "V"


def _alike(review: Review, ref: str) -> list[str]:
    """The part and those of its kind that share its package or its matched group."""
    design = review.design
    groups = [set(m.parts) for m in design.matching.values() if ref in m.parts]
    package = {r for r, p in design.parts.items() if p.package == design.parts[ref].package}
    near = package.union({ref}, *groups)
    return [r for r, p in design.parts.items() if r in near and p.kind == design.parts[ref].kind]
