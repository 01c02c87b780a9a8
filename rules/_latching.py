"""Remedies of second operating points: each one is tried, and the search made again, before it is named."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence

import numpy as np

from rulecheck.api import Remedy, Review, RulecheckError, SecondPoint, Set, format_quantity, join_key, nearest

from ._edits import add_diode, add_resistor
from ._protection import KNEE, quietest_diode

MOST_REMEDIES = 2
MOST_TRIED = 10
WEAKER = (2.2, 4.7, 10.0)
"""Factors by which the resistor behind an amplifier's output is lowered."""
START_SHARE = 0.01
"""Of the current at a node: what a start-up path may add to it."""
JUNCTION = 0.5
"""Volts: a clamp has to act before what it guards has moved further than a junction's voltage or so."""


def released(review: Review, points: Sequence[SecondPoint]) -> list[Remedy]:
    """Remedies that leave no second point, by the same search on the edited design.

    Parameters
    ----------
    review : Review
    points : sequence of SecondPoint
        Of one part of the circuit.
    """
    kinds = (_clamps(review, points), _stronger_drive(review, points), _start_up_paths(review, points))
    found: list[Remedy] = []
    for kind in kinds:
        cure = next((r for r in itertools.islice(kind, MOST_TRIED) if _cures(review, r)), None)
        found += [cure] if cure is not None else []
    if not found:
        return [Remedy("keep the transistor from saturating: no clamp, stronger drive or start-up path that was tried "
                       "takes the second point away")]  # fmt: skip
    return found[:MOST_REMEDIES]


def _cures(review: Review, remedy: Remedy) -> bool:
    try:
        after = review.edited(remedy.edits)
    except RulecheckError:
        return False
    return bool(after.operating_points.converged.all()) and not after.latching.found


def _clamps(review: Review, points: Sequence[SecondPoint]) -> Iterator[Remedy]:
    """Diodes that carry nothing nominally, and conduct in the second point: in a loop, or from a net to ground."""
    diode = quietest_diode(review)
    ground = next((n for n, net in review.design.nets.items() if net.role == "ground"), None)
    if diode is None or ground is None:
        return
    nominal = review.operating_points
    there = {net: [point.voltages[net] for point in points] for net in points[0].voltages}
    amplifiers = [review.design.parts[ref].pins for ref in points[0].states]
    ends = [(p["OUT"], p["IN-"]) for p in amplifiers] + [(net, ground) for net in there]
    tried = [pair for a, b in ends for pair in ((a, b), (b, a)) if a != b]
    for anode, cathode in dict.fromkeys(tried):
        normal = np.nanmax(nominal.voltage(anode) - nominal.voltage(cathode))
        latched = [a - b for a, b in zip(there.get(anode, [0.0] * len(points)),
                                         there.get(cathode, [0.0] * len(points)), strict=True)]  # fmt: skip
        if normal < KNEE and min(latched) > JUNCTION:
            yield Remedy(f"clamp {anode} to {cathode} with {diode}, anode at {anode}",
                         [add_diode(review.design, diode, anode, cathode)])  # fmt: skip


def _stronger_drive(review: Review, points: Sequence[SecondPoint]) -> Iterator[Remedy]:
    """A lower resistor behind the output of an amplifier that is at its limit, so that it can win."""
    stuck = [a for a, state in points[0].states.items() if state not in ("linear", "unpowered")]
    for factor in WEAKER:
        for amplifier in stuck:
            out = review.design.parts[amplifier].pins["OUT"]
            for ref, part in review.design.parts.items():
                if part.kind == "resistor" and out in part.pins.values() and _drives_emitter(review, ref, out):
                    value = format_quantity(nearest(part.value.typ / factor, "E24"), "ohm")
                    yield Remedy(f"make {ref} {value}, so that {amplifier} can pull the transistor out of saturation",
                                 [Set(join_key(("parts", ref, "value")), value)])  # fmt: skip


def _drives_emitter(review: Review, ref: str, out: str) -> bool:
    far = [net for net in review.design.parts[ref].pins.values() if net != out]
    parts = review.design.parts.values()
    return any(p.kind in ("npn", "pnp") and p.pins["E"] in far for p in parts)


def _start_up_paths(review: Review, points: Sequence[SecondPoint]) -> Iterator[Remedy]:
    """A resistor from a supply to a net that lacks current in the second point."""
    nominal, design = review.operating_points, review.design
    if any(state != "linear" for point in points for state in point.states.values()):
        return  # it does not lack a start
    index = 0
    for supply, net in itertools.product(design.nets.values(), points[0].voltages):
        if supply.role not in ("supply", "ground") or net == supply.name:
            continue
        rail = float(nominal.voltage(supply.name)[index])
        normal = float(nominal.voltage(net)[index])
        lacking = min(abs(rail - p.voltages[net]) for p in points) > abs(rail - normal) + KNEE / 2
        current = START_SHARE * _largest_current(review, net, index)
        if lacking and current > 0 and abs(rail - normal) > KNEE:
            ohm = nearest(abs(rail - normal) / current, "E24")
            yield Remedy(f"add a start-up path of {format_quantity(ohm, 'ohm')} from {supply.name} to {net}",
                         [add_resistor(design, ohm, (supply.name, net))])  # fmt: skip


def _largest_current(review: Review, net: str, index: int) -> float:
    points = review.operating_points
    flows = [
        abs(float(points.current(ref, pin)[index]))
        for ref, part in review.design.parts.items() for pin, at in part.pins.items() if at == net
    ]  # fmt: skip
    return max((flow for flow in flows if np.isfinite(flow)), default=0.0)
