"""The fixed currents that log and antilog junctions are compared with."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from typing import Annotated

import numpy as np

from rulecheck.api import (
    Add,
    BaseModel,
    Carrier,
    Cost,
    Edit,
    Evidence,
    Finding,
    Part,
    Remedy,
    Review,
    Rule,
    Severity,
    Unit,
    carriers,
    disturbance,
    format_quantity,
    forward_current,
    is_regulated,
    join_key,
    nearest,
    series_for_tolerance,
    supply_effect,
)

from ._carried import MARGIN, conformity, leakage, middle_of, outside_log_range, working_current
from ._currents import better_amplifiers, compared_with, feeds, scaled
from ._edits import move, new_net, quantity, set_parameter
from ._words import percent


class ReferenceCurrent(Rule):
    """Fixed currents of log and antilog pairs that the circuit, the supply or the transistor does not keep fixed.

    A fixed current is a factor of the transfer. Bias currents and leakage at its node add to it; ohmic resistance,
    knee, leakage and Early effect bend the logarithm of its transistor; a supply it is taken from moves the output
    unless the design is ratiometric, which solving again with the supply moved shows. A current source needs
    its compliance. Near the geometric middle of the current it is compared with, the errors of both ends are least.
    """

    name = "reference-current"
    title = "Fixed current that is disturbed, bent, derived from a supply, or badly placed"
    source = "conformity: Gray and Meyer, transistor model; limits of 100 times and 0.5 %: common practice, no source"
    default_severity = Severity.MINOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits."""

        over_bias: float = 100.0
        shares: float = 1.0
        supply_sensitivity: Annotated[float, Unit("%")] = 0.005
        decades_off_middle: float = 2.0
        decades_outside: float = 1.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge every junction with a fixed current, then every current source."""
        for carrier in (c for c in carriers(review) if c.is_fixed):
            yield from _bias(review, settings, carrier)
            yield from _logarithm(review, settings, carrier)
            yield from _supplies(review, settings, carrier)
            yield from _centring(review, settings, carrier)
        yield from _compliance(review)


def _logarithm(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    points, current = review.operating_points, working_current(review, carrier, compared_with(review, carrier))

    def straighter(cost: Cost) -> list[Remedy]:
        return scaled(review, carrier, 1 / (MARGIN * cost.worst.value))

    def inside(_: int, factor: float) -> list[Remedy]:
        return scaled(review, carrier, factor)

    yield from conformity(review, carrier, settings.shares, straighter)
    yield from outside_log_range(points, carrier, current, settings.decades_outside, inside)


def _bias(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    found = disturbance(review, carrier)
    current = np.abs(forward_current(found.points, carrier.part))
    leaking = leakage(found, current)
    added = found.bias + leaking
    judged = is_regulated(review, found.points, carrier.node) & (added > 0)
    ratio = np.where(judged, current / np.where(judged, added, 1.0), np.nan)
    if not np.isfinite(ratio).any() or np.nanmin(ratio) >= settings.over_bias:
        return
    worst = found.points.least(ratio)
    at = worst.index
    budget = float(current[at] / settings.over_bias - leaking[at]) / MARGIN
    yield Finding(
        f"{carrier.part} carries a fixed {format_quantity(float(current[at]), 'A', 3)}, only {worst.value:.3g} times "
        f"bias and leakage at {carrier.node} ({format_quantity(float(added[at]), 'A', 3)} at the hottest), "
        f"{settings.over_bias:g} times asked",
        parts=[carrier.part],
        nets=[carrier.node],
        subject="bias",
        conditions=worst.conditions,
        consequence=f"the fixed current may be {percent(1 / worst.value)} off",
        evidence=[
            Evidence("fixed current over bias and leakage", worst.value, "1", settings.over_bias, ">=", basis="limit")
        ],
        remedies=[
            *scaled(review, carrier, MARGIN * settings.over_bias / worst.value),
            *better_amplifiers(review, carrier.node, budget),
        ],
    )


def _supplies(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    limit = settings.supply_sensitivity
    for name in carrier.sources.references:
        net = review.design.nets.get(name)
        if net is None or net.role != "supply" or net.voltage is None or net.voltage.half == 0:
            continue
        effect = supply_effect(review, carrier.part, name)
        if effect is None or effect.share <= limit:
            continue
        swing = 100 * net.voltage.half / abs(net.voltage.typ)
        yield Finding(
            f"the fixed current of {carrier.part} comes from supply {name}, whose ±{swing:.2g} % moves {effect.output} "
            f"by {percent(effect.share)}, limit {percent(limit)}",
            parts=[carrier.part],
            nets=[name],
            subject="supply",
            severity=Severity.MAJOR,
            conditions=effect.conditions,
            consequence=f"{effect.output} moves by {format_quantity(abs(effect.moved), 'V', 3)} with {name}",
            evidence=[Evidence(f"effect of {name} on {effect.output}", effect.share, "1", limit, "<=", basis="limit")],
            remedies=list(_from_reference(review, carrier, name)),
        )


def _from_reference(review: Review, carrier: Carrier, supply: str) -> Iterator[Remedy]:
    """Feed the same current from a reference: the largest there is, or a new one well below the supply."""
    design = review.design
    fed = [p for p in feeds(review, carrier) if p.kind == "resistor" and supply in p.pins.values()]
    voltages = {n: net.voltage.typ for n, net in design.nets.items() if net.voltage is not None}
    if len(fed) != 1:
        yield Remedy(f"feed the current of {carrier.part} from a reference instead of {supply}")
        return
    part, level = fed[0], review.structure.held_at(carrier.node)
    base = 0.0 if level is None else level.typ
    drop = voltages[supply] - base
    references = [n for n in voltages if design.nets[n].role == "reference" and (voltages[n] - base) * drop > 0]
    added: list[Edit] = []
    if references:
        name = max(references, key=lambda n: abs(voltages[n] - base))
        volts = voltages[name]
    else:
        name, volts = new_net(design, "VREF"), base + math.copysign(5.0 if abs(drop) > 7.0 else 2.5, drop)
        table = {"role": "reference", "voltage": quantity(volts, "V"), "tolerance": "0.1 %", "from": supply}
        added = [Add(join_key(("nets", name)), table)]
    fine = series_for_tolerance(part.tolerance or 0.01) == "E192"
    ohm = quantity(nearest(part.value.typ * (volts - base) / drop, "E192" if fine else "E96"), "ohm")
    pin = next(p for p, net in part.pins.items() if net == supply)
    title = f"feed {part.ref} from {'a new reference ' if added else ''}{name}, with {ohm}"
    yield Remedy(title, [*added, move(part.ref, pin, name), set_parameter(part.ref, "value", ohm)])


def _centring(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    partner = compared_with(review, carrier)
    if partner is None or partner.is_fixed:
        return
    own, middle = (middle_of(working_current(review, a, b)) for a, b in ((carrier, partner), (partner, carrier)))
    if own is None or middle is None or abs(math.log10(own / middle)) <= settings.decades_off_middle:
        return
    off = abs(math.log10(own / middle))
    yield Finding(
        f"{carrier.part} carries {format_quantity(own, 'A', 3)}, {off:.2g} decades from the geometric middle "
        f"({format_quantity(middle, 'A', 3)}) of the current of {partner.part}, limit {settings.decades_off_middle:g}",
        parts=[carrier.part],
        nets=[carrier.node],
        subject="centring",
        severity=Severity.OBSERVATION,
        consequence="the errors of one end of the range are larger than they need be",
        evidence=[Evidence("decades from the middle", off, "1", settings.decades_off_middle, "<=")],
        remedies=[_centred(feeds(review, carrier), middle, middle / own)],
    )


def _centred(fed: Iterable[Part], middle: float, factor: float) -> Remedy:
    """Resistors, from E96, and sources for a current times `factor`."""
    values = {
        p.ref: quantity(nearest(p.value.typ / factor), "ohm")
        if p.kind == "resistor"
        else format_quantity(p.value.typ * factor, "A", 3)
        for p in fed
    }
    words = "".join(f", {ref} {value}" for ref, value in values.items())
    edits = [set_parameter(ref, "value", value) for ref, value in values.items()]
    return Remedy(f"a current of {format_quantity(middle, 'A', 3)}{words}", edits)


def _compliance(review: Review) -> Iterator[Finding]:
    points = review.operating_points
    for ref, part in review.design.parts.items():
        if part.kind != "current-source" or part.compliance is None:
            continue
        (lower, upper), sign = part.pins.values(), math.copysign(1.0, part.value.typ)
        across = sign * (points.voltage(upper) - points.voltage(lower))
        limit = float(part.compliance.max)
        if not np.isfinite(across).any() or np.nanmin(across) >= limit:
            continue
        worst = points.least(across)
        yield Finding(
            f"{ref} has {format_quantity(worst.value, 'V', 3)} across it and needs {format_quantity(limit, 'V')}",
            parts=[ref],
            nets=[lower],
            subject="compliance",
            severity=Severity.MAJOR,
            conditions=worst.conditions,
            consequence=f"the current of {format_quantity(part.value.typ, 'A', 3)} is not kept",
            evidence=[Evidence("voltage across the source", worst.value, "V", limit, ">=", over=across, basis="limit")],
            remedies=list(_more_voltage(review, part, upper, sign, limit - worst.value)),
        )


def _more_voltage(review: Review, part: Part, upper: str, sign: float, short: float) -> Iterator[Remedy]:
    """Hang the far end of a source on the nearest supply that leaves it enough."""
    design, points = review.design, review.operating_points
    end = list(part.pins)[-1]
    supplies = [n for n, net in design.nets.items() if net.role == "supply"]
    gained = {n: float(np.nanmin(sign * (points.voltage(n) - points.voltage(upper)))) for n in supplies}
    enough = [n for n in supplies if gained[n] >= short]
    if enough:
        name = min(enough, key=lambda n: gained[n])
        yield Remedy(f"connect {part.ref} to {name}", [move(part.ref, end, name)])
    else:
        yield Remedy(f"use a source that works with {format_quantity(short, 'V', 2)} less, or a larger supply")
