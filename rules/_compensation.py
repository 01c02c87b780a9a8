"""Remedies of loops: compensation capacitors computed together, with an emitter resistor where they need one."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence

import numpy as np

from rulecheck.api import (
    Design,
    Edit,
    Move,
    Remedy,
    Review,
    decade_values,
    format_quantity,
    in_use,
    nearest,
    thermal_voltage,
)

from ._edits import add_capacitor, add_resistor, move, new_net, set_parameter

EMITTER_DROP = 1.0
"""Volts across an emitter resistor at the greatest signal current: little of the swing, much of the loop gain."""
GENEROUS, SPACING = 10e-9, 10.0
"""Farads in a loop that is to be calm for certain, and how much less in the next: loops on one node must differ."""


def remedies(
    review: Review,
    amplifiers: Sequence[str],
    damping: float,
    margin: float,
    *,
    beside: Sequence[str] = (),
    accepts: Callable[[Review], bool] | None = None,
) -> list[Remedy]:
    """Ways to calm the loops of `amplifiers`: capacitors alone, else emitter resistors with capacitors.

    Parameters
    ----------
    review : Review
    amplifiers : sequence of str
        Loops to compensate together.
    damping, margin : float
        Least damping ratio and phase margin [deg] to reach at every review condition.
    beside : sequence of str
        Amplifiers that ring for themselves, which would hide what capacitors do for these.
    accepts : callable, optional
        What else is asked of the circuit with its capacitors; they are raised up to tenfold for it.

    Returns
    -------
    list of Remedy
    """
    if not review.seeks_remedies:
        return []
    able = [a for a in amplifiers if not _is_follower(review.design, a)]
    resistors = _emitter_resistors(review, able)
    for before, words in ([], ""), (resistors, "lower the loop gain by a resistor at the emitter, and "):
        if able and (before or not words):
            here = review.edited(before) if before else review
            found = _search(here, able, damping, margin, beside)
            if found and accepts:
                found = _raised(here, found, accepts)
            if found:
                return [Remedy(words + _title(here, found), [*before, *_capacitor_edits(here, found)])]
    return [Remedy("no capacitor from 10 pF to 100 nF meets the limits: lower the loop gain, or take an amplifier "
                   "with a lower gain-bandwidth or a higher second pole")]  # fmt: skip


def calmed(review: Review, amplifiers: Sequence[str]) -> Iterator[Review]:
    """The review with generous capacitors in some loops; of two that share a node only one may be slow."""
    able = [a for a in amplifiers if not _is_follower(review.design, a)]
    for order in (able, able[::-1]) if len(able) > 1 else (able,):
        generous = {a: GENEROUS / SPACING**k for k, a in enumerate(order)}
        yield review.edited(_capacitor_edits(review, generous)) if able else review


def _is_follower(design: Design, amplifier: str) -> bool:
    """Whether the output is the inverting input, so that no capacitor goes between them."""
    pins = design.parts[amplifier].pins
    return pins["OUT"] == pins["IN-"]


def _search(
    review: Review, amplifiers: list[str], damping: float, margin: float, beside: Sequence[str]
) -> dict[str, float]:
    """Least capacitors by amplifier, empty where none do; loops that have theirs keep it where it is not at fault."""
    bare = [a for a in amplifiers if not _capacitors(review.design, a)]
    for calm in calmed(review, beside):
        for chosen in [bare, amplifiers] if 0 < len(bare) < len(amplifiers) else [amplifiers]:
            found = calm.required_capacitors(chosen, damping, margin)
            if found is not None:
                return found.capacitors
    return {}


def _raised(review: Review, least: dict[str, float], accepts: Callable[[Review], bool]) -> dict[str, float]:
    """Capacitors raised together until the circuit is accepted, as they are where it never is."""
    for factor in decade_values("E12", 1.0, 10.0):
        raised = {a: nearest(farad * factor, "E12") for a, farad in least.items()}
        if accepts(review.edited(_capacitor_edits(review, raised))):
            return raised
    return least


def _capacitor_edits(review: Review, capacitors: Mapping[str, float]) -> list[Edit]:
    """Set the capacitor of each loop where it has one, else add it."""
    edits: list[Edit] = []
    for amplifier, farad in capacitors.items():
        pins, present = review.design.parts[amplifier].pins, _capacitors(review.design, amplifier)
        if present:
            edits.append(set_parameter(present[0], "value", format_quantity(farad, "F", 3)))
        else:
            edits.append(add_capacitor(review.design, farad, (pins["IN-"], pins["OUT"]), edits))
    return edits


def _capacitors(design: Design, amplifier: str) -> list[str]:
    """Capacitors from an amplifier's output to its inverting input."""
    pins = design.parts[amplifier].pins
    return _across(design, "capacitor", pins["OUT"], pins["IN-"])


def _title(review: Review, capacitors: dict[str, float]) -> str:
    words = []
    for amplifier, farad in capacitors.items():
        bandwidth = _least_bandwidth(review, amplifier, farad)
        left = f" (leaves {format_quantity(bandwidth, 'Hz', 3)})" if np.isfinite(bandwidth) else ""
        words.append(f"{format_quantity(farad, 'F', 3)} from OUT to IN- of {amplifier}{left}")
    return "compensate with " + ", ".join(words)


def _least_bandwidth(review: Review, amplifier: str, farad: float) -> float:
    """Bandwidth ``I/(2π·V_T·C)`` at the least signal current of the loop's log transistors [Hz]."""
    points = review.operating_points
    logs = [log.part for log in review.structure.log_transistors if log.amplifier == amplifier]
    slopes = [np.abs(points.current(r, "C")) / thermal_voltage(points.temperature(r)) for r in logs]
    asked = in_use(review) & points.linear(amplifier)
    if not slopes or not asked.any():
        return np.nan
    least = float(np.max(slopes, axis=0)[asked].min())
    return least / (2 * np.pi * farad)


def _emitter_resistors(review: Review, amplifiers: list[str]) -> list[Edit]:
    """Edits that put a resistor between an amplifier's output and the emitters it drives, or raise the one there."""
    design, points = review.design, review.operating_points
    edits: list[Edit] = []
    for amplifier in amplifiers:
        logs = [log.part for log in review.structure.log_transistors if log.amplifier == amplifier]
        most = max((float(np.nanmax(np.abs(points.current(ref, "C")))) for ref in logs), default=0.0)
        output, emitters = design.parts[amplifier].pins["OUT"], {design.parts[ref].pins["E"] for ref in logs}
        if not most > 0:
            continue
        value = nearest(EMITTER_DROP / most, "E24")
        between = [ref for net in emitters for ref in _across(design, "resistor", output, net)]
        if output in emitters:
            own = new_net(design, f"{output}_{amplifier}", [edit.to for edit in edits if isinstance(edit, Move)])
            for ref in (amplifier, *_capacitors(design, amplifier)):
                edits.append(move(ref, next(p for p, n in design.parts[ref].pins.items() if n == output), own))
            edits.append(add_resistor(design, value, (own, output), edits))
        elif len(between) == 1 and design.parts[between[0]].value.typ < value:
            edits.append(set_parameter(between[0], "value", format_quantity(value, "ohm", 3)))
    return edits


def _across(design: Design, kind: str, *nets: str) -> list[str]:
    """Parts of a kind between two nets."""
    return [r for r, p in design.parts.items() if p.kind == kind and set(p.pins.values()) == set(nets)]
