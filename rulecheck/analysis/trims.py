"""Trims: potentiometers that are set to null the error of a requirement, and how they answer deviations."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array
from .operating_points import OperatingPoints
from .sensitivity import Sensitivity, placing
from .spreads import Deviation, deviations, of_supply
from .transfer import law_values, trim_error

if TYPE_CHECKING:
    from ..design.model import Design
    from .conditions import Conditions
    from .review import Review

PROBE = 1e-3
"""First step of a search, as a share of the travel."""
ROUNDS = 15
FINEST = 1e-8
"""Step of a position at which it is found."""


@dataclass(frozen=True)
class _Answer:
    """A trim's answer to deviations.

    Attributes
    ----------
    part : str
        The potentiometer.
    own : Sensitivity
        Of the requirement that it adjusts, where it is trimmed.
    own_slope : float
        Of that requirement's error in its position.
    of_earlier : tuple of float
        The same in the positions of the trims that are set before.
    slope : ndarray
        Of the judged error in its position.
    """

    part: str
    own: Sensitivity
    own_slope: float
    of_earlier: tuple[float, ...]
    slope: Array


class Trims:
    """Trims of a circuit, which answer a deviation by nulling the error of their own requirement.

    They are set one after the other at typical supplies, and do not follow these. A trim that stands at an end of
    its travel has nothing left to answer with.

    Parameters
    ----------
    review : Review
    sensitivity : Sensitivity
        Of the requirement that is judged.
    """

    def __init__(self, review: Review, sensitivity: Sensitivity) -> None:
        self._design = review.design
        self._answers: list[_Answer] = []
        placed = placing(sensitivity.points, sensitivity.requirement.output)
        positions: dict[str, float] = {}
        able: list[str] = []
        for ref in trims_among(review.design, placed.parts if placed is not None else ()):
            positions[ref] = review.typical[ref]
            spread = review.design.parts[ref].position
            if spread.min < positions[ref] < spread.max or spread.min == spread.max:
                own = _where_trimmed(review, review.design.parts[ref].adjusts, positions)
                earlier = tuple(float(own.of_position(other)[0]) for other in able)
                slope = sensitivity.of_position(ref)
                self._answers.append(_Answer(ref, own, float(own.of_position(ref)[0]), earlier, slope))
                able.append(ref)

    def following(self, deviation: Deviation) -> Array | float:
        """What the trims add to the slope of the judged error in a deviation."""
        total: Array | float = 0.0
        for answer, turn in zip(self._answers, self.turns(deviation).values(), strict=True):
            total = total + answer.slope * turn
        return total

    def turns(self, deviation: Deviation) -> dict[str, float]:
        """Change of the position of each trim that can still be turned, for a deviation of one."""
        turns: dict[str, float] = {}
        for answer in self._answers:
            left = answer.own.of(deviation)[0] + np.dot(answer.of_earlier, list(turns.values()))
            follows = answer.own_slope and not of_supply(self._design, deviation)
            turns[answer.part] = -float(left) / answer.own_slope if follows else 0.0
        return turns


def _where_trimmed(review: Review, name: str, positions: Mapping[str, float]) -> Sensitivity:
    """Sensitivity of a trimmed requirement at the one condition at which it is trimmed."""
    requirement = review.design.requirements[name]
    found: list[OperatingPoints] = []

    def solver(conditions: Conditions) -> OperatingPoints:
        found.append(review.solve(conditions))
        return found[-1]

    trim_error(review.design, requirement, dict(positions), solver)
    return Sensitivity(requirement, found[0])


@dataclass(frozen=True)
class Travel:
    """What a trim needs of its travel.

    Attributes
    ----------
    part : str
        The potentiometer.
    position : float
        Where it is set nominally.
    needed : float
        How far it turns to either side when all spreads are at the extremes that ask most of it.
    low, high : float
        Ends of the travel.
    error : float
        What the output may keep where it is trimmed, at these extremes [V].
    """

    part: str
    position: float
    needed: float
    low: float
    high: float
    error: float

    @property
    def left(self) -> float:
        """Travel that is left at the nearer end; negative where it does not suffice, 0 where none is left nominally."""
        return min(self.position - self.low, self.high - self.position) - self.needed


def travel(review: Review, name: str) -> tuple[Travel, ...]:
    """Travel of the trims that adjust a requirement; slopes taken as constant, trims set before it following too.

    Parameters
    ----------
    review : Review
    name : str
        Requirement with a law.
    """
    parts = review.design.parts
    own = [r for r, p in parts.items() if p.kind == "potentiometer" and p.adjusts == name and r in review.typical]
    own = [r for r in own if parts[r].position.min < parts[r].position.max]
    if not own:
        return ()
    sensitivity = _where_trimmed(review, name, {r: review.typical[r] for r in own})
    trims = Trims(review, sensitivity)
    turns = [(d.half, trims.turns(d)) for d in deviations(review.design) if not of_supply(review.design, d)]
    found = []
    for ref in own:
        position, spread = float(review.typical[ref]), parts[ref].position
        needed = sum(half * abs(turn.get(ref, 0.0)) for half, turn in turns)
        lacking = needed - min(position - spread.min, spread.max - position)
        error = max(lacking, 0.0) * abs(float(sensitivity.of_position(ref)[0])) + _kept(sensitivity)
        found.append(Travel(ref, position, needed, float(spread.min), float(spread.max), error))
    return tuple(found)


def _kept(sensitivity: Sensitivity) -> float:
    """Error that the trims leave at nominal values, where they are set [V]."""
    points, requirement = sensitivity.points, sensitivity.requirement
    return abs(float(points.voltage(requirement.output)[0] - law_values(requirement, points)[0]))


def trims_among(design: Design, parts: Iterable[str]) -> list[str]:
    """Potentiometers among some parts that adjust a requirement with a law, in the order they are set."""
    laws = {name for name, requirement in design.requirements.items() if requirement.law is not None}
    among = set(parts)
    return [r for r, p in design.parts.items() if p.kind == "potentiometer" and r in among and p.adjusts in laws]


def null(error: Callable[[Array], Array], start: Array, low: float, high: float) -> Array:
    """Positions at which errors vanish, each by secants of its own; the end of the travel where one does not.

    Parameters
    ----------
    error : callable
        Errors at positions, arrays of one shape.
    start : ndarray
        Positions to start from.
    low, high : float
        Ends of the travel.

    Returns
    -------
    ndarray
        Positions; the last ones tried where the errors have no value.
    """
    before, error_before = start, error(start)
    probe = PROBE * (high - low)
    here = np.where(start + probe <= high, start + probe, start - probe)
    found = np.zeros(start.shape, bool)
    for _ in range(ROUNDS):
        error_here = error(here)
        with np.errstate(all="ignore"):
            slope = (error_here - error_before) / (here - before)
            wanted = np.clip(here - error_here / slope, low, high)
        wanted = np.where(np.isfinite(wanted) & ~found, wanted, here)
        found = np.abs(wanted - here) <= FINEST
        before, error_before, here = here, error_here, wanted
        if found.all():
            break
    return here
