"""Slopes of logarithms and antilogarithms over temperature, and the resistors that set them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    Conditions,
    Edit,
    OperatingPoints,
    Remedy,
    Requirement,
    Review,
    at_typical,
    format_quantity,
    is_regulated,
    join_key,
)

from ._edits import set_parameter
from ._pairs import are_linked, free_name, link

Array = npt.NDArray[np.float64]
Kind = Literal["log", "antilog"]
STEP = 1e-3
"""Of the logarithm of an input, to either side."""
CONSTANT = 1e-4
"""Relative change up to which a slope of a law is one slope."""
TRIAL = 0.01
LEAST_TEMPCO, MOST_TEMPCO = 2000e-6, 6000e-6
"""What a tempco resistor for kT/q may be asked for [1/K]."""


@dataclass(frozen=True)
class Slope:
    """The slope of a requirement's output in one input.

    Attributes
    ----------
    requirement : Requirement
    source : str
        Input.
    kind : str
        ``log``: dy/d(ln x); ``antilog``: d(ln y)/dx.
    base : Conditions
        Where it is looked at, at typical ambient.
    """

    requirement: Requirement
    source: str
    kind: Kind
    base: Conditions

    @property
    def unit(self) -> str:
        """Volts per unit of the logarithm, or one per unit of the input."""
        return "V" if self.kind == "log" else "1"

    def at(self, review: Review, ambient: float, values: Mapping[tuple[str, str], Any] | None = None) -> float:
        """The slope at an ambient, the median over the input's range; NaN where nothing is regulated."""
        up, down = (_solved(review, self, ambient, np.exp(step), values) for step in (STEP, -STEP))
        net, x = self.requirement.output, self.base.values[self.source]
        y = (up.voltage(net), down.voltage(net))
        with np.errstate(all="ignore"):
            raw = (y[0] - y[1]) if self.kind == "log" else np.log(y[0] / y[1]) / x
        regulated = is_regulated(review, up, net) & is_regulated(review, down, net)
        known = (raw / (2 * STEP))[regulated & np.isfinite(raw)]
        return float(np.median(known)) if known.size else np.nan

    def tempco(self, review: Review, values: Mapping[tuple[str, str], Any] | None = None) -> float:
        """Relative change of the slope with ambient, from end to end of its span [1/K]; NaN where there is none."""
        ambient = review.design.ambient
        low, typ, high = (self.at(review, t, values) for t in (ambient.min, ambient.typ, ambient.max))
        return (high - low) / typ / (ambient.max - ambient.min) if typ and ambient.max > ambient.min else np.nan


def _solved(
    review: Review, slope: Slope, ambient: float, factor: float, values: Mapping[tuple[str, str], Any] | None
) -> OperatingPoints:
    base = slope.base.values
    moved = {slope.source: base[slope.source] * factor, "ambient": np.full(slope.base.size, ambient)}
    return review.solve(Conditions({**base, **moved}), overrides=values)


def slopes(review: Review) -> Iterator[Slope]:
    """Slopes that the laws have in their inputs: those that are constant, and speak of no temperature."""
    for name, transfer in review.transfer.items():
        requirement = review.design.requirements[name]
        law = requirement.law
        if law is None or "ambient" in law.names:
            continue
        for source in (n for n in review.design.inputs if n in law.names):
            others = [n for n in review.conditions.values if n != source]
            rows = at_typical(review, others) & transfer.judged & (review.conditions.values[source] != 0)
            if rows.sum() < 3:
                continue
            base = review.conditions.take(rows)
            kind = _kind(requirement, base, source)
            if kind is not None:
                yield Slope(requirement, source, kind, base)


def _kind(requirement: Requirement, base: Conditions, source: str) -> Kind | None:
    """What the law is in an input: linear in its logarithm, or its own logarithm linear in the input."""
    law, x = requirement.law, base.values[source]
    if law is None:
        return None
    known: dict[str, Any] = {**base.values, **requirement.constants}
    y = [np.broadcast_to(law.evaluate(known | {source: x * np.exp(step)}), x.shape) for step in (STEP, -STEP)]
    with np.errstate(all="ignore"):
        candidates: tuple[tuple[Kind, Array], ...] = ("log", y[0] - y[1]), ("antilog", np.log(y[0] / y[1]) / x)
    for kind, values in candidates:
        size = np.abs(values).max()
        if np.isfinite(size) and size > 0 and np.ptp(values) <= CONSTANT * size:
            return kind
    return None


def compensations(review: Review, slope: Slope, limit: float) -> Iterator[Remedy]:
    """Tempco resistors that bring a slope's tempco below a limit, by solving again; the simplest first.

    Parameters
    ----------
    review : Review
    slope : Slope
    limit : float
        [1/K]
    """
    parts = review.design.parts
    present, middle = slope.tempco(review), slope.at(review, review.design.ambient.typ)
    loops = [loop for loop in review.structure.junction_loops if loop.level_shifts]
    junctions = {ref: loop.parts for loop in loops for ref in loop.level_shifts if parts[ref].kind == "resistor"}
    options = []
    for ref in junctions:
        value = parts[ref].value.typ
        moved = slope.at(review, review.design.ambient.typ, {(ref, "value"): value * (1 + TRIAL)})
        weight = (moved / middle - 1) / TRIAL
        if weight and np.isfinite(weight):
            # a resistor that has a tempco already needs what is missing on top of it
            options.append((parts[ref].tempco.typ - present / weight, ref))
    for tempco, ref in sorted(options, key=lambda o: abs(o[0] - 1 / review.design.ambient.typ)):
        if not LEAST_TEMPCO <= tempco <= MOST_TEMPCO:
            continue
        alike = [r for r in junctions if junctions[r] == junctions[ref] and parts[r].value.typ == parts[ref].value.typ]
        rounded = round(tempco * 1e6, -1) * 1e-6
        if abs(slope.tempco(review, {(r, "tempco"): rounded for r in alike})) < limit:
            words = format_quantity(rounded, "ppm/K")
            yield Remedy(f"make {' and '.join(alike)} of {words}, at the temperature of {', '.join(junctions[ref])}",
                         _edits(review, alike, words, junctions[ref][0]))  # fmt: skip


def _edits(review: Review, refs: list[str], tempco: str, junction: str) -> list[Edit]:
    """Give resistors a tempco and a package each that is linked to that of a junction."""
    design = review.design
    home = design.parts[junction].package
    edits: list[Edit] = []
    names: list[str] = []
    for ref in refs:
        package = design.parts[ref].package
        edits.append(set_parameter(ref, "tempco", tempco))
        if package != home and not are_linked(design, (package, home)):
            if package == ref:
                package = free_name([*design.packages, *names], "RT")
                names.append(package)
                edits.append(set_parameter(ref, "package", package))
            edits.append(link((home, package)))
    return edits


def law_key(requirement: Requirement) -> str:
    """Key of a requirement's law."""
    return join_key(("requirements", requirement.name, "law"))
