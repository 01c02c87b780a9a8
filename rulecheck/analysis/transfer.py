"""The computed transfer against the law of a requirement, and potentiometers that trim it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..devices.constants import Array, BoolArray
from ..errors import LawError
from ..units import dimension_of
from .conditions import Conditions, Row, above_cutoff, typical_row

if TYPE_CHECKING:
    from ..design.model import Design, Requirement
    from .operating_points import OperatingPoints

EXPONENT_STEP = 1e-3
TRIM_POSITIONS = 41
TRIM_ROUNDS = 12
FINEST_TRIM = 1e-12

Solver = Callable[[Conditions], "OperatingPoints"]


@dataclass(frozen=True)
class Transfer:
    """Output of one requirement against its law; arrays over conditions.

    Attributes
    ----------
    output, law, error : ndarray
        In output units; error is output - law.
    allowed : ndarray
        What the accuracy allows.
    judged : ndarray of bool
        Inside the requirement's range, above the cutoffs, potentiometers at their set position, converged.
    exponent, law_exponent : mapping of str to ndarray
        ``d ln|y|/d ln|x|`` of output and of law, by input.
    """

    requirement: Requirement
    conditions: Conditions
    output: Array
    law: Array
    error: Array
    allowed: Array
    judged: BoolArray
    exponent: Mapping[str, Array]
    law_exponent: Mapping[str, Array]


def law_values(requirement: Requirement, points: OperatingPoints) -> Array:
    """The law at each condition, shape (conditions,), in output units."""
    return _law(requirement, points.conditions, points)


def _law(requirement: Requirement, conditions: Conditions, points: OperatingPoints) -> Array:
    law, design = requirement.law, points.design
    if law is None:
        return np.full(conditions.size, np.nan)
    known: dict[str, Any] = dict(requirement.constants)
    for name in law.names:
        if name in known:
            continue
        net = design.nets.get(name)
        reference = net is not None and net.role in ("reference", "supply")
        known[name] = points.voltage(name) if reference else conditions.values[name]
    with np.errstate(all="ignore"):  # outside its domain a law is NaN, which is then not judged
        return np.broadcast_to(law.evaluate(known), (conditions.size,))


def compare(requirement: Requirement, points: OperatingPoints, solver: Solver, typical: Row) -> Transfer:
    """Output against law at all conditions.

    Parameters
    ----------
    requirement : Requirement
        With a law.
    points : OperatingPoints
    solver : callable
        Gives operating points at other conditions, for the local exponents.
    typical : dict of str to float
        Where the potentiometers are set, among others.

    Returns
    -------
    Transfer
    """
    output = points.voltage(requirement.output)
    law = law_values(requirement, points)
    names = [n for n in points.design.inputs if requirement.law is not None and n in requirement.law.names]
    exponents = {n: _exponents(requirement, points, solver, n) for n in names}
    return Transfer(
        requirement=requirement,
        conditions=points.conditions,
        output=output,
        law=law,
        error=output - law,
        allowed=requirement.absolute + requirement.reading * np.abs(law),
        judged=judged(requirement, points, typical),
        exponent={n: e[0] for n, e in exponents.items()},
        law_exponent={n: e[1] for n, e in exponents.items()},
    )


def dimension_fault(design: Design, requirement: Requirement) -> LawError | None:
    """What is wrong with the dimensions of a requirement's law, if anything: it must be in volts, as its output is.

    A law that is not means nothing, and neither does an accuracy that rests on it.
    """
    law = requirement.law
    if law is None:
        return None
    names = {name: dimension_of(source.unit) for name, source in design.inputs.items()}
    names |= {n: dimension_of("V") for n, net in design.nets.items() if net.role in ("reference", "supply")}
    names |= {r: dimension_of("1") for r, p in design.parts.items() if p.kind == "potentiometer"}
    names |= {"ambient": dimension_of("K"), **requirement.constant_dimensions}
    try:
        law.check(dimension_of("V"), names, requirement.constants)
    except LawError as fault:
        return fault
    return None


def judged(requirement: Requirement, points: OperatingPoints, typical: Row) -> BoolArray:
    """Conditions at which a requirement asks its law."""
    design, conditions = points.design, points.conditions
    inside = points.converged.copy()
    for name, source in design.inputs.items():
        x = conditions.values[name]
        low, high = requirement.range.get(name, (source.low, source.high))
        slack = 1e-9 * max(abs(low), abs(high))
        inside &= (x >= low - slack) & (x <= high + slack)
        inside &= above_cutoff(source, x)
    for ref, part in design.parts.items():
        if part.kind == "potentiometer":
            inside &= conditions.values[ref] == typical[ref]
    return inside


def _exponents(requirement: Requirement, points: OperatingPoints, solver: Solver, name: str) -> tuple[Array, Array]:
    """Local exponents of output and law in one input, by central difference in its logarithm."""
    x = points.conditions.values[name]
    if not np.any(x):
        return np.full(x.shape, np.nan), np.full(x.shape, np.nan)
    sides = []
    for step in (EXPONENT_STEP, -EXPONENT_STEP):
        moved = Conditions({**points.conditions.values, name: x * np.exp(step)})
        there = solver(moved)
        sides.append((there.voltage(requirement.output), _law(requirement, moved, there)))
    (up, law_up), (down, law_down) = sides
    with np.errstate(all="ignore"):
        ratio = [np.log(np.abs(a / b)) / (2 * EXPONENT_STEP) for a, b in ((up, down), (law_up, law_down))]
    return np.where(x == 0, np.nan, ratio[0]), np.where(x == 0, np.nan, ratio[1])


def trim_positions(design: Design, solver: Solver) -> dict[str, float]:
    """Positions of the potentiometers that adjust a requirement: error nulled in the middle of its inputs.

    The position is searched between the ends of its spread at typical ambient; where the error
    does not change sign it is the end that comes nearest.

    Parameters
    ----------
    design : Design
    solver : callable
        Operating points at conditions.

    Returns
    -------
    dict of str to float
        By potentiometer reference.
    """
    set_to: dict[str, float] = {}
    for ref, part in design.parts.items():
        if part.kind == "potentiometer" and part.adjusts in design.requirements:
            requirement = design.requirements[part.adjusts]
            if requirement.law is not None:
                set_to[ref] = _null(design, requirement, ref, solver, set_to)
    return set_to


def _null(design: Design, requirement: Requirement, ref: str, solver: Solver, others: Mapping[str, float]) -> float:
    spread = design.parts[ref].position
    low, high = spread.min, spread.max
    if low == high:
        low, high = 0.0, 1.0
    best = float(spread.typ)
    for _ in range(TRIM_ROUNDS):  # each round narrows the span to one cell of the last
        positions = np.linspace(low, high, TRIM_POSITIONS)
        error = trim_error(design, requirement, {**others, ref: positions}, solver)
        if not np.isfinite(error).any():
            break
        best = float(positions[np.nanargmin(np.abs(error))])
        sign = np.flatnonzero(np.diff(np.sign(error)) != 0)
        if not sign.size or high - low < FINEST_TRIM:
            break
        low, high = positions[sign[0]], positions[sign[0] + 1]
    return best


def trim_error(
    design: Design, requirement: Requirement, positions: Mapping[str, Array | float], solver: Solver
) -> Array:
    """Error of a requirement in the middle of its inputs at typ, for potentiometers at `positions`."""
    size = max(np.size(p) for p in positions.values())
    row = {**typical_row(design), **{n: _middle(r) for n, r in requirement.range.items()}, **positions}
    conditions = Conditions({n: np.broadcast_to(np.asarray(v, dtype=float), (size,)) for n, v in row.items()})
    points = solver(conditions)
    return points.voltage(requirement.output) - law_values(requirement, points)


def _middle(ends: tuple[float, float]) -> float:
    low, high = ends
    wide = low * high > 0 and max(high / low, low / high) >= 10
    return float(np.sign(low) * np.sqrt(low * high)) if wide else (low + high) / 2
