"""Which nets are one point for direct current, what drives them, and the resistances between them.

A *point* is a set of nets at one voltage: joined by links of zero ohm, or by a resistor in which no current
flows because its far end feeds only bases, amplifier inputs and capacitors (a stopper, a bias-compensating
resistor, a supply filter). Base, bias and supply currents are neglected throughout this package.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import isfinite
from typing import TYPE_CHECKING, TypeVar

if TYPE_CHECKING:
    from rulecheck.design.model import Design, Net, Part

GROUND = "\0ground"  # a point that exists in every circuit; no net has this name
T = TypeVar("T")
TRANSISTORS = ("npn", "pnp")
SOURCES = ("voltage-source", "current-source")


@dataclass(frozen=True, slots=True)
class Resistance:
    """A resistance between two points.

    `part` is the resistor's or potentiometer's reference, empty for the load or source resistance of a net.
    """

    part: str
    a: str
    b: str
    ohm: Fraction


def exact(value: float) -> Fraction:
    """Take a figure as the fraction that its decimal text stands for, so that equal ratios cancel."""
    return Fraction(f"{value:.12g}")


def ends(part: Part) -> tuple[str, str] | None:
    """Nets of a two-terminal part, first or positive pin first; None where a pin is not connected."""
    for first, second in (("P", "N"), ("A", "K"), ("0", "1")):
        if first in part.pins and second in part.pins:
            return part.pins[first], part.pins[second]
    return None


def has_pins(part: Part, *pins: str) -> bool:
    """Whether all these pins are connected."""
    return all(pin in part.pins for pin in pins)


def hidden_source(net: str) -> str:
    """Point of the ideal source behind an input's source resistance."""
    return f"{net}\0source"


def is_ideal(net: Net) -> bool:
    """Whether an ideal voltage source holds the net: ground, supply, reference, input without resistance."""
    if net.role == "input":
        return net.drive == "voltage" and not _resistance_behind(net)
    return net.role in ("ground", "supply", "reference")


def _resistance_behind(net: Net) -> float:
    resistance = net.source_resistance.typ if net.source_resistance is not None else 0.0
    return resistance if isfinite(resistance) else 0.0


@dataclass(frozen=True)
class Wiring:
    """A design reduced to points.

    Attributes
    ----------
    design : Design
    point_of : mapping of net to point
    known : mapping of point to the name of the net or input that sets it, empty for ground
    sourced : frozenset of point
        The known ones, and those that voltage sources join to them.
    resistances : tuple of Resistance
        Between different points only.
    resistances_at : mapping of point to those resistances that end there
    pins_at : mapping of point to (reference, pin) pairs
    pins_on : mapping of net to (reference, pin) pairs
    nets_at : mapping of point to its nets, in the order of the file
    """

    design: Design
    point_of: Mapping[str, str]
    known: Mapping[str, str]
    sourced: frozenset[str]
    resistances: tuple[Resistance, ...]
    resistances_at: Mapping[str, tuple[Resistance, ...]]
    pins_at: Mapping[str, tuple[tuple[str, str], ...]]
    pins_on: Mapping[str, tuple[tuple[str, str], ...]]
    nets_at: Mapping[str, tuple[str, ...]]

    def point(self, ref: str, pin: str) -> str:
        """Point that a pin stands on."""
        return self.point_of[self.design.parts[ref].pins[pin]]

    def two_points(self, ref: str) -> tuple[str, str] | None:
        """Points of a two-terminal part; None where a pin is not connected."""
        nets = ends(self.design.parts[ref])
        return (self.point_of[nets[0]], self.point_of[nets[1]]) if nets else None

    def parts(self, *kinds: str) -> Iterator[str]:
        """List the parts of these kinds, in the order of the file."""
        return (ref for ref, part in self.design.parts.items() if part.kind in kinds)

    def amplifiers(self) -> Iterator[str]:
        """List the amplifiers with both inputs and the output connected."""
        return (ref for ref in self.parts("op-amp") if has_pins(self.design.parts[ref], "IN+", "IN-", "OUT"))

    def is_driven(self, point: str) -> bool:
        """Whether an amplifier's output or an ideal source sets the point."""
        return point in self.sourced or any(pin == "OUT" for _, pin in self.pins_at.get(point, ()))

    def carriers_at(self, point: str) -> list[str]:
        """List what can carry current at a point, one entry a pin; empty text for loads and inputs."""
        carriers = [resistance.part for resistance in self.resistances_at.get(point, ())]
        carriers += [ref for ref, pin in self.pins_at.get(point, ()) if _carries(self.design.parts[ref], pin)]
        return carriers + ["" for net in self.nets_at[point] if self.drives_current(net)]

    def passes_current(self, net: str) -> bool:
        """Tell whether currents meet on a net: more than one of its pins can carry some."""
        pins = self.pins_on.get(net, ())
        kinds = ("resistor", "potentiometer")
        carrying = [p for r, p in pins if (q := self.design.parts[r]).kind in kinds or _carries(q, p)]
        return len(carrying) > 1 or self.drives_current(net)

    def drives_current(self, net: str) -> bool:
        """Whether a net is an input that is driven by a current."""
        return net in self.design.nets and self.design.nets[net].drive == "current"


def _carries(part: Part, pin: str) -> bool:
    """Whether a pin other than a resistor's carries direct current that is not neglected."""
    if part.kind in TRANSISTORS:
        return pin in ("C", "E")
    if part.kind == "op-amp":
        return pin == "OUT"
    return part.kind in ("diode", "photodiode", *SOURCES)


class _Points:
    """Sets of nets, merged step by step; the name of a set is a known net's, else its first net's."""

    def __init__(self, design: Design) -> None:
        self.parent = {name: name for name in [GROUND, *design.nets]}
        self.known = {GROUND: ""}
        for name, net in design.nets.items():
            if net.role == "input" and net.drive == "voltage" and not is_ideal(net):
                self.parent[hidden_source(name)] = hidden_source(name)
                self.known[hidden_source(name)] = name
            elif is_ideal(net):
                self.known[name] = "" if net.role == "ground" else name
        self.order = {name: i for i, name in enumerate(self.parent)}
        for name, net in design.nets.items():
            if net.role == "ground":
                self.merge(GROUND, name)

    def find(self, name: str) -> str:
        while self.parent[name] != name:
            name = self.parent[name]
        return name

    def merge(self, a: str, b: str) -> None:
        first, second = sorted(
            (self.find(a), self.find(b)), key=lambda name: (name not in self.known, self.order[name])
        )
        self.parent[second] = first


def build_wiring(design: Design) -> Wiring:
    """Reduce a design to points and resistances.

    Parameters
    ----------
    design : Design

    Returns
    -------
    Wiring
    """
    points = _Points(design)
    raw = list(_resistances(design))
    for resistance in raw:
        if resistance.ohm == 0:
            points.merge(resistance.a, resistance.b)
    wiring = _wire(design, points, raw)
    while _merge_currentless(wiring, points):
        wiring = _wire(design, points, raw)
    return wiring


def _wire(design: Design, points: _Points, raw: list[Resistance]) -> Wiring:
    point_of = {name: points.find(name) for name in points.parent}
    pins_on = _grouped((net, (ref, pin)) for ref, part in design.parts.items() for pin, net in part.pins.items())
    moved = (Resistance(r.part, point_of[r.a], point_of[r.b], r.ohm) for r in raw)
    resistances = tuple(r for r in moved if r.a != r.b)
    known = {point: name for point, name in points.known.items() if point_of[point] == point}
    pairs = [(point_of[a], point_of[b]) for a, b in voltage_sources(design)]
    return Wiring(
        design=design,
        point_of=point_of,
        known=known,
        sourced=joined_by_sources(known, pairs),
        resistances=resistances,
        resistances_at=_grouped((end, r) for r in resistances for end in (r.a, r.b)),
        pins_at=_grouped((point, pin) for net, point in point_of.items() for pin in pins_on.get(net, ())),
        pins_on=pins_on,
        nets_at={p: tuple(n for n in nets if n in design.nets) for p, nets in _members(point_of).items()},
    )


def voltage_sources(design: Design) -> list[tuple[str, str]]:
    """Nets of the voltage sources, in pairs."""
    return [nets for part in design.parts.values() if part.kind == "voltage-source" and (nets := ends(part))]


def joined_by_sources(held: Iterable[str], pairs: Iterable[tuple[str, str]]) -> frozenset[str]:
    """Names that are held, and those that chains of voltage sources join to them."""
    found = set(held)
    ways = [way for pair in pairs for way in (pair, pair[::-1])]
    while grown := {there for here, there in ways if here in found} - found:
        found |= grown
    return frozenset(found)


def _members(point_of: Mapping[str, str]) -> dict[str, tuple[str, ...]]:
    return _grouped((point, net) for net, point in point_of.items())


def _grouped(pairs: Iterable[tuple[str, T]]) -> dict[str, tuple[T, ...]]:
    groups: dict[str, list[T]] = {}
    for key, value in pairs:
        groups.setdefault(key, []).append(value)
    return {key: tuple(values) for key, values in groups.items()}


def _merge_currentless(wiring: Wiring, points: _Points) -> bool:
    """Merge the ends of resistors that carry no current; whether there was any."""
    found = False
    for resistance in wiring.resistances:
        for end in (resistance.a, resistance.b):
            if end not in wiring.known and len(wiring.carriers_at(end)) == 1:
                points.merge(resistance.a, resistance.b)
                found = True
    return found


def _resistances(design: Design) -> Iterator[Resistance]:
    for ref, part in design.parts.items():
        if part.kind == "resistor" and (nets := ends(part)):
            yield Resistance(ref, *nets, exact(part.value.typ))
        elif part.kind == "potentiometer":
            yield from _halves(ref, part)
    for name, net in design.nets.items():
        if net.load is not None:
            yield Resistance("", name, GROUND, exact(net.load.typ))
        if net.role == "input" and not is_ideal(net) and _resistance_behind(net):
            source = hidden_source(name) if net.drive == "voltage" else GROUND
            yield Resistance("", source, name, exact(_resistance_behind(net)))


def _halves(ref: str, part: Part) -> Iterator[Resistance]:
    lower = exact(part.value.typ) * exact(part.position.typ)
    upper = exact(part.value.typ) - lower
    pins = part.pins
    if has_pins(part, "END1", "WIPER", "END2"):
        yield Resistance(ref, pins["END1"], pins["WIPER"], lower)
        yield Resistance(ref, pins["WIPER"], pins["END2"], upper)
    elif has_pins(part, "END1", "WIPER"):
        yield Resistance(ref, pins["END1"], pins["WIPER"], lower)
    elif has_pins(part, "WIPER", "END2"):
        yield Resistance(ref, pins["WIPER"], pins["END2"], upper)
    elif has_pins(part, "END1", "END2"):
        yield Resistance(ref, pins["END1"], pins["END2"], lower + upper)
