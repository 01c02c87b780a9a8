"""Amplifier inputs in faults: current into their clamps, clamps that leak, outputs that reverse.

An unpowered amplifier has both rails at 0 V, and an input that must survive 15 V then drives its clamp diodes
through whatever stands before them. A clamp diode of one's own helps, but what it leaks flows into the summing
node and counts as signal.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Annotated

import numpy as np

from rulecheck.api import (
    BaseModel,
    Edit,
    Evidence,
    Finding,
    Move,
    Part,
    Remedy,
    Review,
    Rule,
    Severity,
    Unit,
    Worst,
    format_quantity,
    nearest,
)

from ._edits import add_diode, add_in_series, set_parameter
from ._leakage import Leakage, leakages
from ._models import other_models
from ._protection import KNEE, leakage_bound, quietest_diode, rated, series_resistor
from ._saturation import working
from ._words import percent

INPUTS = ("IN+", "IN-")
CLAMPED = 1e-3
"""Amperes that a clamp of an input is given to carry."""
CLAMP_DROP = 0.8
"""Volts across a clamp that conducts."""


class InputProtection(Rule):
    """Clamp currents are judged in all fault scenarios, leakage of clamps at the highest ambient.

    An absent supply is a net held at 0 V; that a rail can be fed through clamps and float up is not modelled.
    Amplifiers whose output reverses below their input range (JFET inputs: TL082 data sheet) are judged with all
    supplies present; with one absent the circuit computes nothing anyway.
    """

    name = "input-protection"
    title = "Too much current into an amplifier's input, or a clamp that leaks"
    source = "5 mA: data sheets' absolute maximum ratings; leakage of 1 %: common practice, no source"
    default_severity = Severity.MAJOR
    needs = ("operating_points", "faults")

    class Settings(BaseModel):
        """Limits."""

        assumed_input_current: Annotated[float, Unit("A")] = 5e-3
        leakage: Annotated[float, Unit("%")] = 0.01

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge currents, then reversal, then leakage."""
        for part in working(review.design).values():
            if part.kind == "op-amp":
                yield from _clamp_current(review, settings, part)
                if part.phase_reversal:
                    yield from _reversal(review, part)
        yield from _leaky(review, settings)


def _clamp_current(review: Review, settings: InputProtection.Settings, part: Part) -> Iterator[Finding]:
    points = review.faults
    stated = rated(part, "input_current")
    limit = settings.assumed_input_current if stated is None else stated
    currents = {pin: points.clamp_current(part.ref, pin) for pin in INPUTS}
    judged = {pin: c for pin, c in currents.items() if np.isfinite(c).any() and np.nanmax(c) > limit}
    if not judged:
        return
    pin = max(judged, key=lambda p: float(np.nanmax(judged[p])))
    worst = points.worst(judged[pin])
    assumed = ", assumed, the model does not say" if stated is None else ""

    def current(other: Review) -> float:
        return max(float(np.nanmax(other.faults.clamp_current(part.ref, p))) for p in INPUTS)

    remedies = list(series_resistor(review, part.ref, pin, limit, current))
    yield Finding(
        f"{part.ref}: {format_quantity(worst.value, 'A', 3)} into the clamps of {pin}, allowed "
        f"{format_quantity(limit, 'A', 3)}{assumed}",
        parts=[part.ref], severity=Severity.MAJOR, conditions=worst.conditions, subject="current",
        scenario=points.conditions.scenario[worst.index] if points.conditions.scenario else None,
        consequence="the input is damaged, or the amplifier latches when power comes back",
        evidence=[Evidence(f"clamp current of {p}", float(c[worst.index]), "A", limit, "<=", over=c, basis="limit")
                  for p, c in judged.items()],
        remedies=remedies or [Remedy("put a resistor between the fault and the input")],
    )  # fmt: skip


def _leaky(review: Review, settings: InputProtection.Settings) -> Iterator[Finding]:
    for leak in leakages(review):
        if np.isfinite(leak.ratio).any() and np.nanmax(leak.ratio) > settings.leakage:
            yield _leakage_finding(review, settings, leak)


def _leakage_finding(review: Review, settings: InputProtection.Settings, leak: Leakage) -> Finding:
    part, net, worst = leak.part, leak.net, review.operating_points.worst(leak.ratio)
    amps = float(leak.current[worst.index])
    signal = amps / worst.value
    return Finding(
        f"{part.ref}: leaks {format_quantity(amps, 'A', 3)} into {net} at the hottest, {percent(worst.value)} of a "
        f"signal of {format_quantity(signal, 'A', 3)}, limit {percent(settings.leakage)}",
        parts=[part.ref], nets=[net], severity=Severity.MINOR, conditions=worst.conditions, subject="leakage",
        consequence=f"the signal read is off by {percent(worst.value)} there, changing with temperature",
        evidence=[Evidence("leakage over signal current", worst.value, "1", settings.leakage, "<=", over=leak.ratio,
                           basis="limit")],
        remedies=_quieter(review, part),
    )  # fmt: skip


def _quieter(review: Review, part: Part) -> list[Remedy]:
    quiet = quietest_diode(review)
    if quiet is None or leakage_bound(review.design.models[quiet].parameters) >= leakage_bound(part):
        return [Remedy("take a clamp of less leakage, or hold its other end at the level of the summing node")]
    return [Remedy(f"take {quiet} for {part.ref}", [set_parameter(part.ref, "model", quiet)])]


"""+"""


def _reversal(review: Review, part: Part) -> Iterator[Finding]:
    points = review.faults
    absent = np.any([np.zeros(points.conditions.size, bool), *points.conditions.absent.values()], axis=0)
    powered = points.converged & np.logical_not(absent)
    rail, low = points.voltage(part.pins["V-"]), part.input_headroom.low.max
    room = {pin: np.where(powered, points.voltage(part.pins[pin]) - rail - low, np.nan) for pin in INPUTS}
    if not powered.any():
        return
    pin = min(room, key=lambda p: float(np.nanmin(room[p])))
    worst = points.least(room[pin])
    if worst.value >= 0 or _is_usual(review, part):
        return
    yield Finding(
        f"{part.ref}: {pin} goes to {format_quantity(worst.value + low, 'V', 3)} from V-, below its range, which ends "
        f"{format_quantity(low, 'V', 3)} from it, and the output reverses",
        parts=[part.ref], severity=Severity.MINOR, conditions=worst.conditions, subject="reversal",
        scenario=points.conditions.scenario[worst.index] if points.conditions.scenario else None,
        consequence="the output jumps to the wrong limit, and the loop may stay there",
        evidence=[Evidence("distance of the input from the end of its range", worst.value, "V", 0.0, ">=",
                           over=room[pin], basis="limit")],
        remedies=list(_against_reversal(review, part, pin, worst)),
    )  # fmt: skip


def _is_usual(review: Review, part: Part) -> bool:
    """Whether an input is below its range in normal operation too, which is another rule's matter."""
    points, low = review.operating_points, part.input_headroom.low.max
    rooms = [points.voltage(part.pins[pin]) - points.voltage(part.pins["V-"]) - low for pin in INPUTS]
    return bool(np.nanmin(rooms) < 0)


def _against_reversal(review: Review, part: Part, pin: str, worst: Worst) -> Iterator[Remedy]:
    design, net = review.design, part.pins[pin]
    diode, level = quietest_diode(review), _clamping_level(review, part, pin)
    if diode is not None and level is not None:
        edits: list[Edit] = []
        if review.structure.summing_node(net) is None:
            # What drives the net may be as stiff as a source: a resistor takes the voltage off the clamp.
            ohm = nearest(abs(float(review.faults.voltage(net)[worst.index])) / CLAMPED, "E24")
            edits = add_in_series(design, ohm, part.ref, pin)
            net = next(edit.to for edit in edits if isinstance(edit, Move))
        title = f"clamp {pin} of {part.ref} with {diode} from {level}{' behind a resistor' if edits else ''}"
        yield Remedy(title, [*edits, add_diode(design, diode, level, net, edits)])
    why = "its output does not reverse"
    yield from other_models(review, [part.ref], lambda model: not model.phase_reversal, ("phase_reversal",), why)


def _clamping_level(review: Review, part: Part, pin: str) -> str | None:
    """Ground or reference from which a diode holds an input in its range without conducting in normal use."""
    points = review.operating_points
    floor = float(np.nanmax(points.voltage(part.pins["V-"]))) + part.input_headroom.low.max
    ceiling = float(np.nanmin(points.voltage(part.pins[pin]))) + KNEE
    fixed = {n: points.voltage(n) for n, net in review.design.nets.items() if net.role in ("ground", "reference")}
    fitting = [n for n, v in fixed.items() if np.nanmin(v) - CLAMP_DROP >= floor and np.nanmax(v) <= ceiling]
    return min(fitting, key=lambda n: float(np.nanmin(fixed[n])), default=None)
