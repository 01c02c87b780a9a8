"""Amplifier inputs outside their common-mode range.

Near a rail the input stage of an amplifier stops working: gain falls, offset grows, some outputs reverse. A
virtual ground at the level of one rail, or a follower whose signal comes near one, is where it happens.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Annotated, Any

import numpy as np

from rulecheck.api import (
    BaseModel,
    Evidence,
    Finding,
    Remedy,
    Review,
    Rule,
    Set,
    Severity,
    Unit,
    Worst,
    format_quantity,
    join_key,
)

from ._edits import quantity
from ._models import higher_supplies, in_packages_of, other_models
from ._saturation import SignalFlow

LEVEL_STEP = 0.1
"""Volts to which a reference level is rounded."""
SLACK = 1e-3
"""Volts by which offset, bias current and finite gain move an input about its level."""


class InputHeadroom(Rule):
    """Inputs are judged at all review conditions against the rails of their own amplifier.

    The range is the guaranteed one where the model states limits. An input that has left its level because an
    amplifier is saturated is not judged there: that is a matter of `output-swing`. Makers state ranges of 1 to
    5 V from either rail (OP07 data sheet: ±13 V at ±15 V guaranteed; TL07x: 4 V from the negative rail).
    """

    name = "input-headroom"
    title = "Amplifier input outside its common-mode range"
    source = "data sheets' common-mode range; the margin: common practice, no source"
    default_severity = Severity.MAJOR

    class Settings(BaseModel):
        """Limits."""

        margin: Annotated[float, Unit("V")] = 0.1

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """One finding for the amplifiers whose inputs stand at one fixed level, else one an amplifier."""
        flow = SignalFlow(review)
        rooms = {amplifier: list(_rooms(review, flow, amplifier)) for amplifier in flow.amplifiers}
        groups: dict[str, list[str]] = {}
        for amplifier, own in rooms.items():
            if any(room.missing(settings.margin) > SLACK for room in own):
                groups.setdefault(_level(review, amplifier), []).append(amplifier)
        for level, amplifiers in groups.items():
            yield self._finding(review, settings, level, amplifiers, rooms)

    def _finding(
        self, review: Review, settings: Settings, level: str, amplifiers: list[str], rooms: dict[str, list[_Room]]
    ) -> Finding:
        room = max((r for a in amplifiers for r in rooms[a]), key=lambda room: room.missing(settings.margin))
        outside = room.worst.value < -SLACK
        rail = "V-" if room.side == "low" else "V+"
        where = "outside" if outside else f"less than {format_quantity(settings.margin, 'V')} inside"
        return Finding(
            f"{', '.join(amplifiers)}: {room.pin} of {room.amplifier} is {_distance(room.distance, rail)}, {where} "
            f"its range, which ends {_distance(room.headroom, rail)}",
            parts=amplifiers, nets=[level] if level in review.design.nets else [],
            severity=Severity.MAJOR if outside else Severity.MINOR, conditions=room.worst.conditions,
            consequence=_consequence(review, amplifiers),
            evidence=[Evidence("distance of the input from the end of its range", room.worst.value, "V",
                               room.wanted(settings.margin), ">=", over=room.over, basis="limit")],
            remedies=_remedies(review, settings, amplifiers, rooms, room),
            at=join_key(("parts", room.amplifier)),
        )  # fmt: skip


@dataclass(frozen=True)
class _Room:
    """Distance of one input from one end of its range; negative where it is outside."""

    amplifier: str
    pin: str
    side: str
    headroom: float
    over: np.ndarray[Any, Any]
    worst: Worst

    def wanted(self, margin: float) -> float:
        """Least distance that is sound; none is asked of inputs that take in the rail."""
        return margin if self.headroom > 0 else 0.0

    def missing(self, margin: float) -> float:
        """Volts by which it is too little."""
        return self.wanted(margin) - self.worst.value

    @property
    def distance(self) -> float:
        """Distance from the rail [V]."""
        return self.worst.value + self.headroom


def _rooms(review: Review, flow: SignalFlow, amplifier: str) -> Iterable[_Room]:
    points, part = review.operating_points, review.design.parts[amplifier]
    low, high = part.input_headroom.low.max, part.input_headroom.high.max
    for pin in ("IN+", "IN-"):
        volts = np.where(_disturbed(review, flow, part.pins[pin]), np.nan, points.voltage(part.pins[pin]))
        if not np.isfinite(volts).any():
            continue
        below, above = volts - points.voltage(part.pins["V-"]) - low, points.voltage(part.pins["V+"]) - high - volts
        yield _Room(amplifier, pin, "low", low, below, points.least(below))
        yield _Room(amplifier, pin, "high", high, above, points.least(above))


def _disturbed(review: Review, flow: SignalFlow, net: str) -> np.ndarray[Any, Any]:
    """Where a saturated amplifier moves the net."""
    points = review.operating_points
    movers = [a for a in flow.amplifiers if not points.linear(a).all() and net in flow.nets(a)]
    return np.any([~points.linear(a) for a in movers], axis=0) if movers else ~points.converged


def _level(review: Review, amplifier: str) -> str:
    """Net of the fixed level at which an amplifier's inputs stand; the amplifier itself where it moves."""
    own = (node.level_net for node in review.structure.summing_nodes if node.amplifier == amplifier)
    return next((net for net in own if review.structure.held_at(net) is not None), amplifier)


def _consequence(review: Review, amplifiers: list[str]) -> str:
    reverses = any(review.design.parts[a].phase_reversal for a in amplifiers)
    words = "the output may reverse and stay at a limit" if reverses else "gain falls and offset grows"
    outputs = [name for name, net in review.design.nets.items() if net.role == "output"]
    return f"{words}; the law of {', '.join(outputs)} does not hold there" if outputs else words


def _distance(volts: float, rail: str) -> str:
    words = format_quantity(abs(volts), "V", 3)
    return f"{words} from {rail}" if volts >= 0 else f"{words} beyond {rail}"


def _remedies(
    review: Review, settings: InputHeadroom.Settings, amplifiers: list[str], rooms: dict[str, list[_Room]], worst: _Room
) -> list[Remedy]:
    if not review.seeks_remedies:
        return []
    rail = "V-" if worst.side == "low" else "V+"
    together = [room for a in in_packages_of(review, amplifiers) for room in rooms.get(a, ())]

    def fits(model: Any) -> bool:  # noqa: ANN401  # an amplifier's parameters
        others = (replace(room, headroom=getattr(model.input_headroom, room.side).max) for room in together)
        return all(
            new.wanted(settings.margin) <= room.distance - new.headroom + SLACK
            for new, room in zip(others, together, strict=True)
        )

    found = _other_level(review, settings, worst)
    found += higher_supplies(review, worst.amplifier, {rail: worst.missing(settings.margin)})
    why = f"its inputs may stand {_distance(worst.distance, rail)}"
    found += other_models(review, amplifiers, fits, ("input_headroom",), why)
    return found or [Remedy("keep the input inside the range: divide the signal before it, or shift its level")]


def _other_level(review: Review, settings: InputHeadroom.Settings, worst: _Room) -> list[Remedy]:
    """Move the reference that sets the level, where one does so directly."""
    pins = review.design.parts[worst.amplifier].pins
    net = next((pins[p] for p in ("IN+", "IN-") if review.design.nets[pins[p]].role == "reference"), None)
    if net is None or not isinstance(review.design.data["nets"][net]["voltage"], str):
        return []
    voltage = review.design.nets[net].voltage
    assert voltage is not None
    shift = LEVEL_STEP * math.ceil((worst.missing(settings.margin) - SLACK) / LEVEL_STEP)
    to = quantity(voltage.typ + (shift if worst.side == "low" else -shift), "V")
    return [Remedy(f"make {net} {to}", [Set(join_key(("nets", net, "voltage")), to)])]
