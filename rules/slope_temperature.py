"""What temperature does to logarithms: the drift of a single junction, and kT/q in the slope.

A base-emitter voltage falls by about 2 mV/K, 6 % of current a kelvin. Two junctions against each other take that
away and leave kT/q times the logarithm of the ratio of their currents, which rises by 1/T, 3354 ppm/K at 25 °C: 0.3 %
a kelvin of whatever is read off it.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Annotated

import numpy as np

from rulecheck.api import (
    BaseModel,
    Conditions,
    Evidence,
    Finding,
    JunctionLoop,
    Remedy,
    Requirement,
    Review,
    Rule,
    Severity,
    Unit,
    at_typical,
    format_quantity,
    is_regulated,
)

from ._slopes import Slope, compensations, law_key, slopes
from ._words import percent

SMALL_OFFSET = 1e-3


class SlopeTemperature(Rule):
    """A log junction that reaches an output with nothing against it, or a slope that keeps kT/q.

    Junction loops are judged by their weights, which cancel where every junction has one against it. The slope is
    that of the computed output, dy/d(ln x) where the law is a logarithm and d(ln y)/dx where it is an antilogarithm,
    at the ends of ambient. A law that names `ambient` asks for what the junctions do, and is not judged; neither is
    the slope of an output without a law, as nothing says what it is to be.
    """

    name = "slope-temperature"
    title = "Output that follows the temperature of a junction, or kT/q"
    source = (
        "d(kT/q)/dT / (kT/q) = 1/T, dVBE/dT = (VBE - (3 kT/q + Eg))/T, textbook; limits: common practice, no source"
    )
    default_severity = Severity.MAJOR
    needs = ("operating_points", "loops", "transfer")

    class Settings(BaseModel):
        """Limits."""

        serious: Annotated[float, Unit("ppm/K")] = 1000e-6
        limit: Annotated[float, Unit("ppm/K")] = 300e-6
        aim: Annotated[float, Unit("ppm/K")] = 150e-6

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge loops without a counterpart first: their outputs have no slope worth judging."""
        if review.design.ambient.min == review.design.ambient.max:
            return
        drifting: set[str] = set()
        for loop in review.structure.junction_loops:
            if not loop.compensated and (loop.outputs or loop.inputs):
                for finding in _uncompensated(review, loop):
                    drifting.update(finding.nets)
                    yield finding
        for slope in slopes(review):
            if slope.requirement.output not in drifting:
                yield from _keeps_thermal_voltage(review, settings, slope)


def _uncompensated(review: Review, loop: JunctionLoop) -> Iterable[Finding]:
    """The outputs that a loop drives, which move with its junctions by more than their share."""
    points, design, values = review.operating_points, review.design, review.conditions.values
    rows = at_typical(review, [name for name in values if name not in design.inputs]) & points.converged
    base = review.conditions.take(rows)
    ends = (design.ambient.min, design.ambient.max)
    cold, hot = (review.solve(Conditions({**base.values, "ambient": np.full(base.size, t)})) for t in ends)
    for net in _outputs(review, loop):
        if any("ambient" in r.law.names for r in _laws(review, net) if r.law is not None):
            continue
        drift = np.abs(hot.voltage(net) - cold.voltage(net))
        asked = is_regulated(review, cold, net) & is_regulated(review, hot, net)
        share = review.share(net)[rows]
        with np.errstate(all="ignore"):
            ratio = np.where(asked, drift / (2 * share), np.nan)  # the typical ambient lies between
        if not np.isfinite(ratio).any() or np.nanmax(ratio) <= 1:
            continue
        worst = hot.worst(ratio)
        at, span = worst.index, ends[1] - ends[0]
        reading = float(points.voltage(net)[rows][at])
        yield Finding(
            f"{', '.join(loop.parts)} reaches {net} with no junction against it: "
            f"{format_quantity(float(hot.voltage(net)[at] - cold.voltage(net)[at]) / span, 'V/K', 3)}",
            parts=loop.parts, nets=[net], subject="uncompensated", conditions=worst.conditions,
            consequence=f"{net} moves by {format_quantity(float(drift[at]), 'V', 3)}"
                        + (f" ({percent(drift[at] / reading)} of reading)" if reading else "")
                        + f" over ambient; one cause may take {format_quantity(float(share[at]), 'V', 3)} either way",
            evidence=[Evidence("drift over its share", worst.value, "1", 1.0),
                      Evidence("change over ambient", float(drift[at]), "V")],
            remedies=[Remedy(f"put a junction of the same die, at a fixed current, against {loop.parts[0]} (no edit of "
                             "values can take the drift of a single junction away), and a tempco resistor of about "
                             "3354 ppm/K or an antilog pair against the kT/q that is left")],
        )  # fmt: skip


def _outputs(review: Review, loop: JunctionLoop) -> list[str]:
    """Outputs whose voltage the loop makes up, else those that its junctions move."""
    if loop.outputs:
        return list(loop.outputs)
    moved = review.re_solve(vbe_offsets={
        ref: SMALL_OFFSET for ref in loop.parts if review.design.parts[ref].kind in ("npn", "pnp")
    })  # fmt: skip
    return [cost.output for cost in review.cost(moved) if cost.worst.value > 1]


def _laws(review: Review, net: str) -> list[Requirement]:
    return [r for r in review.design.requirements.values() if r.output == net and r.law is not None]


def _keeps_thermal_voltage(review: Review, settings: SlopeTemperature.Settings, slope: Slope) -> Iterable[Finding]:
    tempco = slope.tempco(review)
    if not abs(tempco) > settings.limit:
        return
    ambient, net = review.design.ambient, slope.requirement.output
    loops = [loop for loop in review.structure.junction_loops if net in loop.outputs or slope.kind == "antilog"]
    parts = list(dict.fromkeys(ref for loop in loops for ref in loop.parts))
    what = f"dy/d(ln {slope.source})" if slope.kind == "log" else f"d(ln y)/d{slope.source}"
    off = tempco * max(ambient.max - ambient.typ, ambient.typ - ambient.min)
    remedies = list(compensations(review, slope, settings.aim))[:2] if review.seeks_remedies else []
    if slope.kind == "log":
        remedies.append(Remedy("or read it by an antilog pair at the same temperature, which takes kT/q out again"))
    yield Finding(
        f"slope {what} of {net} changes by {_ppm(tempco)} (limit {_ppm(settings.limit)}), the law has no temperature",
        parts=parts, nets=[net], subject=f"{slope.requirement.name} {slope.source}",
        severity=Severity.MAJOR if abs(tempco) > settings.serious else Severity.MINOR,
        consequence=f"{percent(off)} of {'every decade' if slope.kind == 'log' else 'the exponent'} at the end of "
                    f"ambient: {_effect(review, slope, off)}",
        evidence=[Evidence("tempco of the slope", abs(tempco), "1/K", settings.limit)],
        remedies=remedies or [Remedy("no single resistor of about 3354 ppm/K takes it out: look at the gain stage")],
        at=law_key(slope.requirement),
    )  # fmt: skip


def _effect(review: Review, slope: Slope, off: float) -> str:
    """What a wrong slope costs at the end of the input's range that is worst, in volts and against what is allowed."""
    net = slope.requirement.output
    y = review.solve(slope.base).voltage(net)
    error = off * (y if slope.kind == "log" else y * np.log(np.abs(y / np.median(y))))
    at = int(np.nanargmax(np.abs(error)))
    words = f"{net} is off by {format_quantity(abs(float(error[at])), 'V', 3)}"
    if slope.requirement.has_accuracy:
        allowed = slope.requirement.absolute + slope.requirement.reading * abs(float(y[at]))
        words += f", allowed are {format_quantity(allowed, 'V', 3)}"
    return words


def _ppm(tempco: float) -> str:
    return f"{tempco * 1e6:.0f} ppm/K"
