"""Nets and pins: what is connected to nothing, to itself, or to what it must not be.

Such a fault makes most analyses meaningless, so the rules that rest on them do not run until it is mended.
"""

from __future__ import annotations

import difflib
import itertools
from collections.abc import Callable, Iterable, Iterator
from typing import Annotated

from rulecheck.api import BaseModel, Edit, Finding, Part, Remedy, Review, Rule, Set, Severity, Unit, join_key

from ._conduction import floating, source_loops, tied_outputs
from ._edits import move
from ._rails import grounds, powered
from ._supply_pins import missing_supply_pin, supply_faults

REQUIRED = {
    "npn": ("C", "B", "E"), "pnp": ("C", "B", "E"), "op-amp": ("IN+", "IN-", "OUT", "V+", "V-"),
    "diode": ("A", "K"), "photodiode": ("A", "K"), "potentiometer": ("END1", "WIPER", "END2"),
    "voltage-source": ("P", "N"), "current-source": ("P", "N"),
}  # fmt: skip
LOOK_ALIKE = str.maketrans("01i -", "oll__")
"""Characters taken for each other in names, lower case."""
SLIP = 0.85
"""Likeness of two names above which one is taken for a slip of the other: one letter too many or few in four."""


class Connectivity(Rule):
    """Nets with one pin, pins on nothing, outputs on supplies, nets without a path to ground, supplies swapped.

    Nearly all of these are slips of the pen: a net spelt in two ways, a pin forgotten, two nets exchanged.
    Where the file leaves only one way to mend one, that is the remedy. Parts with `spare = true` are exempt.
    One slip is told once: a net whose single pin tells of it is not told of again for want of a path to ground.
    """

    name = "connectivity"
    title = "Net or pin that is connected wrongly"
    source = "common practice, no source"
    default_severity = Severity.MAJOR
    needs = ()
    blocks_analysis = True

    class Settings(BaseModel):
        """What may stand in series with a supply pin."""

        series_resistance: Annotated[float, Unit("ohm")] = 100.0
        series_drop: Annotated[float, Unit("V")] = 0.5

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Look for each sort of slip in turn; a net told of is not told of again."""
        nets = _Nets(review)
        searches: list[Callable[[], Iterable[Finding]]] = [
            nets.missing_pins,
            lambda: supply_faults(review.design, settings.series_resistance, settings.series_drop),
            nets.shorted_parts,
            nets.lonely_nets,
            nets.untouched_nets,
            nets.tied_outputs,
            nets.source_loops,
            nets.floating_nets,
        ]
        for search in searches:
            for finding in search():
                nets.told.update(finding.nets)
                yield finding


class _Nets:
    """The searches that look at nets, and the nets told of so far."""

    def __init__(self, review: Review) -> None:
        self.design = review.design
        self.told: set[str] = set()
        self.pins: dict[str, list[tuple[str, str]]] = {name: [] for name in self.design.nets}
        for ref, part in self.design.parts.items():
            for pin, net in part.pins.items():
                self.pins[net].append((ref, pin))
        self.used = {ref: part for ref, part in self.design.parts.items() if not part.spare}

    @property
    def lonely(self) -> list[str]:
        """Ordinary nets not told of yet whose only pin belongs to a part in use."""
        alone = {net: pins[0][0] for net, pins in self.pins.items() if len(pins) == 1}
        ordinary = (net for net, ref in alone.items() if self.design.nets[net].role is None and ref in self.used)
        return [net for net in ordinary if net not in self.told]

    def missing_pins(self) -> Iterator[Finding]:
        missing = {ref: [p for p in _required(part) if p not in part.pins] for ref, part in self.used.items()}
        missing = {ref: pins for ref, pins in missing.items() if pins}
        alone = self.lonely
        one = sum(map(len, missing.values())) == 1
        for ref, pins in missing.items():
            edits = self._connect(ref, pins, alone if one else [])
            told = alone if one and len(alone) == 1 and edits else []
            title = f"connect {pins[0]} to {edits[0].to}" if edits else "connect it, or mark the part spare = true"
            yield Finding(
                f"{ref}: {', '.join(pins)} not connected", parts=[ref], nets=told, subject="pins",
                at=join_key(("parts", ref, "pins")), consequence=f"{ref} does not work",
                remedies=[Remedy(title, edits)],
            )  # fmt: skip

    def _connect(self, ref: str, pins: list[str], alone: list[str]) -> list[Set]:
        """The edit that connects a pin, where it can be meant for one net only."""
        if len(pins) != 1:
            return []
        pin = pins[0]
        if pin in ("V+", "V-"):
            supply = missing_supply_pin(self.design, ref, "V+" if pin == "V+" else "V-")
            return [edit for edit in supply if isinstance(edit, Set)]
        return [Set(join_key(("parts", ref, "pins", pin)), alone[0])] if len(alone) == 1 else []

    def shorted_parts(self) -> Iterator[Finding]:
        shorted = {r: p for r, p in self.used.items() if p.kind != "connector" and _is_shorted(p)}
        alone = self.lonely
        for ref, part in shorted.items():
            net = next(iter(part.pins.values()))
            edits: list[Edit] = []
            if len(shorted) == len(alone) == 1 and part.kind in ("resistor", "capacitor"):
                edits = [move(ref, list(part.pins)[-1], alone[0])]
            title = f"connect one end to {alone[0]}" if edits else "connect it as meant, or leave it out"
            yield Finding(
                f"{ref}: all its pins are on {net}", parts=[ref], nets=[net, *(alone if edits else [])],
                subject="shorted", at=join_key(("parts", ref, "pins")), consequence=f"{ref} does nothing",
                remedies=[Remedy(title, edits)],
            )  # fmt: skip

    def lonely_nets(self) -> Iterator[Finding]:
        alone = self.lonely
        if len(alone) == 2 and self.pins[alone[0]][0][0] != self.pins[alone[1]][0][0]:
            yield self._broken_net(*alone)
            return
        for net in alone:
            (ref, pin) = self.pins[net][0]
            meant = self._meant(net)
            edits = [move(ref, pin, meant)] if meant else []
            title = f"connect it to {meant}" if meant else f"connect {net} to what it is meant for"
            also = [meant] if meant and not self.pins[meant] else []
            yield Finding(
                f"net {net} has one pin: {ref}.{pin}", parts=[ref], nets=[net, *also], subject="one pin",
                at=join_key(("parts", ref, "pins", pin)), consequence=f"{ref} is open at {pin}",
                remedies=[Remedy(title, edits)],
            )  # fmt: skip

    def _broken_net(self, first: str, second: str) -> Finding:
        """Two nets of one pin each, the only ones: one net, most likely, under two names."""
        (ref, pin), (other, other_pin) = self.pins[first][0], self.pins[second][0]
        return Finding(
            f"nets {first} ({ref}.{pin}) and {second} ({other}.{other_pin}) have one pin each",
            parts=[ref, other], nets=[first, second], subject="one pin",
            at=join_key(("parts", other, "pins", other_pin)), consequence=f"{ref} and {other} are open there",
            remedies=[Remedy(f"connect {other}.{other_pin} to {first}", [move(other, other_pin, first)])],
        )  # fmt: skip

    def untouched_nets(self) -> Iterator[Finding]:
        spoken_of = {net for part in self.design.unmounted.values() for net in part.pins.values()}
        spoken_of |= {net.source for net in self.design.nets.values() if net.source}
        spoken_of |= {s for p in self.design.parts.values() if (s := p.parameters.get("source"))}
        spoken_of |= set(grounds(self.design)[:1])  # sources and loads stand on it without saying so
        for name in self.design.nets:
            if self.pins[name] or name in spoken_of | self.told:
                continue
            meant = self._meant(name)
            ordinary = meant is not None and self.design.nets[meant].role is None
            edits = [move(ref, pin, name) for ref, pin in self.pins[meant]] if meant and ordinary else []
            title = f"connect to it what is on {meant}" if edits else "connect a part to it, or take it out of [nets]"
            yield Finding(
                f"no part touches net {name}", nets=[name], subject="untouched", at=join_key(("nets", name)),
                severity=Severity.MAJOR if self.design.nets[name].role in ("input", "output") else Severity.MINOR,
                consequence="what is said of it has no effect", remedies=[Remedy(title, edits)],
            )  # fmt: skip

    def _meant(self, name: str) -> str | None:
        """The one other net whose name a slip of the pen could turn into this one."""
        near = [other for other in self.pins if other != name and _is_slip(name, other)]
        return near[0] if len(near) == 1 else None

    def tied_outputs(self) -> Iterator[Finding]:
        for refs, held, nets in tied_outputs(self.design, powered(self.design)):
            outputs = " and ".join(f"{ref}.OUT" for ref in refs)
            target = ", ".join(held) if held else "each other"
            yield Finding(
                f"{outputs} tied to {target}", parts=refs, nets=[*nets, *(n for n in held if n not in nets)],
                subject="outputs", at=join_key(("parts", refs[0], "pins", "OUT")),
                consequence="the output runs into its current limit",
                remedies=[Remedy("connect the output to a net of its own")],
            )  # fmt: skip

    def source_loops(self) -> Iterator[Finding]:
        for parts, nets in source_loops(self.design):
            yield Finding(
                f"a loop of ideal voltage sources closes through {', '.join(parts)} over {', '.join(nets)}",
                parts=parts, nets=nets, subject="source loop", consequence="nothing limits the current in the loop",
                remedies=[Remedy("take one of them out of the loop, or give it a series resistance")],
            )  # fmt: skip

    def floating_nets(self) -> Iterator[Finding]:
        for group in floating(self.design):
            refs = list(dict.fromkeys(ref for net in group for ref, _ in self.pins[net] if ref in self.used))
            if not refs or self.told.intersection(group):
                continue
            yield Finding(
                f"no path of direct current from {', '.join(group)} to ground; at it: {', '.join(refs)}", parts=refs,
                nets=group, subject="no path", consequence="its voltage drifts to wherever leakage takes it",
                at=join_key(("parts", refs[0], "pins")),
                remedies=[Remedy("give it a resistor to ground or to what sets its level")],
            )  # fmt: skip


def _required(part: Part) -> tuple[str, ...]:
    """Pins a part cannot do without; sources may have theirs as a list."""
    listed = part.kind in ("voltage-source", "current-source") and len(part.pins) == 2
    return () if listed else REQUIRED.get(part.kind, ())


def _is_shorted(part: Part) -> bool:
    return len(part.pins) > 1 and len(set(part.pins.values())) == 1


def _undoubled(name: str) -> str:
    """A name with every repeated character once."""
    return "".join(c for c, _ in itertools.groupby(name))


def _is_slip(a: str, b: str) -> bool:
    """Whether two names look alike; those that only count or letter in another way (S1 and S2) do not."""
    a, b = a.lower(), b.lower()
    if a.translate(LOOK_ALIKE) == b.translate(LOOK_ALIKE) or _undoubled(a) == _undoubled(b):
        return True
    numbered = [c for c in a if c.isdigit()] != [c for c in b if c.isdigit()]
    lettered = len(a) == len(b) and a[:-1] == b[:-1]
    return not numbered and not lettered and difflib.SequenceMatcher(None, a, b).ratio() > SLIP
