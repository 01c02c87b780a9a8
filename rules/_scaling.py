"""Resistors that take an error away: found by trial, their values by solving again until a preferred one does."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np

from rulecheck.api import OperatingPoints, Remedy, Review, format_quantity, nearest

from ._edits import set_parameter

SERIES = "E96"
TRIAL_CHANGE = 0.01
MOST_TRIED = 4
MOST_FOUND = 2
ROUNDS = 4

Residual = Callable[[OperatingPoints], np.ndarray]


def scalings(review: Review, residual: Residual, level: Residual | None = None) -> list[Remedy]:
    """Single resistors with the preferred value that brings every residual to within 1.

    Parameters
    ----------
    review : Review
    residual : callable
        What is wrong at operating points of the review conditions, a vector in parts of what is allowed.
    level : callable, optional
        The output in the same parts: where it goes with a power of a resistor, that power is made use of.
    """
    if not review.seeks_remedies:
        return []
    wrong = residual(review.operating_points)
    options: list[tuple[float, str, np.ndarray]] = []
    most = np.abs(wrong).max()
    for ref, part in review.design.parts.items():
        if most > 1 and part.kind == "resistor" and part.value.typ > 0:
            moved = residual(_changed(review, ref, part.value.typ * (1 + TRIAL_CHANGE)))
            slope = (moved - wrong) / np.log1p(TRIAL_CHANGE)
            left = np.abs(wrong + slope * _step(slope, wrong)).max()
            if left < most / 2:
                options.append((float(left), ref, slope))
    found: list[Remedy] = []
    for _, ref, slope in sorted(options, key=lambda option: option[0])[:MOST_TRIED]:
        for value in _value(review, ref, slope, residual, level):
            words = format_quantity(value, "ohm", 5)
            found.append(Remedy(f"change {ref} to {words}", [set_parameter(ref, "value", words)]))
        if len(found) == MOST_FOUND:
            break
    return found or [Remedy("no single resistor takes the error away: look at currents, temperatures and loops first")]


def _value(review: Review, ref: str, slope: np.ndarray, residual: Residual, level: Residual | None) -> Iterator[float]:
    """The preferred value that does, if any."""
    value, points = review.design.parts[ref].value.typ, review.operating_points
    wrong = residual(points)
    for _ in range(ROUNDS):
        ratio = _ratio(_step(slope, wrong), _power(slope, level(points)) if level else 0.0)
        other = nearest(value * ratio, SERIES)
        if other == value or not np.isfinite(ratio):
            return
        points = _changed(review, ref, other)
        there = residual(points)
        if np.abs(there).max() <= 1:
            yield other
            return
        slope, value, wrong = (there - wrong) / np.log(other / value), other, there


def _changed(review: Review, ref: str, value: float) -> OperatingPoints:
    return review.re_solve(values={(ref, "value"): value})


def _step(slope: np.ndarray, wrong: np.ndarray) -> float:
    """Step of the logarithm that leaves the least squares."""
    size = float(slope @ slope)
    return -float(slope @ wrong) / size if size > 0 else 0.0


def _power(slope: np.ndarray, level: np.ndarray) -> float:
    """Power of the resistor with which the output goes."""
    size = float(level @ level)
    return float(slope @ level) / size if size > 0 else 0.0


def _ratio(step: float, power: float) -> float:
    """Ratio of values at which an output that goes with a power of the value has moved by `step` times its slope."""
    grown = 1 + power * step
    return float(grown ** (1 / power) if abs(power) > 1e-3 and grown > 0 else np.exp(np.clip(step, -7, 7)))
