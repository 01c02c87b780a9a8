"""Values that look like a slip of the prefix."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Annotated

from rulecheck.api import (
    BaseModel,
    Design,
    Evidence,
    Finding,
    Part,
    Remedy,
    Review,
    Rule,
    Severity,
    Unit,
    format_quantity,
    join_key,
)

from ._edits import quantity, set_parameter
from ._rails import FIXED, SUPPLY_PINS, Rails

STEPS = (1, -1, 2, -2, 3, -3, 4, -4)
"""Prefixes up or down, the likeliest slip first."""
MOST_REMEDIES = 3
SAME = 1e-9
USUAL = {"ohm": (100.0, 10e6), "F": (1e-12, 1e-6)}
"""Where nearly all values in such circuits lie; a corrected prefix leads there."""
USUAL_COMPENSATION = (1e-12, 10e-9)


class PlausibleValue(Rule):
    """Resistors and capacitors of a size that nobody means.

    SI prefixes are one letter, and m and M differ by nine decades. A value outside what is made, a compensation
    capacitor that would make a loop crawl, a signal resistor of a few ohm are nearly always such a slip.
    """

    name = "plausible-value"
    title = "Value that looks like a slip of the prefix"
    source = "common practice, no source"
    default_severity = Severity.MINOR
    needs = ()

    class Settings(BaseModel):
        """Limits beyond which a value is not believed."""

        least_resistance: Annotated[float, Unit("ohm")] = 1.0
        most_resistance: Annotated[float, Unit("ohm")] = 100e9
        least_capacitance: Annotated[float, Unit("F")] = 0.1e-12
        most_capacitance: Annotated[float, Unit("F")] = 10e-3
        most_compensation: Annotated[float, Unit("F")] = 1e-6
        least_signal_resistance: Annotated[float, Unit("ohm")] = 10.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge the value of each resistor, potentiometer and capacitor."""
        design = review.design
        supplies, compensation = _supply_resistors(design), _compensation_capacitors(design)
        for ref, part in design.parts.items():
            if part.kind == "capacitor":
                most, what = settings.most_capacitance, "capacitor"
                if ref in compensation:
                    most, what = settings.most_compensation, "compensation capacitor"
                yield from _judge(part, "F", what, settings.least_capacitance, most)
            elif part.kind in ("resistor", "potentiometer") and part.value.typ != 0:
                least, what = settings.least_signal_resistance, "signal resistor"
                if part.kind == "potentiometer" or ref in supplies:
                    least, what = settings.least_resistance, part.kind
                if part.value.typ < settings.least_resistance:
                    least, what = settings.least_resistance, part.kind
                yield from _judge(part, "ohm", what, least, settings.most_resistance)


def _judge(part: Part, unit: str, what: str, least: float, most: float) -> Iterator[Finding]:
    value = part.value.typ
    if least * (1 - SAME) <= value <= most * (1 + SAME):
        return
    limit, relation, than = (least, ">=", "below") if value < least else (most, "<=", "above")
    usual = USUAL_COMPENSATION if what.startswith("compensation") else USUAL[unit]
    yield Finding(
        f"{part.ref}: {what} of {format_quantity(value, unit)}, {than} {format_quantity(limit, unit)}",
        parts=[part.ref], consequence="the circuit works with another value, or not at all: a slip of the prefix?",
        at=join_key(("parts", part.ref, "value")),
        evidence=[Evidence("value", value, unit, limit, relation)],
        remedies=_prefixes(part, unit, *usual),
    )  # fmt: skip


def _prefixes(part: Part, unit: str, low: float, high: float) -> list[Remedy]:
    """The same digits with another prefix, where that leads to a usual value."""
    values = [part.value.typ * 1000.0**step for step in STEPS]
    texts = [quantity(value, unit) for value in values if low <= value <= high][:MOST_REMEDIES]
    remedies = [Remedy(f"write {text}", [set_parameter(part.ref, "value", text)]) for text in texts]
    return remedies or [Remedy("check the value: no other prefix makes it a usual one")]


def _supply_resistors(design: Design) -> set[str]:
    """Resistors that carry supplies and not signals: between fixed nets, at a supply, before a supply pin."""
    rails = Rails(design)
    feeds = (rails.feed(part, pin) for part in design.parts.values() if part.kind == "op-amp" for pin in SUPPLY_PINS)
    fed = {net for feed in feeds if feed is not None for net in feed.nets}
    found = set()
    for ref, part in design.parts.items():
        nets = [design.nets[net] for net in part.pins.values()]
        at_supply = any(net.role == "supply" for net in nets) or all(net.role in FIXED for net in nets)
        if at_supply or all(net.name in fed for net in nets):
            found.add(ref)
    return found


def _compensation_capacitors(design: Design) -> set[str]:
    """Capacitors from an amplifier's output, or the far end of a resistor at it, to one of its inputs."""
    ends: dict[tuple[str, str], list[tuple[str, str]]] = {}
    for ref, part in design.parts.items():
        if part.kind in ("resistor", "capacitor"):
            a, b = part.pins.values()
            ends.setdefault((part.kind, a), []).append((ref, b))
            ends.setdefault((part.kind, b), []).append((ref, a))
    found = set()
    for part in design.parts.values():
        if part.kind == "op-amp" and "OUT" in part.pins:
            inputs = {part.pins[pin] for pin in ("IN+", "IN-") if pin in part.pins}
            behind = {net for _, net in ends.get(("resistor", part.pins["OUT"]), ())}
            outputs = {part.pins["OUT"], *(net for net in behind if design.nets[net].role not in FIXED)}
            found |= {ref for net in outputs for ref, other in ends.get(("capacitor", net), ()) if other in inputs}
    return found
