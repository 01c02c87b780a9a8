"""Remedies of loops: compensation capacitors computed together, with an emitter resistor where they need one."""

from __future__ import annotations

import numpy as np

from rulecheck.api import (
    BOLTZMANN,
    ELEMENTARY_CHARGE,
    Add,
    Edit,
    Move,
    Remedy,
    Review,
    Set,
    format_quantity,
    join_key,
    nearest,
)

from ._edits import next_reference

EMITTER_DROP = 1.0
"""Volts across an emitter resistor at the greatest signal current: little of the swing, much of the loop gain."""


def remedies(
    review: Review,
    amplifiers: Sequence[str],
    damping: float,
    margin: float,
    beside: Sequence[Sequence[str]] = (),
) -> list[Remedy]:
    """Ways to calm the loops of `amplifiers`: capacitors alone, else emitter resistors with capacitors.

    Parameters
    ----------
    review : Review
    amplifiers : sequence of str
        Loops to compensate together.
    damping, margin : float
        Least damping ratio and phase margin [deg] to reach at every review condition.
    beside : sequence of sequences of str
        Loops that ring for themselves, which hide what capacitors do for these.

    Returns
    -------
    list of Remedy
    """
    if not review.seeks_remedies:
        return []
    able = [a for a in amplifiers if not _is_follower(review.design, a)]
    others = [a for group in beside for a in group if not _is_follower(review.design, a)]
    resistors = _emitter_resistors(review, able)
    for before, words in [([], ""), (resistors, "put an emitter resistor into the loop, and ")]:
        if able and (before or not words):
            here = review.edited(before) if before else review
            found = _search(here, able, damping, margin, others)
            if found:
                return [Remedy(words + _title(here, found), [*before, *_capacitor_edits(here, found)])]
    return [Remedy("no capacitor from 10 pF to 100 nF meets the limits: lower the loop gain, or take an amplifier "
                   "with a lower gain-bandwidth or a higher second pole")]  # fmt: skip


def _is_follower(design: Design, amplifier: str) -> bool:
    """Whether the output is the inverting input, so that no capacitor goes between them."""
    pins = design.parts[amplifier].pins
    return pins["OUT"] == pins["IN-"]


def _search(review: Review, amplifiers: list[str], damping: float, margin: float, others: list[str]) -> dict[str, float]:
    """Least capacitors by amplifier, empty where none do; loops that have theirs keep it where it is not at fault."""
    bare = [a for a in amplifiers if not _across(review.design, a)]
    for calmer in _with_calm(review, others):
        for chosen in [bare, amplifiers] if 0 < len(bare) < len(amplifiers) else [amplifiers]:
            found = calmer.required_capacitors(chosen, damping, margin)
            if found is not None:
                return found.capacitors
    return {}


def _with_calm(review: Review, others: list[str]) -> Iterator[Review]:
    """The review with generous capacitors in other loops; of two that share a node only one may be slow."""
    if not others:
        yield review
        return
    for order in (others, others[::-1]):
        generous = {a: GENEROUS / SPACING**k for k, a in enumerate(order)}
        yield review.edited(_capacitor_edits(review, generous))


def _capacitor_edits(review: Review, capacitors: Mapping[str, float]) -> list[Edit]:
    """Set the capacitor of each loop where it has one, else add it."""
    edits: list[Edit] = []
    for amplifier, farad in capacitors.items():
        pins, present = review.design.parts[amplifier].pins, _across(review.design, amplifier)
        if present:
            edits.append(set_parameter(present[0], "value", format_quantity(farad, "F", 3)))
        else:
            edits.append(add_capacitor(review.design, farad, (pins["IN-"], pins["OUT"]), edits))
    return edits


def _across(design: Design, amplifier: str) -> list[str]:
    """Capacitors from an amplifier's output to its inverting input."""
    ends = {design.parts[amplifier].pins["OUT"], design.parts[amplifier].pins["IN-"]}
    return [r for r, p in design.parts.items() if p.kind == "capacitor" and set(p.pins.values()) == ends]


def _title(review: Review, capacitors: dict[str, float]) -> str:
    words = []
    for amplifier, farad in capacitors.items():
        bandwidth = _least_bandwidth(review, amplifier, farad)
        left = f" (leaves {format_quantity(bandwidth, 'Hz', 3)})" if np.isfinite(bandwidth) else ""
        words.append(f"{format_quantity(farad, 'F', 3)} from OUT to IN- of {amplifier}{left}")
    return "compensate with " + ", ".join(words)


def _least_bandwidth(review: Review, amplifier: str, farad: float) -> float:
    """Bandwidth ``I/(2π·V_T·C)`` at the least current of the loop's log transistors [Hz]."""
    points = review.operating_points
    least = np.inf
    for log in review.structure.log_transistors:
        if log.amplifier == amplifier and review.design.parts[log.part].kind in ("npn", "pnp"):
            current = np.abs(points.current(log.part, "C"))
            slope = BOLTZMANN / ELEMENTARY_CHARGE * points.temperature(log.part)
            least = min(least, float(np.nanmin(current / slope)))
    return least / (2 * np.pi * farad) if np.isfinite(least) else np.nan


def _emitter_resistors(review: Review, amplifiers: list[str]) -> list[Edit]:
    """Edits that put a resistor between an amplifier's output and the emitter it drives directly."""
    design, points = review.design, review.operating_points
    edits: list[Edit] = []
    taken: list[str] = []
    nets = set(design.nets)
    for log in review.structure.log_transistors:
        part = design.parts[log.part]
        if log.amplifier not in amplifiers or part.kind not in ("npn", "pnp"):
            continue
        output = design.parts[log.amplifier].pins["OUT"]
        if part.pins["E"] != output:
            continue
        most = float(np.nanmax(np.abs(points.current(log.part, "C"))))
        value = nearest(EMITTER_DROP / most, "E24") if most > 0 else 10e3
        driven = f"{output}_{log.amplifier}"
        while driven in nets:
            driven += "_"
        nets.add(driven)
        name = next_reference(design, "R", taken)
        taken.append(name)
        edits.append(Move(join_key(("parts", log.amplifier, "pins", "OUT")), driven))
        for ref in _between(review, output, design.parts[log.amplifier].pins["IN-"]):
            pin = next(p for p, n in design.parts[ref].pins.items() if n == output)
            edits.append(Move(join_key(("parts", ref, "pins", pin)), driven))
        table = {"kind": "resistor", "value": format_quantity(value, "ohm", 3), "tolerance": "1 %",
                 "pins": [driven, output]}  # fmt: skip
        edits.append(Add(join_key(("parts", name)), table))
    return edits
