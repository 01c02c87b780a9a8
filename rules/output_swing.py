"""Amplifier outputs at their limit, close to it, or asked for more current than they have.

An output that has reached its limit holds nothing any more: its summing node leaves its level, and everything
computed from it is wrong. Junction voltages hardly move, but an emitter resistor, a gain stage or a supply at
the low end of its tolerance brings an output there.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Annotated

import numpy as np

from rulecheck.api import (
    BaseModel,
    Evidence,
    Finding,
    Review,
    Rule,
    Severity,
    Unit,
    format_quantity,
    join_key,
)

from ._saturation import Floats, Mask, SignalFlow, asked_for, first_at_limit, is_at_limit, lacks_signal
from ._swing import BOUNDLESS, Demand, current_remedies, internal_output, swing_remedies


class OutputSwing(Rule):
    """The internal output, before the output resistance, is judged against the limits of the amplifier.

    Judged are the conditions of the requirements' ranges above the inputs' cutoffs, potentiometers over their
    whole travel. Of amplifiers at a limit the first cause is named, once. Not judged here: amplifiers without
    negative feedback (`feedback-sign`) and log amplifiers whose signal has the wrong sign (`signal-current`).
    The output current is judged where the model states its limit.
    """

    name = "output-swing"
    title = "Amplifier output at or near its limit, or over its current"
    source = "data sheets' output swing and current; the margins: common practice, no source"
    default_severity = Severity.MAJOR

    class Settings(BaseModel):
        """Limits: the smaller of the two margins holds."""

        margin: Annotated[float, Unit("V")] = 0.2
        share_of_supply: Annotated[float, Unit("%")] = 0.02

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge limits first, then margins of the amplifiers that are never at one, then currents."""
        points, flow = review.operating_points, SignalFlow(review)
        asked = {a: asked_for(review, flow, a) for a in flow.amplifiers}
        at_limit = {a: is_at_limit(points, a) for a in flow.amplifiers}
        elsewhere = {a: at_limit[a] & _has_other_cause(review, a) for a in flow.amplifiers}
        for group, where in first_at_limit(flow, at_limit, elsewhere):
            where &= np.any([asked[a] & at_limit[a] for a in group], axis=0)
            if where.any():
                yield _at_limit(review, settings, group, where)
        saturated = [a for a in flow.amplifiers if at_limit[a].any()]
        for amplifier in flow.amplifiers:
            judged = asked[amplifier] & points.linear(amplifier)
            for other in saturated:
                judged &= ~at_limit[other] | (not flow.drives(other, amplifier))
            if not (at_limit[amplifier] & asked[amplifier]).any():
                yield from _near_limit(review, settings, amplifier, judged)
            yield from _over_current(review, amplifier, judged)


def _has_other_cause(review: Review, amplifier: str) -> Mask:
    """Where a limit is the matter of another rule."""
    if review.structure.dc_feedback.get(amplifier) != "negative":
        return np.ones(review.conditions.size, bool)
    return lacks_signal(review, amplifier)


def _at_limit(review: Review, settings: OutputSwing.Settings, group: list[str], where: Mask) -> Finding:
    points, demand = review.operating_points, Demand(review)
    first = max(group, key=lambda a: int((is_at_limit(points, a) & where).sum()))
    needed = demand.output(first)
    low, high = points.limits(first)
    excess = np.where(where & is_at_limit(points, first), np.fmax(needed - high, low - needed), np.nan)
    worst = points.worst(np.where(np.isnan(excess) & where, 0.0, excess))
    upper = str(points.state(first)[worst.index]) == "high"
    limit = float((high if upper else low)[worst.index])
    wanted = float(np.nan_to_num(needed[worst.index], nan=np.copysign(BOUNDLESS, limit)))
    within_reach = abs(wanted) < BOUNDLESS / 2
    needs = format_quantity(wanted, "V", 3)
    words = f"it would need {needs}" if within_reach else f"not even {needs} would balance its loop"
    side = "high" if upper else "low"
    others = f", with {', '.join(a for a in group if a != first)}" if len(group) > 1 else ""
    return Finding(
        f"{first}{others}: output at its {side} limit of {format_quantity(limit, 'V', 3)}; {words}",
        parts=group, severity=Severity.MAJOR, conditions=worst.conditions,
        consequence=demand.consequence(worst.index),
        evidence=[Evidence("output voltage needed", wanted, "V", limit, "<=" if upper else ">=", over=needed)],
        remedies=swing_remedies(review, demand, first, _wanted_margin(review, settings, first), where),
        at=join_key(("parts", first)),
    )  # fmt: skip


def _wanted_margin(review: Review, settings: OutputSwing.Settings, amplifier: str) -> Floats:
    pins, points = review.design.parts[amplifier].pins, review.operating_points
    total = points.voltage(pins["V+"]) - points.voltage(pins["V-"])
    margin: Floats = np.minimum(settings.margin, settings.share_of_supply * total)
    return margin


def _near_limit(review: Review, settings: OutputSwing.Settings, amplifier: str, judged: Mask) -> Iterator[Finding]:
    points, headroom = review.operating_points, review.design.parts[amplifier].output_headroom
    volts, (low, high) = internal_output(points, review.design.parts[amplifier]), points.limits(amplifier)
    # The operating point has the typical limits; the margin is asked of the guaranteed ones.
    above = high - (headroom.high.max - headroom.high.typ) - volts
    below = volts - low - (headroom.low.max - headroom.low.typ)
    margin = np.where(judged, np.minimum(above, below), np.nan)
    wanted = _wanted_margin(review, settings, amplifier)
    if not np.isfinite(margin).any():
        return
    worst = points.least(margin - wanted)
    if worst.value >= 0:
        return
    left, limit = float(margin[worst.index]), float(wanted[worst.index])
    side = "high" if above[worst.index] < below[worst.index] else "low"
    yield Finding(
        f"{amplifier}: output {format_quantity(float(volts[worst.index]), 'V', 3)}, "
        f"{format_quantity(left, 'V', 3)} from its {side} limit, {format_quantity(limit, 'V', 3)} wanted",
        parts=[amplifier], severity=Severity.MINOR, conditions=worst.conditions, subject="margin",
        consequence="spread of parts, load or temperature may take the output to its limit",
        evidence=[Evidence("distance from the limit", left, "V", limit, ">=", over=margin, basis="limit")],
        remedies=swing_remedies(review, Demand(review), amplifier, wanted, judged),
    )  # fmt: skip


def _over_current(review: Review, amplifier: str, judged: Mask) -> Iterator[Finding]:
    points, part = review.operating_points, review.design.parts[amplifier]
    if part.output_current is None or not judged.any():
        return
    current = np.where(judged, np.abs(points.current(amplifier, "OUT")), np.nan)
    worst, limit = points.worst(current), part.output_current.max
    if worst.value <= limit:
        return
    yield Finding(
        f"{amplifier}: output current {format_quantity(worst.value, 'A', 3)}, rated {format_quantity(limit, 'A', 3)}",
        parts=[amplifier], severity=Severity.MAJOR, conditions=worst.conditions, subject="current",
        consequence="the output sags or limits its current, and its loop holds nothing any more",
        evidence=[Evidence("output current", worst.value, "A", limit, "<=", over=current, basis="limit")],
        remedies=current_remedies(review, amplifier),
    )  # fmt: skip
