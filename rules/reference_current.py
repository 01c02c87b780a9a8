"""The fixed currents that log and antilog junctions are compared with."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from typing import Annotated

import numpy as np

from rulecheck.api import (
    Add, BaseModel, Carrier, Conditions, Edit, Evidence, Finding, Part, Remedy, Review, Rule, Set, Severity, Unit,
    at_typical, carriers, conformity_cost, disturbance, format_quantity, forward_current, in_use, join_key, nearest,
    partner_of, series_for_tolerance,
)  # fmt: skip

from ._currents import better_amplifiers, feeds, middle_of, outside, scaled
from ._edits import move, new_net, quantity, set_parameter
from ._pairs import cost_evidence, cost_words

SLACK_DECADES = 0.005  # 1 %: a range is not known more closely
MARGIN = 1.1


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
        for carrier in carriers(review):
            if carrier.is_fixed:
                yield from _bias(review, settings, carrier)
                yield from _conformity(review, settings, carrier)
                yield from _supply(review, settings, carrier)
                yield from _range(review, settings, carrier)
                yield from _centring(review, settings, carrier)
        yield from _compliance(review)


def _bias(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    found = disturbance(review, carrier)
    current, added = np.abs(forward_current(found.points, carrier.part)), found.bias + found.leakage
    with np.errstate(all="ignore"):
        ratio = np.where(added > 0, current / added, np.nan)
    if not np.isfinite(ratio).any() or np.nanmin(ratio) >= settings.over_bias:
        return
    worst = found.points.least(ratio)
    at = worst.index
    allowed = float(current[at] / settings.over_bias - found.leakage[at])
    larger = scaled(review, carrier, MARGIN * settings.over_bias / worst.value)
    yield Finding(
        f"{carrier.part} carries a fixed {format_quantity(float(current[at]), 'A', 3)}, only {worst.value:.3g} times "
        f"bias and leakage at {carrier.node} ({format_quantity(float(added[at]), 'A', 3)} at the hottest, "
        f"{settings.over_bias:g} times asked)",
        parts=[carrier.part], nets=[carrier.node], subject="bias", conditions=worst.conditions,
        consequence=f"the fixed current may be {100 / worst.value:.2g} % off",
        evidence=[Evidence("fixed current over bias and leakage", worst.value, "1", settings.over_bias, ">=",
                           over=ratio if found.points is review.operating_points else None, basis="limit")],
        remedies=[*([larger] if larger else []), *better_amplifiers(review, carrier.node, allowed / MARGIN, None)],
    )  # fmt: skip


def _conformity(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    cost = conformity_cost(review, carrier.part)
    if cost is None or cost.worst.value <= settings.shares:
        return
    points, at = review.operating_points, cost.worst.index
    current = float(forward_current(points, carrier.part)[at])
    remedy = scaled(review, carrier, 1 / (MARGIN * cost.worst.value))
    yield Finding(
        f"{carrier.part} departs from a logarithm at its {format_quantity(current, 'A', 3)}: resistance, knee, leakage "
        f"and Early effect cost {cost.worst.value:.3g} times their share at {cost.output}",
        parts=[carrier.part], nets=[carrier.node], subject="conformity", conditions=cost.worst.conditions,
        consequence=cost_words(cost.output, float(cost.error[at]), float(points.voltage(cost.output)[at])),
        evidence=[cost_evidence(cost.worst.value, cost.ratio, "typ")],
        remedies=[remedy] if remedy else [Remedy("use a transistor of lower bulk resistance, or a smaller current")],
    )  # fmt: skip


def _supply(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    for name in carrier.sources.references:
        net = review.design.nets.get(name)
        if net is None or net.role != "supply" or net.voltage is None or net.voltage.half == 0:
            continue
        effect = _effect(review, carrier, name)
        if effect is None or effect[0] <= settings.supply_sensitivity:
            continue
        share, output, moved, conditions = effect
        swing = net.voltage.half / abs(net.voltage.typ)
        yield Finding(
            f"the fixed current of {carrier.part} comes from supply {name}, whose ±{100 * swing:.2g} % moves {output} by "
            f"{100 * share:.2g} %, limit {100 * settings.supply_sensitivity:.2g} %",
            parts=[carrier.part], nets=[name], subject="supply", severity=Severity.MAJOR, conditions=conditions,
            consequence=f"{output} moves by {format_quantity(moved, 'V', 3)} with {name}",
            evidence=[Evidence(f"effect of {name} on {output}", share, "1", settings.supply_sensitivity, "<=",
                               basis="limit")],
            remedies=list(_from_reference(review, carrier, name)),
        )  # fmt: skip


def _effect(review: Review, carrier: Carrier, supply: str) -> tuple[float, str, float, dict[str, float]] | None:
    """Largest effect of a supply's tolerance on an output through a current, as a share of reading or of the ratio.

    None where the current does not follow the supply, or the design has no output. What the law itself has of the
    supply is not an effect.
    """
    design, values = review.design, review.conditions.values
    fixed = [n for n in values if n not in design.inputs and n != "ambient"]
    rows = at_typical(review, fixed) & in_use(review)
    base = review.conditions.take(rows)
    voltage = design.nets[supply].voltage
    assert voltage is not None
    before = review.solve(base)
    found: list[tuple[float, str, float, dict[str, float]]] = []
    for end in (voltage.min, voltage.max):
        after = review.solve(Conditions({**base.values, supply: np.full(base.size, end)}))
        current = forward_current(after, carrier.part) / forward_current(before, carrier.part) - 1
        if not np.nanmax(np.abs(current), initial=0.0) > 1e-4 * abs(end / voltage.typ - 1):
            continue
        for net in (n for n, entry in design.nets.items() if entry.role == "output"):
            moved = after.voltage(net) - before.voltage(net) - _lawful(review, net, base, after.conditions)
            with np.errstate(all="ignore"):
                share = np.abs(moved) / _scale(review, net, before.voltage(net), rows)
            if np.isfinite(share).any():
                worst = before.worst(share)
                found.append((worst.value, net, float(moved[worst.index]), worst.conditions))
    return max(found, key=lambda effect: effect[0], default=None)


def _lawful(review: Review, net: str, before: Conditions, after: Conditions) -> np.ndarray:
    """What the law of an output asks it to move by between two sets of conditions."""
    for requirement in review.design.requirements.values():
        if requirement.output == net and requirement.law is not None:
            ends = []
            for conditions in (after, before):
                known = {n: conditions.values.get(n, requirement.constants.get(n)) for n in requirement.law.names}
                ends.append(np.asarray(requirement.law.evaluate(known), dtype=float))
            return ends[0] - ends[1]
    return np.zeros(before.size)


def _scale(review: Review, net: str, output: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Reading of an output; of one that crosses zero, its change for a whole change of an input's logarithm."""
    if np.nanmin(output) * np.nanmax(output) > 0:
        return np.abs(output)
    slopes = [np.abs(review.log_slope(net, name)[rows]) for name in review.design.inputs]
    return np.fmax.reduce(slopes) if slopes else np.abs(output)


def _from_reference(review: Review, carrier: Carrier, supply: str) -> Iterator[Remedy]:
    """Feed the same current from a reference, the one there is or a new one of half the supply's size or less."""
    design = review.design
    fed = [p for p in feeds(review, carrier) if p.kind == "resistor" and supply in p.pins.values()]
    if len(fed) != 1:
        yield Remedy(f"feed the current of {carrier.part} from a reference instead of {supply}")
        return
    part, level = fed[0], review.structure.held_at(carrier.node)
    base = 0.0 if level is None else level.typ
    voltage = design.nets[supply].voltage
    assert voltage is not None
    drop = voltage.typ - base
    there = [(n, net.voltage.typ) for n, net in design.nets.items()
             if net.role == "reference" and net.voltage is not None and (net.voltage.typ - base) * drop > 0]  # fmt: skip
    added: list[Edit] = []
    if there:
        name, volts = max(there, key=lambda entry: abs(entry[1] - base))
    else:
        volts = base + math.copysign(5.0 if abs(drop) > 7 else 2.5, drop)
        name = new_net(design, "VREF")
        table = {"role": "reference", "voltage": quantity(volts, "V"), "tolerance": "0.1 %", "from": supply}
        added = [Add(join_key(("nets", name)), table)]
    ohm = _series_value(part, part.value.typ * (volts - base) / drop)
    pin = next(p for p, net in part.pins.items() if net == supply)
    title = f"feed {part.ref} from {'a new reference ' if added else ''}{name}, {quantity(ohm, 'ohm')}"
    yield Remedy(title, [*added, move(part.ref, pin, name), set_parameter(part.ref, "value", quantity(ohm, "ohm"))])


def _series_value(part: Part, ohm: float) -> float:
    """Preferred value of the part's tolerance, E96 at least."""
    return nearest(ohm, "E192" if series_for_tolerance(part.tolerance or 0.01) == "E192" else "E96")


def _range(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    log_range = review.design.parts[carrier.part].parameters.get("log_range")
    current = np.where(in_use(review), forward_current(review.operating_points, carrier.part), np.nan)
    decades = outside(current, log_range)
    if log_range is None or not np.nanmax(decades, initial=0.0) > SLACK_DECADES:
        return
    worst = review.operating_points.worst(decades)
    at = float(current[worst.index])
    factor = log_range[1] / at if at > log_range[1] else log_range[0] / at
    remedy = scaled(review, carrier, factor)
    yield Finding(
        f"{carrier.part} carries {format_quantity(at, 'A', 3)}, outside its log range of "
        f"{format_quantity(log_range[0], 'A')} to {format_quantity(log_range[1], 'A')}",
        parts=[carrier.part], nets=[carrier.node], subject="log range", conditions=worst.conditions,
        severity=Severity.OBSERVATION if worst.value < settings.decades_outside else Severity.MINOR,
        consequence="there the maker states no conformity",
        evidence=[Evidence("decades outside the log range", worst.value, "1", 0.0, "<=", over=decades)],
        remedies=[remedy] if remedy else [],
    )  # fmt: skip


def _centring(review: Review, settings: ReferenceCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    partner = partner_of(review, carrier.part)
    if partner is None or any(c.part == partner and c.is_fixed for c in carriers(review)):
        return
    own, middle = middle_of(review, [carrier.part]), middle_of(review, [partner])
    if own is None or middle is None or abs(math.log10(own / middle)) <= settings.decades_off_middle:
        return
    fed = feeds(review, carrier)
    edits: list[Edit] = [set_parameter(p.ref, "value", quantity(nearest(p.value.typ * own / middle), "ohm"))
                         for p in fed if p.kind == "resistor"]  # fmt: skip
    edits += [set_parameter(p.ref, "value", quantity(p.value.typ * middle / own, "A"))
              for p in fed if p.kind == "current-source"]  # fmt: skip
    title = f"a current of {format_quantity(middle, 'A', 3)}" + (f" by {', '.join(p.ref for p in fed)}" if fed else "")
    off = abs(math.log10(own / middle))
    yield Finding(
        f"{carrier.part} carries {format_quantity(own, 'A', 3)}, {off:.2g} decades from the geometric middle "
        f"({format_quantity(middle, 'A', 3)}) of the current of {partner}, limit {settings.decades_off_middle:g}",
        parts=[carrier.part], nets=[carrier.node], subject="centring", severity=Severity.OBSERVATION,
        consequence="the errors of one end of the range are larger than they need be",
        evidence=[Evidence("decades from the middle", off, "1", settings.decades_off_middle, "<=")],
        remedies=[Remedy(title, edits)],
    )  # fmt: skip


def _compliance(review: Review) -> Iterator[Finding]:
    points = review.operating_points
    for ref, part in review.design.parts.items():
        if part.kind != "current-source" or part.compliance is None:
            continue
        (upper, lower), sign = reversed(part.pins.values()), math.copysign(1.0, part.value.typ)
        across = sign * (points.voltage(upper) - points.voltage(lower))
        if not np.isfinite(across).any() or np.nanmin(across) >= part.compliance.max:
            continue
        worst = points.least(across)
        limit = part.compliance.max
        yield Finding(
            f"{ref} has {format_quantity(worst.value, 'V', 3)} across it and needs {format_quantity(limit, 'V')}",
            parts=[ref], nets=[lower], subject="compliance", severity=Severity.MAJOR, conditions=worst.conditions,
            consequence=f"the current of {format_quantity(part.value.typ, 'A', 3)} is not kept",
            evidence=[Evidence("voltage across the source", worst.value, "V", limit, ">=", over=across, basis="limit")],
            remedies=list(_more_voltage(review, part, upper, limit - worst.value)),
        )  # fmt: skip


def _more_voltage(review: Review, part: Part, upper: str, short: float) -> Iterator[Remedy]:
    """Hang the far end of a source on a supply that is far enough away."""
    design, points = review.design, review.operating_points
    sign = math.copysign(1.0, part.value.typ)
    end = [pin for pin, net in part.pins.items() if net == upper][-1]
    for name, net in design.nets.items():
        if net.role == "supply" and name != upper:
            gained = sign * (points.voltage(name) - points.voltage(upper))
            if np.nanmin(gained) >= short:
                yield Remedy(f"connect {part.ref} to {name}", [move(part.ref, end, name)])
                return
    yield Remedy(f"use a source that works with {format_quantity(max(0.0, part.compliance.max - short), 'V', 2)}, "
                 "or more supply")  # fmt: skip
