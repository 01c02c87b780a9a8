"""What outputs at a limit would need, and the remedies of too little swing or too much output current."""

from __future__ import annotations

import math
from collections.abc import Iterator
from functools import cached_property
from typing import Any

import numpy as np

from rulecheck.api import (
    OperatingPoints,
    Part,
    Remedy,
    Review,
    Worst,
    decade_values,
    format_quantity,
    nearest,
)

from ._edits import quantity, set_parameter
from ._models import higher_supplies, in_packages_of, other_models
from ._saturation import Floats, Mask, is_at_limit, working
from ._words import percent

BOUNDLESS = 1000.0
"""Volts beyond its rails to which an output is let go to see what it would need."""
CLOSE = 0.01
"""Tolerance up to which a resistor has values of E96, else of E24."""
SPLIT_SEARCH = 2.0
"""Factor over which a pair of preferred values with the right ratio is searched."""
FURTHEST = 10.0
"""Factor between an old and a new resistor beyond which it is another design."""


def internal_output(points: OperatingPoints, amplifier: Part) -> Floats:
    """Output of an amplifier before its output resistance, at each condition [V]."""
    drop = amplifier.output_resistance.typ * points.current(amplifier.ref, "OUT")
    volts: Floats = points.voltage(amplifier.pins["OUT"]) - drop
    return volts


class Demand:
    """The circuit as it would be if every output could reach any voltage.

    Parameters
    ----------
    review : Review
    """

    def __init__(self, review: Review) -> None:
        self._review = review

    @cached_property
    def points(self) -> OperatingPoints:
        """Operating points with limits far out; those of the circuit itself where no output is at one."""
        review, points = self._review, self._review.operating_points
        amplifiers = [ref for ref, part in working(review.design).items() if part.kind == "op-amp"]
        if not any(is_at_limit(points, a).any() for a in amplifiers):
            return points
        sides = [f"output_headroom.{side}" for side in ("low", "high")]
        return review.re_solve(values={(a, side): -BOUNDLESS for a in amplifiers for side in sides})

    def output(self, amplifier: str) -> Floats:
        """Internal output that an amplifier would need at each condition [V]."""
        return internal_output(self.points, self._review.design.parts[amplifier])

    def consequence(self, index: int) -> str:
        """How far each output is from what it would be, at one condition."""
        review, points = self._review, self._review.operating_points
        words = []
        for net in (n for n, entry in review.design.nets.items() if entry.role == "output"):
            is_now, would_be = (float(p.voltage(net)[index]) for p in (points, self.points))
            if abs(would_be) < BOUNDLESS / 2 and abs(is_now - would_be) > 1e-6 * abs(would_be):
                there = f"{net} is {format_quantity(is_now, 'V', 3)} instead of {format_quantity(would_be, 'V', 3)}"
                share = f" ({percent(is_now / would_be - 1)} of reading)" if would_be else ""
                words.append(there + share)
        return ", ".join(words) or "its summing node leaves its level, and what is computed from it is wrong"


def swing_remedies(review: Review, demand: Demand, amplifier: str, margin: Floats, judged: Mask) -> list[Remedy]:
    """Ways to give an output room: resistors computed, a higher supply, another model.

    Parameters
    ----------
    review : Review
    demand : Demand
    amplifier : str
    margin : ndarray, shape (conditions,)
        Distance from the limit to reach [V].
    judged : ndarray of bool
        Conditions that count.
    """
    if not review.seeks_remedies:
        return []
    headroom = review.design.parts[amplifier].output_headroom
    below, above = _distances(review, demand, amplifier, margin, judged)
    short = {"V-": headroom.low.max - below, "V+": headroom.high.max - above}
    either = np.fmax(*short.values())
    if not np.isfinite(either).any() or np.nanmax(either) > BOUNDLESS / 2:
        return [Remedy("no swing would do: look at the gain, and at the sign of the currents into its summing node")]
    together = [
        _distances(review, demand, a, margin, judged)
        for a in in_packages_of(review, [amplifier])
        if a in working(review.design)
    ]

    def fits(model: Any) -> bool:  # noqa: ANN401  # an amplifier's parameters
        ends = (model.output_headroom.low.max, model.output_headroom.high.max)
        return all(end <= np.nanmin(room) for rooms in together for end, room in zip(ends, rooms, strict=True))

    remedies = list(_resistors(review, demand, amplifier, review.operating_points.worst(either)))
    remedies += higher_supplies(review, amplifier, {pin: float(np.nanmax(volts)) for pin, volts in short.items()})
    remedies += other_models(review, [amplifier], fits, ("output_headroom",), "its output comes nearer to the rails")
    return remedies or [Remedy("split the gain between this stage and the next, or narrow the range")]


def _distances(review: Review, demand: Demand, amplifier: str, margin: Floats, judged: Mask) -> tuple[Floats, Floats]:
    """Headroom that would leave the margin to the low and to the high limit, at each condition [V]."""
    points, pins = review.operating_points, review.design.parts[amplifier].pins
    volts = np.where(judged, demand.output(amplifier), np.nan)
    return volts - points.voltage(pins["V-"]) - margin, points.voltage(pins["V+"]) - volts - margin


def _resistors(review: Review, demand: Demand, amplifier: str, worst: Worst) -> Iterator[Remedy]:
    """Smaller resistors at the output, on the way back, that take the missing volts off their drop."""
    parts, out = review.design.parts, review.design.parts[amplifier].pins["OUT"]
    loops = [loop for loop in review.structure.feedback_loops if loop.amplifier == amplifier and loop.parts]
    for ref in dict.fromkeys(loop.parts[0] for loop in loops if parts[loop.parts[0]].kind == "resistor"):
        far = next(net for net in parts[ref].pins.values() if net != out)
        drop = abs(float((demand.points.voltage(out) - demand.points.voltage(far))[worst.index]))
        most = parts[ref].value.typ * (1 - worst.value / drop) if drop > worst.value else 0.0
        if most < parts[ref].value.typ / FURTHEST:
            continue
        if any(loop.parts == (ref,) for loop in loops):
            yield from _split(review, amplifier, ref, most)
        yield _make(parts[ref], max(decade_values(_series(parts[ref]), most / 1.2, most)))


def _series(part: Part) -> str:
    return "E96" if part.tolerance is not None and part.tolerance <= CLOSE else "E24"


def _make(part: Part, ohm: float) -> Remedy:
    words = quantity(ohm, "ohm")
    return Remedy(f"make {part.ref} {words}", [set_parameter(part.ref, "value", words)])


def _split(review: Review, amplifier: str, feedback: str, most: float) -> Iterator[Remedy]:
    """Less gain in this stage and as much more in the next: the same factor on both resistors."""
    design, out = review.design, review.design.parts[amplifier].pins["OUT"]
    own = {p for loop in review.structure.feedback_loops if loop.amplifier == amplifier for p in loop.parts[:1]}
    following = [r for r, p in design.parts.items() if out in p.pins.values() and r not in {amplifier, *own}]
    if design.nets[out].role is not None or not following or not all(_feeds_a_sum(review, r, out) for r in following):
        return
    together = [design.parts[r] for r in (feedback, *following)]
    change = _scaled_together(together, most / SPLIT_SEARCH, most)
    yield Remedy(f"move gain to the next stage: {change.title}", change.edits)


def _scaled_together(parts: list[Part], low: float, high: float) -> Remedy:
    """Resistors scaled by one factor that brings the first between two values, to E96 values of the best ratio."""
    first = parts[0].value.typ

    def off(value: float) -> float:
        return max(abs(math.log(nearest(p.value.typ * value / first) * first / (p.value.typ * value))) for p in parts)

    value = min(decade_values("E96", low, high), key=off)
    changes = [_make(part, nearest(part.value.typ * value / first)) for part in parts]
    title = ", ".join(change.title for change in changes)
    return Remedy(title, [edit for change in changes for edit in change.edits])


def _feeds_a_sum(review: Review, ref: str, out: str) -> bool:
    part = review.design.parts[ref]
    far = [net for net in part.pins.values() if net != out]
    return part.kind == "resistor" and len(far) == 1 and review.structure.summing_node(far[0]) is not None


def _sharing_a_sum(review: Review, ref: str) -> list[Part]:
    """A resistor, and where it ends at a summing node those that set the gain with it."""
    parts = review.design.parts
    nodes = {net for net in parts[ref].pins.values() if review.structure.summing_node(net) is not None}
    others = [p for p in parts.values() if p.kind == "resistor" and nodes & set(p.pins.values()) and p.ref != ref]
    return [parts[ref], *others]


def current_remedies(review: Review, amplifier: str) -> list[Remedy]:
    """Ways to ask less current of an output: a larger resistor where most of it goes, a stronger model.

    Faults count too: a load that is right in normal operation may be too much with the output at its limit.

    Parameters
    ----------
    review : Review
    amplifier : str
    """
    if not review.seeks_remedies:
        return []
    parts, limit = review.design.parts, review.design.parts[amplifier].output_current.max
    usual, in_faults = (_Flows(points, review, amplifier) for points in (review.operating_points, review.faults))
    remedies = []
    if usual.resistors:
        ref = max(usual.resistors, key=lambda r: usual.resistors[r])
        scales = usual.scale(ref, limit), in_faults.scale(ref, limit)
        scale = max((s for s in scales if s <= FURTHEST), default=1.0)
        if scale > 1:
            least = parts[ref].value.typ * scale
            remedies.append(_scaled_together(_sharing_a_sum(review, ref), least, least * SPLIT_SEARCH))

    def fits(model: Any) -> bool:  # noqa: ANN401  # an amplifier's parameters
        needed = max(usual.total, in_faults.total)
        return model.output_current is not None and bool(model.output_current.max >= needed)

    remedies += other_models(review, [amplifier], fits, ("output_current",), "it gives the current")
    return remedies or [Remedy("buffer the output, or ask for a lighter load")]


class _Flows:
    """The greatest output current of an amplifier, and what of it goes through each resistor [A]."""

    def __init__(self, points: OperatingPoints, review: Review, amplifier: str) -> None:
        out = review.design.parts[amplifier].pins["OUT"]
        worst = points.worst(np.abs(points.current(amplifier, "OUT")))
        self.total = worst.value
        self.resistors = {
            ref: abs(float(points.current(ref, pin)[worst.index]))
            for ref, part in working(review.design).items()
            if part.kind == "resistor" and part.value.typ > 0
            for pin, net in part.pins.items()
            if net == out
        }

    def scale(self, ref: str, limit: float) -> float:
        """Factor on a resistor that brings the current down to its limit."""
        left = limit - (self.total - self.resistors[ref])
        return self.resistors[ref] / left if left > 0 else math.inf
