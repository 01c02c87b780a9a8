"""The curve of a piece of evidence over one of the conditions it was computed at."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from rulecheck.analysis.conditions import Conditions
    from rulecheck.analysis.review import Review
    from rulecheck.findings import Evidence, Finding

Array = np.ndarray[Any, np.dtype[Any]]
LEAST_POINTS = 3


@dataclass(frozen=True)
class Curve:
    """A figure over a quantity of the conditions.

    Attributes
    ----------
    over : str
        Name of the quantity on the abscissa.
    x, y : ndarray
    worst : int
        Index of the worst point.
    held : mapping of str to float
        The other conditions, all of them held; empty where at each abscissa the worst of all conditions is drawn.
    """

    over: str
    x: Array
    y: Array
    worst: int
    held: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Scenario:
    """A fault scenario in words and its figure."""

    words: str
    value: float


@dataclass(frozen=True)
class Grids:
    """The conditions that rules give figures over.

    Attributes
    ----------
    review, faults, ends : Conditions
        The review grid, the fault scenarios, the ends of the inputs' ranges.
    """

    review: Conditions
    faults: Conditions
    ends: Conditions

    @classmethod
    def of(cls, review: Review) -> Grids:
        """The conditions of a review."""
        from rulecheck.analysis.conditions import end_conditions, fault_scenarios

        design, typical = review.design, review.typical
        return cls(review.conditions, fault_scenarios(design, typical), end_conditions(design, typical))

    def under(self, finding: Finding, evidence: Evidence) -> Conditions | None:
        """The conditions that a figure is over, or None where they are none of these."""
        if evidence.over is None:
            return None
        candidates = (self.faults,) if finding.scenario else (self.review, self.ends)
        return next((grid for grid in candidates if grid.size == np.size(evidence.over)), None)


def worst_index(finding: Finding, evidence: Evidence, conditions: Conditions) -> int:
    """Index of the condition that a finding is worst at; that of the worst figure where it does not say."""
    figure = np.asarray(evidence.over, float)
    if finding.conditions and set(finding.conditions) == set(conditions.values):
        same = np.all([conditions.values[name] == value for name, value in finding.conditions.items()], axis=0)
        same &= np.isfinite(figure)
        if same.any():
            return int(np.flatnonzero(same)[0])
    if not np.isfinite(figure).any():
        return 0
    return int(np.nanargmin(figure) if evidence.relation in (">", ">=") else np.nanargmax(figure))


def curves(finding: Finding, evidence: Evidence, conditions: Conditions) -> list[Curve]:
    """A curve for each quantity that varies, that with most points through the worst condition first.

    Parameters
    ----------
    finding : Finding
    evidence : Evidence
        With `over`.
    conditions : Conditions
        Of `over`.
    """
    figure = np.asarray(evidence.over, float)
    worst = worst_index(finding, evidence, conditions)
    found = []
    for name, values in conditions.values.items():
        if len(np.unique(values)) >= LEAST_POINTS:
            curve = _through(name, figure, conditions, worst) or _envelope(name, figure, conditions, evidence)
            if curve is not None:
                found.append(curve)
    return sorted(found, key=lambda curve: (not curve.held, curve.over == "ambient", -len(curve.x)))


def _through(name: str, figure: Array, conditions: Conditions, worst: int) -> Curve | None:
    """The curve through the worst condition with all else held; None where it has too few points."""
    others = {other: values for other, values in conditions.values.items() if other != name}
    same = np.isfinite(figure)
    for values in others.values():
        same &= values == values[worst]
    index = np.flatnonzero(same)
    if len(index) < LEAST_POINTS or worst not in index:
        return None
    index = index[np.argsort(conditions.values[name][index], kind="stable")]
    held = {other: float(values[worst]) for other, values in others.items()}
    at = int(np.flatnonzero(index == worst)[0])
    return Curve(name, conditions.values[name][index], figure[index], at, held)


def _envelope(name: str, figure: Array, conditions: Conditions, evidence: Evidence) -> Curve | None:
    """The worst figure at each value of a quantity."""
    known = np.isfinite(figure)
    x, group = np.unique(conditions.values[name][known], return_inverse=True)
    if len(x) < LEAST_POINTS:
        return None
    least = evidence.relation in (">", ">=")
    y = np.full(len(x), np.inf if least else -np.inf)
    (np.minimum if least else np.maximum).at(y, group, figure[known])
    return Curve(name, x, y, int(np.argmin(y) if least else np.argmax(y)), {})


def scenarios(evidence: Evidence, conditions: Conditions) -> list[Scenario]:
    """The figure in each fault scenario, the worst first; of those with equal words the worst."""
    sign = 1 if evidence.relation in (">", ">=") else -1
    worst: dict[str, float] = {}
    for words, value in zip(conditions.scenario or (), np.asarray(evidence.over, float), strict=True):
        if np.isfinite(value) and (words not in worst or sign * value < sign * worst[words]):
            worst[words] = float(value)
    return sorted((Scenario(words, value) for words, value in worst.items()), key=lambda s: sign * s.value)
