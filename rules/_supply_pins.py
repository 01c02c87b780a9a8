"""Supply pins of amplifiers: without a rail, at one rail, or swapped; and the edit that connects them rightly."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from rulecheck.api import Design, Edit, Finding, Move, Part, Remedy, Set, format_quantity, join_key

from ._edits import move, swap_pins
from ._rails import SUPPLY_PINS, Feed, Rails, SupplyPin, grounds, powered

Feeds = dict[SupplyPin, Feed | None]


def supply_faults(design: Design, resistance: float, drop: float) -> Iterator[Finding]:
    """Faults of the supply pins that are connected to something.

    Parameters
    ----------
    design : Design
    resistance : float
        In series with a supply pin, always fine [ohm].
    drop : float
        Across more than that, fine at the stated supply currents [V].

    Yields
    ------
    Finding
        One a package and fault: its amplifiers share their supply pins.
    """
    rails = Rails(design)
    fed = {ref: _feeds(rails, part, resistance, drop) for ref, part in powered(design).items()}
    usual = _Usual(design, fed)
    faults: dict[tuple[str, str], list[str]] = {}
    for ref, feeds in fed.items():
        if all(pin in design.parts[ref].pins for pin in SUPPLY_PINS):
            faults.setdefault((design.parts[ref].package, _fault(design.parts[ref], feeds)), []).append(ref)
    for (_, fault), refs in faults.items():
        if fault:
            yield _finding(design, rails, usual, fault, refs, fed[refs[0]])


def missing_supply_pin(design: Design, ref: str, pin: SupplyPin) -> list[Edit]:
    """The edit that connects a supply pin that is left out, where other amplifiers say how; else none."""
    rails = Rails(design)
    fed: dict[str, Feeds] = {r: {p: rails.feed(part, p) for p in SUPPLY_PINS} for r, part in powered(design).items()}
    net = _Usual(design, fed).net(ref, pin)
    return [Set(join_key(("parts", ref, "pins", pin)), net)] if net else []


def _feeds(rails: Rails, part: Part, resistance: float, drop: float) -> Feeds:
    """Feeds of both supply pins; None where there is none of small drop."""
    feeds: Feeds = {}
    for pin in SUPPLY_PINS:
        feed = rails.feed(part, pin)
        small = feed is not None and (feed.ohm <= resistance or feed.ohm * _current(rails, part, pin) <= drop)
        feeds[pin] = feed if small else None
    return feeds


def _current(rails: Rails, part: Part, pin: SupplyPin) -> float:
    """Supply current of all amplifiers at the net of a pin; infinite where a model does not say."""
    sharing = [p for p in powered(rails.design).values() if part.pins[pin] in (p.pins.get(q) for q in SUPPLY_PINS)]
    return sum(p.supply_current.max if p.supply_current is not None else float("inf") for p in sharing)


def _fault(part: Part, feeds: Feeds) -> str:
    high, low = feeds["V+"], feeds["V-"]
    if high is None or low is None:
        pins = [pin for pin in SUPPLY_PINS if feeds[pin] is None]
        return " and ".join(f"{pin} on {part.pins[pin]}" for pin in pins)
    if high.volts > low.volts:
        return ""
    return "swapped" if high.volts < low.volts else "one rail"


class _Usual:
    """Where supply pins go on this board: as on amplifiers of the same package, else as on all others."""

    def __init__(self, design: Design, fed: dict[str, Feeds]) -> None:
        self.design = design
        self.sound = {r: feeds for r, feeds in fed.items() if not _fault_of(design, r, feeds)}

    def net(self, ref: str, pin: SupplyPin) -> str | None:
        """The one net that a supply pin of an amplifier can be meant for; None where there are several."""
        parts, package = self.design.parts, self.design.parts[ref].package
        beside = [parts[r].pins[pin] for r in self.sound if parts[r].package == package]
        for nets in (beside, [parts[r].pins[pin] for r in self.sound], self._rails(pin)):
            if nets:
                return nets[0] if len(set(nets)) == 1 else None
        return None

    def _rails(self, pin: SupplyPin) -> list[str]:
        sign = 1 if pin == "V+" else -1
        supplies = {n: net.voltage for n, net in self.design.nets.items() if net.role == "supply" and net.voltage}
        own = [name for name, volts in supplies.items() if sign * volts.typ > 0]
        return own or grounds(self.design)


def _fault_of(design: Design, ref: str, feeds: Feeds) -> str:
    part = design.parts[ref]
    return _fault(part, feeds) if all(pin in part.pins for pin in SUPPLY_PINS) else "pin missing"


def _finding(design: Design, rails: Rails, usual: _Usual, fault: str, refs: list[str], feeds: Feeds) -> Finding:
    pins = design.parts[refs[0]].pins
    who = ", ".join(refs)
    wrong: list[SupplyPin] = [pin for pin in SUPPLY_PINS if feeds[pin] is None] or list(SUPPLY_PINS)
    consequence = "it is not powered"
    if fault == "swapped":
        message = f"{who}: supply pins swapped: {_levels(rails, design.parts[refs[0]])}"
        consequence = "reverse supply destroys the amplifier"
        edits = [edit for ref in refs for edit in swap_pins(design, ref, "V+", "V-")]
        remedies = [Remedy("swap V+ and V-", edits)]
    else:
        if fault == "one rail":
            message = f"{who}: no voltage between the supply pins: {_levels(rails, design.parts[refs[0]])}"
        else:
            far = _far(rails, design.parts[refs[0]], wrong)
            message = f"{who}: {fault}, which no supply feeds with a small drop{far}"
        remedies = _remedies(_repairs(design, usual, refs, wrong))
    return Finding(
        message, parts=refs, nets=list(dict.fromkeys(pins[pin] for pin in wrong)), subject="supply pins",
        at=join_key(("parts", refs[0], "pins", wrong[0])), consequence=consequence, remedies=remedies,
    )  # fmt: skip


def _levels(rails: Rails, part: Part) -> str:
    """Nets of the supply pins and their voltages, in words."""
    feeds = ((pin, rails.feed(part, pin)) for pin in SUPPLY_PINS)
    words = [f"{pin} is on {part.pins[pin]} at {format_quantity(feed.volts, 'V')}" for pin, feed in feeds if feed]
    return ", ".join(words)


def _far(rails: Rails, part: Part, pins: Iterable[SupplyPin]) -> str:
    """The sources that pins reach over too much resistance, in words."""
    feeds = ((pin, rails.feed(part, pin)) for pin in pins)
    words = [f"{pin} is {format_quantity(feed.ohm, 'ohm')} away from {feed.source}" for pin, feed in feeds if feed]
    return f"; {', '.join(words)}" if words else ""


def _repairs(design: Design, usual: _Usual, refs: list[str], pins: Iterable[SupplyPin]) -> list[Edit]:
    """Moves of wrong pins to where they are usual; none unless every amplifier is cured by them."""
    edits: list[Edit] = []
    for ref in refs:
        wanted = {pin: usual.net(ref, pin) for pin in pins}
        moves = [move(ref, p, n) for p, n in wanted.items() if n is not None and n != design.parts[ref].pins[p]]
        if None in wanted.values() or not moves:
            return []
        edits += moves
    return edits


def _remedies(edits: list[Edit]) -> list[Remedy]:
    targets = ", ".join(dict.fromkeys(edit.to for edit in edits if isinstance(edit, Move)))
    return [Remedy(f"connect it to {targets}" if edits else "connect it to a supply of its own polarity", edits)]
