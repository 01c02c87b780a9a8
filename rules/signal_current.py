"""The signal currents of log and antilog junctions over the range of the inputs."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Iterator, Sequence

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    BaseModel,
    Carrier,
    Cost,
    Disturbance,
    Evidence,
    Finding,
    OperatingPoints,
    Remedy,
    Review,
    Rule,
    Severity,
    carriers,
    disturbance,
    format_quantity,
    forward_current,
    forward_voltage,
    is_regulated,
    points_in_use,
)

from ._carried import MARGIN, conformity, leakage, middle_of, outside_log_range, working_current
from ._currents import better_amplifiers, input_magnitude, narrowed, offset_limit, scaled
from ._words import percent

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]
USUAL_RANGE = 100.0  # of a log stage: where the range is free, two decades are easily had
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
        """Judge log junctions by summing node, then the logarithm of all junctions that carry a signal."""
        signals = [c for c in carriers(review) if not c.is_fixed]
        logs = sorted((c for c in signals if c.is_log), key=lambda c: c.node)
        points = points_in_use(review)
        reversed_nodes: set[str] = set()
        for node, group in itertools.groupby(logs, key=lambda c: c.node):
            together = list(group)
            found = list(_sign(review, settings, points, together))
            reversed_nodes.update(node for _ in found)
            yield from found or _floor(review, settings, together)
            yield from _rating(review, together)
        for carrier in (c for c in signals if c.node not in reversed_nodes):
            yield from _logarithm(review, settings, points, carrier)


def _carried(points: OperatingPoints, group: Sequence[Carrier]) -> Array:
    """Forward current of the junction of a node that conducts: those of two polarities take turns."""
    currents = [forward_current(points, c.part) for c in group]
    on = [forward_voltage(points, c.part) > 0 for c in group]
    found: Array = np.max([np.where(f, i, np.minimum(i, 0.0)) for f, i in zip(on, currents, strict=True)], axis=0)
    return found


def _sign(
    review: Review, settings: SignalCurrent.Settings, points: OperatingPoints, group: Sequence[Carrier]
) -> Iterator[Finding]:
    first, parts = group[0], [c.part for c in group]
    current = _carried(points, group)
    is_open = points.linear(first.amplifier or "") | _is_pulled_open(review, points, first)
    zero = np.logical_and.reduce([points.conditions.values[name] == 0 for name in first.sources.inputs])
    bad = ((current <= 0) & is_open) | (zero & np.isfinite(current))
    if not bad.any():
        return
    worst = points.least(np.where(bad, current, np.nan))
    words = "zero" if zero[worst.index] else "of the wrong sign for it"
    yield Finding(
        f"the signal current of {', '.join(parts)} is {words} in the range in which the law is asked",
        parts=parts,
        nets=[first.node],
        subject="sign",
        severity=Severity.MAJOR,
        conditions=worst.conditions,
        consequence=f"{first.amplifier} loses its feedback there and runs to its limit; a logarithm has no value",
        evidence=[Evidence("signal current", worst.value, "A", 0.0, ">")],
        remedies=list(_positive(review, settings, points, group, ~bad & np.isfinite(current))),
    )


def _is_pulled_open(review: Review, points: OperatingPoints, carrier: Carrier) -> Mask:
    """Where the node is off its level to the side at which the junction takes no current.

    On the other side it is the amplifier that cannot drive the junction as far as the current asks.
    """
    part, level = review.design.parts[carrier.part], review.structure.level_of(carrier.node)
    away = points.voltage(carrier.node) - points.voltage(level or carrier.node)
    leaves = part.pins["E" if part.kind != "diode" else "K"] != carrier.node
    found: Mask = away * (1 if leaves == (part.kind != "pnp") else -1) < 0
    return found


def _positive(
    review: Review,
    settings: SignalCurrent.Settings,
    points: OperatingPoints,
    group: Sequence[Carrier],
    good: Mask,
) -> Iterator[Remedy]:
    """Narrow the range to where the current is large enough; where it is nowhere, turn something round."""
    first, inputs = group[0], input_magnitude(points, group[0])
    if inputs is None or not good.any():
        kind = review.design.parts[first.part].kind
        yield Remedy(f"turn the signal round, or log it with a junction of the other kind than {kind}")
        return
    found = disturbance(review, first)
    ratio, x = _over_errors(review, found, group), input_magnitude(found.points, first)
    assert x is not None
    usable = (ratio > 0) & (x > 0)
    floors = settings.over_errors * MARGIN * x[usable] / ratio[usable]
    ends = {float(inputs[good].max()) / USUAL_RANGE, float(floors.max(initial=0.0))} - {0.0}
    for least in sorted(ends):
        yield from narrowed(review, first, least=least)


def _over_errors(review: Review, found: Disturbance, group: Sequence[Carrier]) -> Array:
    """Signal current over all that disturbs it, NaN where an amplifier is at a limit or nothing disturbs."""
    current = _carried(found.points, group)
    errors = found.bias + found.offset + leakage(found, current)
    judged = is_regulated(review, found.points, group[0].node) & (errors > 0)
    return np.where(judged, current / np.where(judged, errors, 1.0), np.nan)


def _floor(review: Review, settings: SignalCurrent.Settings, group: Sequence[Carrier]) -> Iterator[Finding]:
    first, parts, found = group[0], [c.part for c in group], disturbance(review, group[0])
    ratio = _over_errors(review, found, group)
    if not np.isfinite(ratio).any() or np.nanmin(ratio) >= settings.over_errors:
        return
    worst = found.points.least(ratio)
    at = worst.index
    current = _carried(found.points, group)
    errors = [float(a[at]) for a in (found.bias, found.offset, leakage(found, current))]
    level, *shown = (format_quantity(i, "A", 3) for i in (float(current[at]), *errors))
    yield Finding(
        f"the least signal current of {', '.join(parts)}, {level}, is {worst.value:.3g} times the errors at "
        f"{first.node} (bias {shown[0]}, offset {shown[1]}, leakage {shown[2]} at the hottest), "
        f"{settings.over_errors:g} times asked",
        parts=parts,
        nets=[first.node],
        subject="floor",
        conditions=worst.conditions,
        consequence=f"the current logged there may be {percent(1 / worst.value)} off",
        evidence=[
            Evidence("least signal current over errors", worst.value, "1", settings.over_errors, ">=", basis="limit")
        ],
        remedies=list(
            _above_floor(review, settings.over_errors * MARGIN, first, found, at, float(current[at]), errors)
        ),
    )


def _above_floor(
    review: Review,
    wanted: float,
    carrier: Carrier,
    found: Disturbance,
    at: int,
    level: float,
    errors: Sequence[float],
) -> Iterator[Remedy]:
    """Smaller input resistor, where bias and leakage are the cause; better amplifier; narrower range."""
    bias, offset, leaking = errors
    left = level - wanted * offset  # the current of an offset grows as the resistor shrinks
    if left > 0:
        yield from scaled(review, carrier, wanted * (bias + leaking) / left)
    hottest = float(found.points.conditions.values["ambient"][at])
    amplifiers = [review.design.parts[ref] for ref in review.structure.amplifiers_of(carrier.node)]
    volts = max((offset_limit(amplifier, hottest) for amplifier in amplifiers), default=0.0)
    yield from better_amplifiers(review, carrier.node, level / wanted - leaking, offset / volts if volts else 0.0)
    inputs = input_magnitude(found.points, carrier)
    if inputs is not None:
        yield from narrowed(review, carrier, least=float(inputs[at]) * wanted * sum(errors) / level)


def _rating(review: Review, group: Sequence[Carrier]) -> Iterator[Finding]:
    points = review.operating_points
    for carrier in group:
        parameters = review.design.parts[carrier.part].parameters
        limit = next((float(parameters[n].max) for n in RATINGS if parameters.get(n) is not None), np.inf)
        current = np.abs(forward_current(points, carrier.part))
        if not np.nanmax(current, initial=0.0) > limit:
            continue
        worst = points.worst(current)
        yield Finding(
            f"{carrier.part} carries {format_quantity(worst.value, 'A', 3)}, rated {format_quantity(limit, 'A')}",
            parts=[carrier.part],
            nets=[carrier.node],
            subject="rating",
            severity=Severity.MAJOR,
            conditions=worst.conditions,
            consequence="the transistor is damaged, or its matching lost",
            evidence=[Evidence("signal current", worst.value, "A", limit, "<=", over=current, basis="limit")],
            remedies=list(_changed(review, carrier, points, worst.index, limit / worst.value / MARGIN)),
        )


def _changed(review: Review, carrier: Carrier, points: OperatingPoints, at: int, factor: float) -> Iterator[Remedy]:
    """Current times `factor` at a condition by its resistor; or a range that ends where it has that current."""
    yield from scaled(review, carrier, factor)
    inputs = input_magnitude(points, carrier)
    if inputs is not None and carrier.is_log:
        end = float(inputs[at]) * factor
        yield from narrowed(review, carrier, most=end) if factor < 1 else narrowed(review, carrier, least=end)


def _logarithm(
    review: Review, settings: SignalCurrent.Settings, points: OperatingPoints, carrier: Carrier
) -> Iterator[Finding]:
    """Conformity by solving again, and the range in which the maker states it."""
    current = working_current(review, carrier)

    def straighter(cost: Cost) -> Iterator[Remedy]:
        middle, excess = middle_of(current), MARGIN * cost.worst.value
        is_high = middle is None or current[cost.worst.index] > middle
        return _changed(review, carrier, review.operating_points, cost.worst.index, 1 / excess if is_high else excess)

    def inside(at: int, factor: float) -> Iterator[Remedy]:
        return _changed(review, carrier, points, at, factor)

    yield from conformity(review, carrier, settings.shares, straighter)
    judged = np.where(is_regulated(review, points, carrier.node), forward_current(points, carrier.part), np.nan)
    for finding in outside_log_range(points, carrier, judged, settings.decades_outside, inside):
        if carrier.is_log or finding.severity is Severity.OBSERVATION:
            yield finding
