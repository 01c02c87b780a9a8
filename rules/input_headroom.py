"""Amplifier inputs outside their common-mode range.

Near a rail the input stage of an amplifier stops working: gain falls, offset grows, some outputs reverse. A
virtual ground at the level of one rail, or a follower whose signal comes near one, is where it happens.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
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
from ._models import higher_supply, other_models
from ._saturation import SignalFlow

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
        groups: dict[str, list[_Room]] = {}
        for amplifier in flow.amplifiers:
            rooms = [room for room in _rooms(review, flow, amplifier) if room.is_short(settings.margin)]
            if rooms:
                worst = min(rooms, key=lambda room: room.worst.value - room.wanted(settings.margin))
                groups.setdefault(_level(review, amplifier), []).append(worst)
        for level, rooms in groups.items():
            yield self._finding(review, settings, level, rooms)

    def _finding(self, review: Review, settings: Settings, level: str, rooms: list[_Room]) -> Finding:
        room = min(rooms, key=lambda room: room.worst.value)
        amplifiers = list(dict.fromkeys(r.amplifier for r in rooms))
        outside = room.worst.value < -SLACK
        pin, rail = f"{room.amplifier} {room.pin}", "V-" if room.side == "low" else "V+"
        distance = format_quantity(room.worst.value + room.headroom, "V", 3)
        missing = "outside" if outside else "within " + format_quantity(settings.margin, "V") + " of the end of"
        return Finding(
            f"{', '.join(amplifiers)}: {pin} is {distance} from {rail}, {missing} its range, which ends "
            f"{format_quantity(room.headroom, 'V', 3)} from it",
            parts=amplifiers, nets=[level] if level in review.design.nets else [],
            severity=Severity.MAJOR if outside else Severity.MINOR, conditions=room.worst.conditions,
            consequence=_consequence(review, amplifiers),
            evidence=[Evidence("distance of the input from the end of its range", room.worst.value, "V",
                               room.wanted(settings.margin), ">=", over=room.over, basis="limit")],
            remedies=_remedies(review, settings, rooms), at=join_key(("parts", room.amplifier)),
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

    def is_short(self, margin: float) -> bool:
        return self.worst.value < self.wanted(margin) - SLACK


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


def _remedies(review: Review, settings: InputHeadroom.Settings, rooms: list[_Room]) -> list[Remedy]:
    worst = min(rooms, key=lambda room: room.worst.value)
    part = review.design.parts[worst.amplifier]
    missing = worst.wanted(settings.margin) - worst.worst.value
    found = _other_level(review, settings, worst)
    found += higher_supply(review, part.pins["V-" if worst.side == "low" else "V+"], missing)
    distances = {side: min((r.worst.value + r.headroom for r in rooms if r.side == side), default=np.inf)
                 for side in ("low", "high")}  # fmt: skip

    def fits(model: Any) -> bool:  # noqa: ANN401  # an amplifier's parameters
        ends = {side: getattr(model.input_headroom, side).max for side in distances}
        return all(d - ends[s] >= (settings.margin if ends[s] > 0 else 0.0) - SLACK for s, d in distances.items())

    why = f"its inputs go to within {format_quantity(distances[worst.side], 'V', 3)} of the rail"
    found += other_models(review, worst.amplifier, fits, ("input_headroom",), why)
    return found or [Remedy("keep the input inside the range: divide the signal before it, or shift its level")]


def _other_level(review: Review, settings: InputHeadroom.Settings, worst: _Room) -> list[Remedy]:
    """Move the reference that sets the level, where one does so directly."""
    part = review.design.parts[worst.amplifier]
    references = [n for n in (part.pins["IN+"], part.pins["IN-"]) if review.design.nets[n].role == "reference"]
    if not references:
        return []
    net = references[0]
    voltage = review.design.nets[net].voltage
    assert voltage is not None
    if isinstance(review.design.data["nets"][net]["voltage"], dict):
        return []
    step = 0.1
    shift = step * np.ceil((worst.wanted(settings.margin) - worst.worst.value) / step)
    to = quantity(voltage.typ + (shift if worst.side == "low" else -shift), "V")
    return [Remedy(f"make {net} {to}", [Set(join_key(("nets", net, "voltage")), to)])]
