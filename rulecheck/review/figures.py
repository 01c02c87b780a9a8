"""The few figures by which a design is known: worst errors, least margins, room at outputs and inputs."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from rulecheck.analysis.review import Review
    from rulecheck.api import Part


@dataclass(frozen=True, slots=True)
class Figure:
    """A figure of a design at its worst condition.

    Attributes
    ----------
    name : str
        In words.
    of : str
        Requirement or amplifier; empty for the whole design.
    unit : str
    value : float
        In SI.
    """

    name: str
    of: str
    unit: str
    value: float


def key_figures(review: Review) -> list[Figure]:
    """Key figures of a design; what has none at any condition is left out.

    Parameters
    ----------
    review : Review
    """
    return [*_errors(review), *_margins(review), *_rooms(review)]


def _errors(review: Review) -> Iterator[Figure]:
    for name, transfer in review.transfer.items():
        budget = review.budget[name]
        total = np.abs(transfer.error) + budget.worst_case
        with np.errstate(all="ignore"):
            share = total / transfer.allowed
        errors = (("worst nominal error", "V", np.abs(transfer.error)), ("worst error with spreads", "V", total))
        for words, unit, values in (*errors, ("worst error with spreads over allowed", "%", share)):
            yield from _extreme(words, name, unit, np.where(transfer.judged, values, np.nan), largest=True)


def _margins(review: Review) -> Iterator[Figure]:
    loops = review.loops
    for amplifier in loops.amplifiers:
        yield from _extreme("least phase margin", amplifier, "deg", loops.phase_margin(amplifier))
    yield from _extreme("least damping ratio", "", "1", loops.least_damping)


def _rooms(review: Review) -> Iterator[Figure]:
    """Distances of outputs and inputs of amplifiers from their guaranteed limits, where the amplifier is at work."""
    from rulecheck.analysis.queries import in_use

    points, asked = review.operating_points, in_use(review)
    for ref in review.loops.amplifiers:
        part, judged = review.design.parts[ref], asked & points.linear(ref)
        volts = {pin: points.voltage(net) for pin, net in part.pins.items()}
        inner = volts["OUT"] - part.output_resistance.typ * points.current(ref, "OUT")
        room = _room(inner, volts, part, "output_headroom")
        yield from _extreme("least room of output", ref, "V", np.where(judged, room, np.nan))
        room = np.minimum(*(_room(volts[pin], volts, part, "input_headroom") for pin in ("IN+", "IN-")))
        yield from _extreme("least room of inputs", ref, "V", np.where(judged, room, np.nan))


def _room(at: Any, volts: dict[str, Any], part: Part, headroom: str) -> Any:  # noqa: ANN401 - arrays
    limits = getattr(part, headroom)
    return np.minimum(at - volts["V-"] - limits.low.max, volts["V+"] - at - limits.high.max)


def _extreme(name: str, of: str, unit: str, values: Any, *, largest: bool = False) -> Iterator[Figure]:  # noqa: ANN401
    known = values[np.isfinite(values)]
    if known.size:
        yield Figure(name, of, unit, float(known.max() if largest else known.min()))
