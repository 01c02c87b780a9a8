"""Error budget of a requirement: what each spread costs at each condition, and their totals."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array, BoolArray
from .operating_points import OperatingPoints
from .sensitivity import Sensitivity, touches
from .spreads import deviations, in_force
from .transfer import judged, law_values
from .trims import Trims

if TYPE_CHECKING:
    from ..design.model import Requirement
    from .conditions import Conditions
    from .review import Review

LEAST_SHARE = 1e-6
"""Of the worst case: what is less is not shown."""


@dataclass(frozen=True)
class Contribution:
    """What the spread of one parameter costs a requirement; arrays over conditions.

    Attributes
    ----------
    parameter : str
        Key path.
    slope : ndarray
        Of the error in the parameter, trims following [V a unit of the parameter].
    half : ndarray
        Half-spread; 0 where the condition states the parameter.
    value : ndarray
        Slope times half-spread, signed [V].
    """

    parameter: str
    slope: Array
    half: Array
    value: Array


@dataclass(frozen=True)
class Budget:
    """Error budget of one requirement; arrays over conditions, NaN where not converged.

    Attributes
    ----------
    requirement : Requirement
    conditions : Conditions
    contributions : tuple of Contribution
        The largest at the worst condition first.
    worst_case : ndarray [V]
        Sum of the magnitudes.
    rss : ndarray [V]
        Root of the sum of the squares.
    error, law, allowed : ndarray [V]
        Nominal error; the law; what the accuracy allows.
    judged : ndarray of bool
        Where the requirement asks its law.
    input_slope : mapping of str to ndarray
        Slope of the output in each input [V/V or V/A].
    worst : int, optional
        The condition at which abs(error) + worst case is the largest share of what is allowed; without an accuracy,
        at which the worst case is the largest. None where nothing is judged.
    """

    requirement: Requirement
    conditions: Conditions
    contributions: tuple[Contribution, ...]
    worst_case: Array
    rss: Array
    error: Array
    law: Array
    allowed: Array
    judged: BoolArray
    input_slope: Mapping[str, Array]
    worst: int | None

    def of_reading(self, values: Array) -> Array:
        """Values in output units as a share of the law; NaN where that is zero."""
        return _over(values, self.law)

    def at_input(self, values: Array, name: str) -> Array:
        """Values in output units referred to an input, in its unit; NaN where the output does not follow it."""
        return _over(values, self.input_slope[name])

    def shown(self, index: int | None = None) -> tuple[Contribution, ...]:
        """Contributions worth showing at a condition (default the worst), the largest first."""
        at = self.worst if index is None else index
        if at is None:
            return ()
        kept = [c for c in self.contributions if abs(c.value[at]) > LEAST_SHARE * self.worst_case[at]]
        return tuple(sorted(kept, key=lambda c: -abs(c.value[at])))


def _over(values: Array, scale: Array) -> Array:
    with np.errstate(all="ignore"):
        return np.where(scale != 0, values / np.abs(scale), np.nan)


def budget(review: Review, requirement: Requirement, points: OperatingPoints | None = None) -> Budget:
    """Error budget of a requirement at the review conditions.

    Parameters
    ----------
    review : Review
    requirement : Requirement
        With a law, for figures against it; without one the budget is that of the output.
    points : OperatingPoints, optional
        Of this design, in place of those of the review.

    Returns
    -------
    Budget
    """
    points = points or review.operating_points
    sensitivity = Sensitivity(requirement, points)
    trims = Trims(review, sensitivity)
    found = []
    for deviation in deviations(review.design):
        if touches(requirement, points, deviation):
            slope = sensitivity.of(deviation) + trims.following(deviation)
            half = deviation.half * in_force(review.design, deviation, points.conditions)
            found.append(Contribution(deviation.name, slope, half, slope * half))
    law, blank = law_values(requirement, points), np.where(points.converged, 0.0, np.nan)
    magnitudes = [np.abs(c.value) for c in found]
    worst_case = np.sum([blank, *magnitudes], axis=0)
    error = points.voltage(requirement.output) - law
    allowed = requirement.absolute + requirement.reading * np.abs(law)
    asked = judged(requirement, points, review.typical)
    worst = _worst(np.abs(error) + worst_case if requirement.has_accuracy else worst_case, allowed, asked)
    at = 0 if worst is None else worst
    return Budget(
        requirement=requirement,
        conditions=points.conditions,
        contributions=tuple(sorted(found, key=lambda c: -np.nan_to_num(abs(c.value[at])))),
        worst_case=worst_case,
        rss=np.sqrt(np.sum([blank, *(m**2 for m in magnitudes)], axis=0)),
        error=error,
        law=law,
        allowed=allowed,
        judged=asked,
        input_slope={name: sensitivity.of_input(name) for name in review.design.inputs},
        worst=worst,
    )


def _worst(total: Array, allowed: Array, asked: BoolArray) -> int | None:
    with np.errstate(all="ignore"):
        ratio = total / allowed if (allowed > 0).any() else total
    ratio = np.where(asked & np.isfinite(ratio), ratio, np.nan)
    return int(np.nanargmax(ratio)) if np.isfinite(ratio).any() else None
