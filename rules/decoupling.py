"""Capacitors at the supplies of amplifiers."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from typing import Annotated

from rulecheck.api import BaseModel, Design, Edit, Evidence, Finding, Remedy, Review, Rule, Severity, Unit

from ._edits import add_capacitor
from ._rails import SUPPLY_PINS, Rails, grounds, powered

USUAL = 100e-9
RATINGS = (10.0, 16.0, 25.0, 35.0, 50.0, 63.0, 100.0, 160.0, 250.0)
"""Voltages [V] that capacitors are sold for."""
RATING_MARGIN = 1.5
SAME = 1e-9
"""Rounding of a capacitance, as a fraction."""


class Decoupling(Rule):
    """A supply net with fewer capacitors than there are amplifier packages on it.

    Every package wants one of its own beside it, from 10 nF to 10 µF, to ground or to its opposite supply: the
    inductance of the way to the regulator makes the supply follow the amplifier's own output current, and its
    supply rejection is gone at high frequencies. A file says nothing of distances, so capacitors are counted;
    the amplifiers of the packages that get none, in the order of the file, are named. Ground is exempt. A net
    behind a small series resistor counts with the supply that feeds it.
    """

    name = "decoupling"
    title = "Amplifier supply with too few capacitors"
    source = "common practice, no source"
    default_severity = Severity.MINOR
    needs = ()

    class Settings(BaseModel):
        """What counts as a decoupling capacitor, and what may stand in series with the supply."""

        least: Annotated[float, Unit("F")] = 10e-9
        most: Annotated[float, Unit("F")] = 10e-6
        series_resistance: Annotated[float, Unit("ohm")] = 100.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Count capacitors and packages at each rail."""
        design = review.design
        rails = _rails(design, settings.series_resistance)
        for name, rail in rails.items():
            opposite = {net for other in rail.opposite for net in (rails[other].nets if other in rails else ())}
            capacitors = [
                set(part.pins.values())
                for part in design.parts.values()
                if part.kind == "capacitor"
                and settings.least * (1 - SAME) <= part.value.typ <= settings.most * (1 + SAME)
                and _leads(set(part.pins.values()), rail.nets, opposite | set(grounds(design)))
            ]
            if len(capacitors) < len(rail.packages):
                yield _finding(design, name, rail, capacitors)


@dataclass
class _Rail:
    """A supply with the nets behind its series resistors, and who is on it.

    `packages` has the amplifiers of each package by reference, and the net of their supply pin; `opposite`
    the rails at their other supply pins.
    """

    volts: float
    nets: set[str] = field(default_factory=set)
    packages: dict[str, dict[str, str]] = field(default_factory=dict)
    opposite: set[str] = field(default_factory=set)


def _rails(design: Design, resistance: float) -> dict[str, _Rail]:
    """Rails of all amplifiers in use, by the net that holds them; ground is none."""
    feeds = Rails(design)
    found: dict[str, _Rail] = {}
    for ref, part in powered(design).items():
        near = {pin: f for pin in SUPPLY_PINS if (f := feeds.feed(part, pin)) is not None and f.ohm <= resistance}
        for pin, feed in near.items():
            if design.nets[feed.source].role == "ground":
                continue
            rail = found.setdefault(feed.source, _Rail(feed.volts))
            rail.nets.update(feed.nets)
            rail.packages.setdefault(part.package, {})[ref] = part.pins[pin]
            rail.opposite.update(other.source for other_pin, other in near.items() if other_pin != pin)
    return found


def _leads(ends: set[str], rail: set[str], elsewhere: set[str]) -> bool:
    return bool(ends & rail) and bool(ends & elsewhere)


def _finding(design: Design, name: str, rail: _Rail, capacitors: list[set[str]]) -> Finding:
    bare = list(_without(rail, capacitors))
    refs = [ref for package in bare for ref in rail.packages[package]]
    count, wanted = len(capacitors), len(rail.packages)
    return Finding(
        f"{name}: {count} decoupling capacitor{'s' if count != 1 else ''} for {wanted} amplifier package"
        f"{'s' if wanted != 1 else ''}", parts=refs, nets=[name],
        consequence=f"{', '.join(refs)} may ring or oscillate with the inductance of the supply",
        evidence=[Evidence("decoupling capacitors", count, "1", wanted, ">=")],
        remedies=[_remedy(design, rail, [next(iter(rail.packages[package].values())) for package in bare])],
    )  # fmt: skip


def _without(rail: _Rail, capacitors: list[set[str]]) -> Iterator[str]:
    """Packages left without one: a capacitor serves a package on its own net first, then the next in the file."""
    packages = {package: next(iter(amplifiers.values())) for package, amplifiers in rail.packages.items()}
    shared = []
    for ends in capacitors:
        own = next((package for package, net in packages.items() if net in ends), None)
        if own is None:
            shared.append(ends)
        else:
            del packages[own]
    yield from list(packages)[len(shared) :]


def _remedy(design: Design, rail: _Rail, nets: list[str]) -> Remedy:
    rating = next((v for v in RATINGS if v >= RATING_MARGIN * abs(rail.volts)), None)
    edits: list[Edit] = []
    for net in nets:
        ends = (net, grounds(design)[0])
        edits.append(add_capacitor(design, USUAL, ends, edits, tolerance="10 %", rating=rating))
    where = ", ".join(dict.fromkeys(nets))
    return Remedy(f"add {'a capacitor' if len(nets) == 1 else f'{len(nets)} capacitors'} of 100 nF at {where}", edits)
