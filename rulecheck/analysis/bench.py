"""What a voltmeter should read on each net and part of a built circuit, and what could explain it where it does not."""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from ..design.keypath import join_key
from ..design.model import Requirement
from ..devices.constants import NOMINAL_TEMPERATURE, Array, BoolArray, IntArray
from .network import in_circuit
from .sensitivity import Sensitivity, placing, touches
from .spreads import CONDITION_KEYS, Deviation, deviations, in_force
from .trims import Trims, trims_among

if TYPE_CHECKING:
    from ..design.model import Design, Part
    from .conditions import Conditions
    from .operating_points import OperatingPoints
    from .review import Review

FINEST_READING = 1e-6
"""What a bench meter resolves [V]: a limit is never closer."""
MOST_EXPLANATIONS = 6


@dataclass(frozen=True)
class Reading:
    """A voltage that a meter can read; arrays over conditions.

    Attributes
    ----------
    name : str
        Key path of a net, or of a part and what is read on it: ``parts.Q1.vbe``.
    expected : ndarray [V]
    slope : ndarray, shape (deviations, conditions)
        In each deviation of the sheet.
    contribution : ndarray, shape (deviations, conditions) [V]
        Slope times half-spread.
    """

    name: str
    expected: Array
    slope: Array
    contribution: Array

    @cached_property
    def worst_case(self) -> Array:
        """Sum of the magnitudes of contributions: the reading lies within plus and minus this [V]."""
        total: Array = np.abs(self.contribution).sum(axis=0)
        return total

    @cached_property
    def rss(self) -> Array:
        """Root of the sum of the squares of contributions [V]."""
        return np.sqrt((self.contribution**2).sum(axis=0))

    @property
    def limit(self) -> Array:
        """How far a sound circuit may read from what is expected [V]."""
        return np.maximum(self.worst_case, FINEST_READING)


@dataclass(frozen=True)
class BenchSheet:
    """Readings at chosen conditions, with the deviations that move them."""

    conditions: Conditions
    deviations: tuple[Deviation, ...]
    readings: Mapping[str, Reading]


def bench_sheet(review: Review, stated: Collection[str] = ()) -> BenchSheet:
    """Readings of all nets that can deviate and of all parts, at the review conditions.

    Their limits are those of the error budget: one transposed solve a net, trims following.

    Parameters
    ----------
    review : Review
    stated : collection of str
        Quantities of a condition (supplies, references, potentiometers) that the bench sets or measures: they do
        not deviate.
    """
    design, points = review.design, review.operating_points
    known = set(stated)
    free = tuple(d for d in deviations(design) if not _is_stated(d, known))
    follows = not known.intersection(trims_among(design, design.parts))
    slopes = {net: _slopes(review, net, free, follows) for net in design.nets}
    weights = np.array([d.half * in_force(design, d, points.conditions) for d in free])
    weights = weights.reshape(len(free), points.conditions.size)
    blank = np.where(points.converged, 0.0, np.nan)
    readings = {}
    for name, (high, low) in _taps(design, points):
        slope = slopes[high] - (slopes[low] if low is not None else 0.0)
        volts = points.voltage(high) - (points.voltage(low) if low is not None else 0.0)
        readings[name] = Reading(name, volts + blank, slope, slope * weights)
    return BenchSheet(points.conditions, free, readings)


def _is_stated(deviation: Deviation, stated: set[str]) -> bool:
    return all(key in CONDITION_KEYS and owner in stated for owner, key, _ in deviation.moves)


def _slopes(review: Review, net: str, free: Sequence[Deviation], follows: bool) -> Array:
    """Slopes of a net's voltage in deviations, shape (deviations, conditions)."""
    points = review.operating_points
    found = np.zeros((len(free), points.conditions.size))
    if placing(points, net) is None:
        for row, deviation in zip(found, free, strict=True):
            row += _of_driven(points, net, deviation)
        return found
    requirement = Requirement(net, net)
    sensitivity = Sensitivity(requirement, points)
    trims = Trims(review, sensitivity) if follows else None
    for row, deviation in zip(found, free, strict=True):
        if touches(requirement, points, deviation):
            row += sensitivity.of(deviation) + (trims.following(deviation) if trims is not None else 0.0)
    return found


def _of_driven(points: OperatingPoints, net: str, deviation: Deviation) -> Array | float:
    """Slope of a net that a supply or reference drives in the deviation of this voltage or of its tempco."""
    warmer = points.conditions.values["ambient"] - NOMINAL_TEMPERATURE
    total: Array | float = 0.0
    for owner, key, per in deviation.moves:
        if owner == net and key == "voltage":
            total = total + per * (1 + points.design.nets[net].tempco * warmer)
        elif owner == net and key == "voltage_tempco":
            total = total + per * points.conditions.values[net] * warmer
    return total


def _taps(design: Design, points: OperatingPoints) -> Iterator[tuple[str, tuple[str, str | None]]]:
    """Names of readings with the nets at the meter's leads; the second is ground where None."""
    for name, net in design.nets.items():
        driven = placing(points, name) is None
        if net.role != "ground" and not (driven and net.role not in ("supply", "reference")):
            yield join_key(("nets", name)), (name, None)
    held = in_circuit(design)
    for ref, part in design.parts.items():
        if ref in held:
            for word, high, low in _leads(part):
                yield join_key(("parts", ref, word)), (part.pins[high], part.pins[low])


def _leads(part: Part) -> Iterator[tuple[str, str, str]]:
    """What is read on a part, and between which pins."""
    if part.kind in ("npn", "pnp"):
        yield "vbe", "B", "E"
        yield "vce", "C", "E"
    elif part.kind == "op-amp":
        yield "input_difference", "IN+", "IN-"
    elif part.kind == "potentiometer":
        yield "voltage", "END1", "END2"
    elif part.kind in ("resistor", "diode", "photodiode", "voltage-source", "current-source"):
        first, second = part.pins
        yield "voltage", first, second


@dataclass(frozen=True)
class Explanation:
    """A single parameter that could explain readings outside their limits.

    Attributes
    ----------
    parameter : str
        Key path.
    deviation : float
        From its nominal, the one that fits all readings best [unit of the parameter].
    half_spreads : float
        The same over its half-spread.
    explains, contradicts : tuple of int
        Measurements outside that it would bring inside; those inside that it would take outside.
    """

    parameter: str
    deviation: float
    half_spreads: float
    explains: tuple[int, ...]
    contradicts: tuple[int, ...]


@dataclass(frozen=True)
class Measured:
    """Measurements laid over a bench sheet; arrays over measurements.

    Attributes
    ----------
    sheet : BenchSheet
    readings : tuple of str
        Name of each.
    at : ndarray of int
        The condition of each.
    volts : ndarray
    """

    sheet: BenchSheet
    readings: tuple[str, ...]
    at: IntArray
    volts: Array

    @cached_property
    def off(self) -> Array:
        """Measured less expected [V]."""
        return self.volts - self._of(lambda reading: reading.expected)

    @cached_property
    def limit(self) -> Array:
        """How far each may be off [V]."""
        return self._of(lambda reading: reading.limit)

    @cached_property
    def inside(self) -> BoolArray:
        """Whether each is within its limit; not where the circuit has no solution."""
        with np.errstate(invalid="ignore"):
            within: BoolArray = np.abs(self.off) <= self.limit
        return within

    def _of(self, figure: Callable[[Reading], Array]) -> Array:
        pairs = zip(self.readings, self.at, strict=True)
        return np.array([figure(self.sheet.readings[name])[..., i] for name, i in pairs], dtype=float)

    def explanations(self) -> tuple[Explanation, ...]:
        """Parameters that could each alone explain readings that are outside, the likeliest first.

        A parameter is moved, by its sensitivities, to where it fits all readings best (least squares of what is left
        over the limits). First are those that then explain the most without contradicting others; of equals the one
        that leaves the least. It is a linear guess: a part that is quite wrong is found, by how much is not.
        """
        known = np.isfinite(self.off) & np.isfinite(self.limit)
        if not (known & ~self.inside).any() or not self.sheet.deviations:
            return ()
        slopes = self._of(lambda reading: reading.slope)
        off = np.where(known, self.off, 0.0) / self.limit
        slopes = np.where(known[:, None], slopes, 0.0) / self.limit[:, None]
        with np.errstate(all="ignore"):
            needed = (slopes.T @ off) / (slopes**2).sum(axis=0)
        needed = np.where(np.isfinite(needed), needed, 0.0)
        left = off[:, None] - slopes * needed
        fits = np.abs(left) <= 1
        explained, contradicted = (known & ~self.inside)[:, None] & fits, self.inside[:, None] & ~fits
        gain = explained.sum(axis=0) - contradicted.sum(axis=0)
        order = np.lexsort(((left**2).sum(axis=0), -gain))
        return tuple(
            Explanation(
                deviation.name, float(needed[p]), float(needed[p] / deviation.half),
                tuple(np.flatnonzero(explained[:, p]).tolist()), tuple(np.flatnonzero(contradicted[:, p]).tolist()),
            )
            for p, deviation in ((p, self.sheet.deviations[p]) for p in order)
            if explained[:, p].any()
        )[:MOST_EXPLANATIONS]  # fmt: skip
