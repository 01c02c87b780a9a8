"""The signal currents of log and antilog junctions over the range of the inputs."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable, Iterator, Sequence

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    BaseModel, Carrier, Cost, Evidence, Finding, OperatingPoints, Remedy, Review, Rule, Severity, carriers,
    conformity_cost, disturbance, format_quantity, forward_current, forward_voltage, points_in_use,
)  # fmt: skip

from ._currents import better_amplifiers, narrowed, outside, scaled, source_magnitude
from ._pairs import cost_evidence, cost_words

Array = npt.NDArray[np.float64]
MARGIN = 1.1
SLACK_DECADES = 0.005  # 1 %: a range is not known more closely
RATINGS = ("collector_current", "forward_current")


class SignalCurrent(Rule):
    """Signal currents that are zero or reversed, too large, too small to tell from errors, or badly logged.

    A log junction takes current one way only: at zero or reversed current its amplifier loses its feedback. Near the
    lower end bias current, offset voltage over the resistance at the node, and leakage add to the signal, at the
    upper end resistance and knee bend the logarithm. Below an input's `cutoff` nothing is asked. Antilog junctions
    are judged for conformity; how far they are driven is another rule's concern.
    """

    name = "signal-current"
    title = "Signal current of the wrong sign, too large, too small or badly logged"
    source = "conformity: Gray and Meyer, transistor model; floor of 20 times: common practice, no source"
    default_severity = Severity.MINOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits."""

        over_errors: float = 20.0
        shares: float = 1.0
        decades_outside: float = 1.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge log junctions by summing node, then the conformity and range of all that carry a signal."""
        signals = [c for c in carriers(review) if not c.is_fixed]
        logs = sorted((c for c in signals if c.is_log), key=lambda c: (c.node, c.amplifier or ""))
        points = points_in_use(review)
        reversed_nodes: set[str] = set()
        for node, group in itertools.groupby(logs, key=lambda c: c.node):
            together = list(group)
            finding = _sign(review, points, together)
            if finding is not None:
                reversed_nodes.add(node)
                yield finding
                continue
            yield from _floor(review, settings, together)
            yield from _rating(review, together)
        for carrier in signals:
            if carrier.node not in reversed_nodes:
                yield from _conformity(review, settings, carrier)
                yield from _range(review, settings, points, carrier)


def _carried(points: OperatingPoints, group: Sequence[Carrier]) -> Array:
    """Forward current of the junction of a node that conducts: those of two polarities take turns."""
    currents = [np.where(forward_voltage(points, c.part) > 0, forward_current(points, c.part), np.minimum(
        forward_current(points, c.part), 0.0)) for c in group]  # fmt: skip
    return np.max(currents, axis=0)


def _sign(review: Review, points: OperatingPoints, group: Sequence[Carrier]) -> Finding | None:
    first = group[0]
    current = _carried(points, group)
    nothing = [points.conditions.values[name] == 0 for name in first.sources.inputs]
    bad = (current <= 0) | np.logical_and.reduce(nothing)
    if not bad[np.isfinite(current)].any():
        return None
    worst = points.least(np.where(bad, current, np.nan))
    zero = bool(np.logical_and.reduce(nothing)[worst.index])
    parts = [c.part for c in group]
    words = "zero" if zero else "of the wrong sign for it"
    good = ~bad & np.isfinite(current)
    return Finding(
        f"the signal current of {', '.join(parts)} is {words} at a point of the range where the law is asked",
        parts=parts, nets=[first.node], subject="sign", severity=Severity.MAJOR, conditions=worst.conditions,
        consequence=f"{first.amplifier} loses its feedback there and runs to its limit; a logarithm has no value",
        evidence=[Evidence("signal current", worst.value, "A", 0.0, ">")],
        remedies=list(_positive(review, points, group, good)),
    )  # fmt: skip


def _positive(review: Review, points: OperatingPoints, group: Sequence[Carrier], good: npt.NDArray[np.bool_]
              ) -> Iterator[Remedy]:  # fmt: skip
    """Narrow the range to where the current is large enough; of the wrong sign throughout, turn something round."""
    first, inputs = group[0], source_magnitude(points, group[0])
    if inputs is None or not good.any():
        kind = review.design.parts[first.part].kind
        yield Remedy(f"turn the signal round, or use a transistor of the other kind than {kind}")
        return
    least = float(inputs[good].min())
    found = disturbance(review, first)
    level, errors = _carried(found.points, group), found.bias + found.offset + found.leakage
    x = np.abs(found.points.conditions.values[first.sources.inputs[0]])
    with np.errstate(all="ignore"):
        needed = x * 20.0 * MARGIN * errors / level
    usable = needed[(level > 0) & (x > 0)]
    floor = float(np.nanmax(usable)) if usable.size else least
    yield from narrowed(review, first, least=min(floor, least) if floor > 0 else least)


def _floor(review: Review, settings: SignalCurrent.Settings, group: Sequence[Carrier]) -> Iterator[Finding]:
    first, found = group[0], disturbance(review, group[0])
    current, errors = _carried(found.points, group), found.bias + found.offset + found.leakage
    with np.errstate(all="ignore"):
        ratio = np.where(errors > 0, current / errors, np.nan)
    if not np.isfinite(ratio).any() or np.nanmin(ratio) >= settings.over_errors:
        return
    worst = found.points.least(ratio)
    at = worst.index
    level, bias, offset, leakage = (float(a[at]) for a in (current, found.bias, found.offset, found.leakage))
    parts = [c.part for c in group]
    yield Finding(
        f"the least signal current of {', '.join(parts)}, {format_quantity(level, 'A', 3)}, is {worst.value:.3g} times "
        f"the errors at {first.node} (bias {format_quantity(bias, 'A', 3)}, offset {format_quantity(offset, 'A', 3)}, "
        f"leakage {format_quantity(leakage, 'A', 3)} at the hottest); {settings.over_errors:g} times asked",
        parts=parts, nets=[first.node], subject="floor", conditions=worst.conditions,
        consequence=f"the current logged there may be {100 / worst.value:.2g} % off",
        evidence=[Evidence("least signal current over errors", worst.value, "1", settings.over_errors, ">=",
                           basis="limit")],
        remedies=list(_above_floor(review, settings, first, found.points, at, level, (bias, offset, leakage))),
    )  # fmt: skip


def _above_floor(
    review: Review, settings: SignalCurrent.Settings, carrier: Carrier, points: OperatingPoints, at: int,
    level: float, errors: tuple[float, float, float],
) -> Iterator[Remedy]:  # fmt: skip
    """Smaller input resistor, where bias and leakage are the cause; better amplifier; narrower range."""
    bias, offset, leakage = errors
    wanted = settings.over_errors * MARGIN
    left = level - wanted * offset  # an offset grows as the resistor shrinks
    if left > 0 and (remedy := scaled(review, carrier, wanted * (bias + leakage) / left)):
        yield remedy
    budget = level / wanted - leakage
    volts = max((_offset_volts(review, ref) for ref in review.structure.amplifiers_of(carrier.node)), default=0.0)
    if budget > 0 and offset + bias > 0:
        keep = budget / (bias + offset)
        yield from better_amplifiers(review, carrier.node, bias * keep, volts * keep if offset > 0 else None)
    inputs = source_magnitude(points, carrier)
    if inputs is not None:
        yield from narrowed(review, carrier, least=float(inputs[at]) * wanted * sum(errors) / level)


def _offset_volts(review: Review, ref: str) -> float:
    """Offset limit of an amplifier at the hottest [V]."""
    part = review.design.parts[ref]
    limit = 0.0 if part.offset_voltage is None else part.offset_voltage.half
    drift = 0.0 if part.offset_drift is None else part.offset_drift.half
    hottest = float(np.nanmax(review.operating_points.temperature(ref)))
    return float(limit + drift * abs(hottest - 298.15))


def _rating(review: Review, group: Sequence[Carrier]) -> Iterator[Finding]:
    points = review.operating_points
    for carrier in group:
        part = review.design.parts[carrier.part]
        limits = [part.parameters[name] for name in RATINGS if part.parameters.get(name) is not None]
        current = np.abs(forward_current(points, carrier.part))
        if not limits or not np.nanmax(current, initial=0.0) > limits[0].max:
            continue
        worst, limit = points.worst(current), float(limits[0].max)
        yield Finding(
            f"{carrier.part} carries {format_quantity(worst.value, 'A', 3)}, rated {format_quantity(limit, 'A')}",
            parts=[carrier.part], nets=[carrier.node], subject="rating", severity=Severity.MAJOR,
            conditions=worst.conditions, consequence="the transistor is damaged, or leaves its matching behind",
            evidence=[Evidence("signal current", worst.value, "A", limit, "<=", over=current, basis="limit")],
            remedies=list(_below(review, carrier, points, worst.index, limit / worst.value / MARGIN)),
        )  # fmt: skip


def _below(review: Review, carrier: Carrier, points: OperatingPoints, at: int, factor: float) -> Iterator[Remedy]:
    """Smaller currents, or a range that ends sooner."""
    if remedy := scaled(review, carrier, factor):
        yield remedy
    inputs = source_magnitude(points, carrier)
    if inputs is not None and carrier.is_log:
        yield from narrowed(review, carrier, most=float(inputs[at]) * factor)


def _conformity(review: Review, settings: SignalCurrent.Settings, carrier: Carrier) -> Iterator[Finding]:
    cost = conformity_cost(review, carrier.part)
    if cost is None or cost.worst.value <= settings.shares:
        return
    points, at = review.operating_points, cost.worst.index
    current = forward_current(points, carrier.part)
    yield Finding(
        f"{carrier.part} departs from a logarithm at {format_quantity(float(current[at]), 'A', 3)}: resistance, knee, "
        f"leakage and Early effect cost {cost.worst.value:.3g} times their share at {cost.output}",
        parts=[carrier.part], nets=[carrier.node], subject="conformity", conditions=cost.worst.conditions,
        consequence=cost_words(cost.output, float(cost.error[at]), float(points.voltage(cost.output)[at])),
        evidence=[cost_evidence(cost.worst.value, cost.ratio, "typ")],
        remedies=list(_conforming(review, settings, carrier, cost, current)),
    )  # fmt: skip


def _conforming(
    review: Review, settings: SignalCurrent.Settings, carrier: Carrier, cost: Cost, current: Array
) -> Iterator[Remedy]:
    """Away from the end that bends, by the resistor or by the range; where neither helps, another transistor."""
    points = review.operating_points
    worst, fine = float(current[cost.worst.index]), current[np.isfinite(cost.ratio) & (cost.ratio <= settings.shares)]
    middle = math.sqrt(np.nanmin(np.abs(current)) * np.nanmax(np.abs(current)))
    high = worst > middle
    if high:
        yield from _below(review, carrier, points, cost.worst.index, 1 / (MARGIN * cost.worst.value))
    elif remedy := scaled(review, carrier, MARGIN * cost.worst.value):
        yield remedy
    inputs = source_magnitude(points, carrier)
    if not high and carrier.is_log and inputs is not None and fine.size:
        yield from narrowed(review, carrier, least=float(inputs[current >= fine.min()].min()))
    if not carrier.is_log:
        yield Remedy("use a transistor of lower bulk resistance and higher knee current")


def _range(
    review: Review, settings: SignalCurrent.Settings, points: OperatingPoints, carrier: Carrier
) -> Iterator[Finding]:
    log_range = review.design.parts[carrier.part].parameters.get("log_range")
    current = forward_current(points, carrier.part)
    decades = outside(current, log_range)
    if log_range is None or not np.nanmax(decades, initial=0.0) > SLACK_DECADES:
        return
    worst = points.worst(decades)
    far = worst.value >= settings.decades_outside
    if far and not carrier.is_log:
        return  # how far an antilog junction is driven is another rule's concern
    at, high = float(current[worst.index]), float(current[worst.index]) > log_range[1]
    factor = log_range[1 if high else 0] / at
    remedies = list(_below(review, carrier, points, worst.index, factor)) if high else [
        r for r in (scaled(review, carrier, factor),) if r is not None
    ]
    inputs = source_magnitude(points, carrier)
    if not high and carrier.is_log and inputs is not None:
        remedies += narrowed(review, carrier, least=float(inputs[worst.index]) * factor)
    yield Finding(
        f"{carrier.part} carries {format_quantity(at, 'A', 3)}, outside its log range of "
        f"{format_quantity(log_range[0], 'A')} to {format_quantity(log_range[1], 'A')}",
        parts=[carrier.part], nets=[carrier.node], subject="log range", conditions=worst.conditions,
        severity=Severity.MINOR if far else Severity.OBSERVATION, consequence="there the maker states no conformity",
        evidence=[Evidence("decades outside the log range", worst.value, "1", 0.0, "<=")], remedies=remedies,
    )  # fmt: skip
