"""Resistors that take an error away: found by trial, their values by solving again until a preferred one does."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from rulecheck.api import OperatingPoints, Remedy, Review, format_quantity, nearest

from ._edits import set_parameter

SERIES = "E96"
TRIAL_STEP = 0.01
"""Of the logarithm of a value, to see what it does."""
MOST_TRIED = 4
MOST_FOUND = 3
ROUNDS = 4
LARGEST_STEP = 7.0
"""Of the logarithm of a value: a factor of a thousand, which is a slip of a prefix."""

Figure = Callable[[OperatingPoints], np.ndarray]


def scalings(review: Review, residual: Figure, level: Figure | None = None) -> list[Remedy]:
    """Single resistors with the preferred value that brings a residual to within 1, the least change first.

    Parameters
    ----------
    review : Review
    residual : callable
        What is wrong at operating points of the review conditions, as a vector in parts of what is allowed; NaN where
        not judged.
    level : callable, optional
        The output in the same parts: where it goes with a power of a resistor, that power is made use of.
    """
    if not review.seeks_remedies:
        return []
    wrong = residual(review.operating_points)
    most = _largest(wrong)
    options: list[tuple[float, float, str, np.ndarray]] = []
    for ref, part in review.design.parts.items():
        if most > 1 and part.kind == "resistor" and part.value.typ > 0:
            moved = residual(_changed(review, ref, part.value.typ * np.exp(TRIAL_STEP)))
            slope = (moved - wrong) / TRIAL_STEP
            step = _step(slope, wrong)
            left = _largest(wrong + slope * step)
            if left < most / 2:
                options.append((max(left, 1.0), abs(step), ref, slope))
    found: list[Remedy] = []
    for *_, ref, slope in sorted(options, key=lambda option: option[:2])[:MOST_TRIED]:
        value = _value(review, ref, slope, residual, level)
        if value is not None and len(found) < MOST_FOUND:
            words = format_quantity(value, "ohm", 5)
            found.append(Remedy(f"change {ref} to {words}", [set_parameter(ref, "value", words)]))
    return found or [Remedy("no single resistor takes the error away: look at currents, temperatures and loops first")]


def _value(review: Review, ref: str, slope: np.ndarray, residual: Figure, level: Figure | None) -> float | None:
    """The preferred value that does, if any."""
    value, points = review.design.parts[ref].value.typ, review.operating_points
    wrong = residual(points)
    for _ in range(ROUNDS):
        power = -_step(level(points), slope) if level else 0.0
        other = nearest(value * _ratio(_step(slope, wrong), power), SERIES)
        if other == value:
            break
        points = _changed(review, ref, other)
        there = residual(points)
        if _largest(there) <= 1:
            return other
        slope, value, wrong = (there - wrong) / np.log(other / value), other, there
    return None


def _changed(review: Review, ref: str, value: float) -> OperatingPoints:
    return review.re_solve(values={(ref, "value"): value})


def _largest(residual: np.ndarray) -> float:
    """Largest magnitude, infinite where nothing is known."""
    known = np.abs(residual[np.isfinite(residual)])
    return float(known.max()) if known.size else np.inf


def _step(slope: np.ndarray, wrong: np.ndarray) -> float:
    """Step along a slope that leaves the least squares."""
    known = np.isfinite(slope) & np.isfinite(wrong)
    size = float(slope[known] @ slope[known])
    return -float(slope[known] @ wrong[known]) / size if size > 0 else 0.0


def _ratio(step: float, power: float) -> float:
    """Ratio of values for a step of the logarithm, of an output that goes with a power of the value."""
    grown = 1 + power * step
    logarithm = np.log(grown) / power if abs(power) > 1e-3 and grown > 0 else step
    return float(np.exp(np.clip(logarithm, -LARGEST_STEP, LARGEST_STEP)))
