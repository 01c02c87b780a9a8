"""Findings about the current of a junction that fixed and signal currents have in common."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    Carrier,
    Cost,
    Disturbance,
    Evidence,
    Finding,
    OperatingPoints,
    Remedy,
    Review,
    Severity,
    conformity_cost,
    format_quantity,
    forward_current,
    in_use,
    is_regulated,
)

from ._pairs import cost_evidence, cost_words

Array = npt.NDArray[np.float64]
MARGIN = 1.1
LEAKY_CLAMP = 0.01  # of the current: above it a clamp is a finding of its own
SLACK_DECADES = 0.005  # 1 %: the end of a log range is not known more closely


def working_current(review: Review, carrier: Carrier, partner: Carrier | None = None) -> Array:
    """Current of a junction where the circuit is in use and no amplifier of it, or of its partner, at a limit."""
    points = review.operating_points
    nodes = [c.node for c in (carrier, partner) if c is not None]
    judged = in_use(review) & is_regulated(review, points, *nodes)
    return np.where(judged, forward_current(points, carrier.part), np.nan)


def leakage(found: Disturbance, current: Array) -> Array:
    """Leakage at a node, without that of clamps where it is large enough alone to be the concern of another rule."""
    own: Array = np.where(found.clamps > LEAKY_CLAMP * np.abs(current), 0.0, found.clamps)
    return found.dark + own


def middle_of(current: Array) -> float | None:
    """Geometric middle of the span of a current; None where it is not positive throughout."""
    known = current[np.isfinite(current)]
    return math.sqrt(known.min() * known.max()) if known.size and known.min() > 0 else None


def conformity(
    review: Review, carrier: Carrier, shares: float, remedies: Callable[[Cost], Iterable[Remedy]]
) -> Iterator[Finding]:
    """Departure of a junction from a logarithm that costs an output more than its share."""
    cost = conformity_cost(review, carrier.part)
    if cost is None or cost.worst.value <= shares:
        return
    points, at = review.operating_points, cost.worst.index
    current = float(forward_current(points, carrier.part)[at])
    found = list(remedies(cost)) or [Remedy("use a transistor of lower bulk resistance and higher knee current")]
    yield Finding(
        f"{carrier.part} departs from a logarithm at {format_quantity(current, 'A', 3)}: resistance, knee, leakage "
        f"and Early effect cost {cost.worst.value:.3g} times their share at {cost.output}",
        parts=[carrier.part],
        nets=[carrier.node],
        subject="conformity",
        severity=Severity.MINOR,
        conditions=cost.worst.conditions,
        consequence=cost_words(cost.output, float(cost.error[at]), float(points.voltage(cost.output)[at])),
        evidence=[cost_evidence(cost.worst.value, cost.ratio, "typ")],
        remedies=found,
    )


def outside_log_range(
    points: OperatingPoints,
    carrier: Carrier,
    current: Array,
    serious: float,
    remedies: Callable[[int, float], Iterable[Remedy]],
) -> Iterator[Finding]:
    """Current outside the range in which the maker states conformity, serious from so many decades on.

    `remedies` is given the condition and the factor that the current is wanted to change by.
    """
    log_range = points.design.parts[carrier.part].parameters.get("log_range")
    if log_range is None:
        return
    low, high = log_range
    size = np.log10(np.where(current > 0, current, np.nan))
    decades = np.maximum(math.log10(low) - size, size - math.log10(high))
    if not np.nanmax(decades, initial=0.0) > SLACK_DECADES:
        return
    worst = points.worst(decades)
    found = float(current[worst.index])
    yield Finding(
        f"{carrier.part} carries {format_quantity(found, 'A', 3)}, outside its log range of "
        f"{format_quantity(low, 'A')} to {format_quantity(high, 'A')}",
        parts=[carrier.part],
        nets=[carrier.node],
        subject="log range",
        severity=Severity.OBSERVATION if worst.value < serious else Severity.MINOR,
        conditions=worst.conditions,
        consequence="there the maker states no conformity",
        evidence=[Evidence("decades outside the log range", worst.value, "1", 0.0, "<=", over=decades)],
        remedies=list(remedies(worst.index, (high if found > high else low) / found)),
    )
