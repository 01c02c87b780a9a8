"""How far antilog junctions are driven, potentiometers at their ends included."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    BaseModel,
    Carrier,
    Conditions,
    Edit,
    Evidence,
    Finding,
    Move,
    OperatingPoints,
    Remedy,
    Review,
    Rule,
    Set,
    Severity,
    carriers,
    decade_values,
    format_quantity,
    forward_current,
    is_regulated,
    join_key,
    points_in_use,
    potentiometers,
)

from ._edits import add_resistor, move, new_net, quantity, set_parameter
from ._protection import rated, sturdier
from ._saturation import nets_without_a_level

Mask = npt.NDArray[np.bool_]
Array = npt.NDArray[np.float64]
NOTHING = 1e-30  # A: what stands for no current on a scale of decades
STEPS = 41  # positions of a potentiometer that are tried


class DriveLevel(Rule):
    """Antilog junctions that the voltage between the bases takes beyond what the transistor is for.

    60 mV between the bases is a decade of current: a divider or gain a little too large, or a potentiometer turned
    to its end, and the transistor is over its rating, or so far outside the range in which the maker states
    conformity that it computes nothing. Potentiometers stand at their ends one at a time. Where an amplifier
    stops the current at its own limit, that is another rule's finding.
    """

    name = "drive-level"
    title = "Antilog transistor driven out of its rating or its log range"
    source = "rating and log range: the maker's, as the model states them; a decade beyond: common practice, no source"
    default_severity = Severity.MAJOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits."""

        decades_outside: float = 1.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge transistors that give a signal current and take no logarithm."""
        unjudged, points = nets_without_a_level(review), points_in_use(review)
        for carrier in carriers(review):
            part = review.design.parts[carrier.part]
            if carrier.is_log or carrier.is_fixed or part.kind == "diode" or unjudged & set(part.pins.values()):
                continue
            excess = max(_excesses(review, settings, points, carrier), key=lambda e: e.most, default=None)
            if excess is not None and excess.most > 0:
                yield _finding(review, settings, points, carrier, excess)


@dataclass(frozen=True, eq=False)
class _Excess:
    """Decades by which a current is beyond a limit, at each condition."""

    name: str
    limit: float
    current: Array
    decades: Array

    @property
    def most(self) -> float:
        return float(np.nanmax(self.decades, initial=-math.inf))


def _excesses(
    review: Review, settings: DriveLevel.Settings, points: OperatingPoints, carrier: Carrier
) -> Iterator[_Excess]:
    part = review.design.parts[carrier.part]
    regulated = is_regulated(review, points, carrier.node)
    current = np.where(regulated, np.maximum(forward_current(points, carrier.part), NOTHING), np.nan)
    rating = rated(part, "collector_current")
    if rating is not None:
        yield _Excess("rating", rating, current, np.log10(current / rating))
    if part.log_range is not None:
        low, high = part.log_range
        beyond = 10**settings.decades_outside
        yield _Excess("log range", high * beyond, current, np.log10(current / (high * beyond)))
        yield _Excess("log range", low / beyond, current, np.log10(low / beyond / current))


def _finding(
    review: Review, settings: DriveLevel.Settings, points: OperatingPoints, carrier: Carrier, excess: _Excess
) -> Finding:
    worst, ref = points.worst(excess.decades), carrier.part
    current = float(excess.current[worst.index])
    turned = [p for p in potentiometers(review) if worst.conditions[p] != review.typical[p]]
    at = "".join(f", {p} at {worst.conditions[p]:g}" for p in turned)
    too_much = current > excess.limit
    log_range = review.design.parts[ref].log_range
    stated = f"rated {format_quantity(excess.limit, 'A')}"
    if excess.name == "log range":
        ends = " to ".join(format_quantity(end, "A") for end in log_range)
        stated = f"more than {settings.decades_outside:g} decade from its log range of {ends}"
    shown = "no current" if current <= NOTHING else format_quantity(current, "A", 3)
    return Finding(
        f"{ref} is driven to {shown}{at}: {stated}",
        parts=[ref, *turned], subject=f"{excess.name} {'high' if too_much else 'low'}", conditions=worst.conditions,
        consequence="the transistor is damaged, or its matching lost" if excess.name == "rating"
        else "there the current is no exponential of the drive: the output is in error and drifts",
        evidence=[Evidence("current", current, "A", excess.limit, "<=" if too_much else ">=", over=excess.current,
                           basis="limit")],
        remedies=list(_remedies(review, settings, carrier, excess, points, turned)) if review.seeks_remedies else (),
    )  # fmt: skip


def _remedies(
    review: Review, settings: DriveLevel.Settings, carrier: Carrier, excess: _Excess, points: OperatingPoints,
    turned: list[str],
) -> Iterator[Remedy]:  # fmt: skip
    def is_driven_right(conditions: Conditions) -> Mask:
        found = _excesses(review, settings, review.solve(conditions), carrier)
        within: Mask = np.logical_and.reduce([e.decades <= 0 for e in found])
        return within

    for ref in turned:
        yield from _stopped(review, ref, points, is_driven_right)
    if not turned:
        yield from _narrowed(review, excess, points)
    if excess.name == "rating":
        yield from sturdier(review, carrier.part, "collector_current", float(np.nanmax(excess.current)))
    volts = format_quantity(60e-3 * excess.most, "V", 2)
    yield Remedy(f"a divider that takes {volts} less to the bases at this end: 60 mV are a decade of current")


def _narrowed(review: Review, excess: _Excess, points: OperatingPoints) -> Iterator[Remedy]:
    """The part of an input's range, to a point of the review grid, in which the current is right at every condition."""
    varied = [name for name, x in points.conditions.values.items() if name in review.design.inputs and np.ptp(x)]
    for name in varied:
        source, x = review.design.inputs[name], points.conditions.values[name]
        bad = np.unique(x[excess.decades > 0])
        good = np.setdiff1d(np.unique(x[np.isfinite(excess.decades)]), bad)
        if good.size < 2 or (bad.min() < good.max() and bad.max() > good.min()):
            continue
        words = [quantity(float(end), source.unit) for end in (good.min(), good.max())]
        key = ("parts", name, "photocurrent") if source.kind == "photodiode" else ("nets", name, "range")
        asked = [r.name for r in review.design.requirements.values() if name in r.range]
        paths = [key, *(("requirements", requirement, "range", name) for requirement in asked)]
        edits = [Set(join_key(path), words) for path in paths]
        yield Remedy(f"ask {name} only from {words[0]} to {words[1]}", edits)


def _stopped(
    review: Review, ref: str, points: OperatingPoints, is_driven_right: Callable[[Conditions], Mask]
) -> Iterator[Remedy]:
    """A smaller potentiometer between end resistors, which keep it to the travel that is right at every condition."""
    part, values = review.design.parts[ref], points.conditions.values
    rows = points.conditions.take(_ends(review, points.conditions) & (values[ref] == review.typical[ref]))
    tried = np.linspace(0.0, 1.0, STEPS)
    grid = {name: np.tile(x, STEPS) for name, x in rows.values.items()} | {ref: np.repeat(tried, rows.size)}
    right: Mask = np.all(np.reshape(is_driven_right(Conditions(grid)), (STEPS, rows.size)), axis=1)
    wrong, ohm = tried[~right], part.value.typ
    low = ohm * max((float(p) for p in wrong if p < review.typical[ref]), default=0.0)
    high = ohm * (1 - min((float(p) for p in wrong if p > review.typical[ref]), default=1.0))
    usual = [size for size in decade_values("E6", ohm / 1e3, ohm - low - high) if f"{size:.0e}"[0] in "12"]
    if not right[np.argmin(np.abs(tried - review.typical[ref]))] or not usual:
        return
    edits: list[Edit] = [set_parameter(ref, "value", quantity(usual[-1], "ohm"))]
    words = [f"{ref} {quantity(usual[-1], 'ohm')}"]
    for pin, least in (("END1", low), ("END2", high)):
        if least:
            stop = decade_values("E24", least, 2 * least)[0]
            taken = [edit.to for edit in edits if isinstance(edit, Move)]
            own = new_net(review.design, f"{part.pins[pin]}_{ref}", taken)
            edits += [move(ref, pin, own), add_resistor(review.design, stop, (part.pins[pin], own), edits)]
            words.append(f"{quantity(stop, 'ohm')} at its {pin}")
    yield Remedy(f"stop the travel: {', '.join(words)}", edits)


def _ends(review: Review, conditions: Conditions) -> Mask:
    """Conditions at which every input is at an end: in between no current is larger or smaller."""
    inputs = [conditions.values[name] for name in review.design.inputs]
    ends = [(x == x.min()) | (x == x.max()) for x in inputs]
    found: Mask = np.logical_and.reduce([np.ones(conditions.size, bool), *ends])
    return found
