"""Resistors that take an error away: found by trial, their values by solving again until a preferred one does."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from rulecheck.api import OperatingPoints, Remedy, Review, format_quantity, nearest

from ._edits import set_parameter

SERIES = "E96"
TRIAL_STEP = 0.01
"""Of the logarithm of a value, to see what it does."""
LEAST_POWER = 0.01
MOST_TRIED = 4
MOST_FOUND = 3
ROUNDS = 3
LARGEST_STEP = 7.0
"""Of the logarithm of a value: a factor of a thousand, which is a slip of a prefix."""

Figure = Callable[[OperatingPoints], np.ndarray]


def scalings(review: Review, residual: Figure) -> list[Remedy]:
    """Single resistors with the preferred value that brings a residual to within 1, the least change first.

    Parameters
    ----------
    review : Review
    residual : callable
        What is wrong at operating points of the review conditions, as a vector in parts of what is allowed; NaN where
        not judged.
    """
    if not review.seeks_remedies:
        return []
    wrong = residual(review.operating_points)
    most = _largest(wrong)
    options: list[tuple[float, float, str]] = []
    for ref, part in review.design.parts.items():
        if most > 1 and part.kind == "resistor" and part.value.typ > 0:
            slope = (residual(_changed(review, ref, part.value.typ * np.exp(TRIAL_STEP))) - wrong) / TRIAL_STEP
            step = _step(slope, wrong)
            left = _largest(wrong + slope * step)
            if left < most / 2:
                options.append((max(left, 1.0), abs(step), ref))
    found: list[Remedy] = []
    for *_, ref in sorted(options)[:MOST_TRIED]:
        value = _value(review, ref, residual)
        if value is not None and len(found) < MOST_FOUND:
            words = format_quantity(value, "ohm", 5)
            found.append(Remedy(f"change {ref} to {words}", [set_parameter(ref, "value", words)]))
    return found or [Remedy("no single resistor takes the error away: look at currents, temperatures and loops first")]


def _value(review: Review, ref: str, residual: Figure) -> float | None:
    """The preferred value that does, if any, with no condition lost that was judged before."""
    value = review.design.parts[ref].value.typ
    wrong = residual(review.operating_points)
    judged = np.isfinite(wrong)
    for _ in range(ROUNDS):
        other = nearest(value * _ratio(review, ref, value, residual, wrong), SERIES)
        if other == value:
            break
        value, wrong = other, residual(_changed(review, ref, other))
        if _largest(wrong) <= 1 and np.isfinite(wrong[judged]).all():
            return value
    return None


def _changed(review: Review, ref: str, value: float) -> OperatingPoints:
    return review.re_solve(values={(ref, "value"): value})


def _ratio(review: Review, ref: str, value: float, residual: Figure, here: np.ndarray) -> float:
    """Ratio by which to change a value: a residual that goes with any power of it, and a constant, is nulled at once.

    The power is that of curvature over slope, in the logarithm of the value.
    """
    up, down = (residual(_changed(review, ref, value * np.exp(step))) for step in (TRIAL_STEP, -TRIAL_STEP))
    slope, curvature = (up - down) / (2 * TRIAL_STEP), (up - 2 * here + down) / TRIAL_STEP**2
    step, power = _step(slope, here), -_step(slope, curvature)
    grown = 1 + power * step
    logarithm = np.log(grown) / power if abs(power) > LEAST_POWER and grown > 0 else step
    return float(np.exp(np.clip(logarithm, -LARGEST_STEP, LARGEST_STEP)))


def _largest(residual: np.ndarray) -> float:
    """Largest magnitude, infinite where nothing is known."""
    known = np.abs(residual[np.isfinite(residual)])
    return float(known.max()) if known.size else np.inf


def _step(slope: np.ndarray, wrong: np.ndarray) -> float:
    """Step along a slope that leaves the least squares."""
    known = np.isfinite(slope) & np.isfinite(wrong)
    size = float(slope[known] @ slope[known])
    return -float(slope[known] @ wrong[known]) / size if size > 0 else 0.0
