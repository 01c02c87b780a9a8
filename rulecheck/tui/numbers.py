"""The numbers of a design as diagrams: error over input, margins over signal, the error budget."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from rulecheck.review.outcome import condition_units

if TYPE_CHECKING:
    from rulecheck.analysis.review import Review

Array = np.ndarray[Any, np.dtype[Any]]
MOST_BARS = 40


@dataclass(frozen=True)
class Sheet:
    """A figure over every condition of the review.

    Attributes
    ----------
    name : str
        In words.
    unit : str
    values : ndarray, shape (conditions,)
    allowed : ndarray, optional
        Largest magnitude allowed at each condition.
    """

    name: str
    unit: str
    values: Array
    allowed: Array | None = None


@dataclass(frozen=True)
class Bars:
    """An error budget at its worst condition, the largest contribution first.

    Attributes
    ----------
    totals : sequence of (words, value)
    """

    name: str
    contributions: tuple[tuple[str, float], ...]
    totals: tuple[tuple[str, float], ...]
    at: Mapping[str, float]


@dataclass(frozen=True)
class Numbers:
    """All that the screen of numbers shows."""

    values: Mapping[str, Array]
    typical: Mapping[str, float]
    inputs: tuple[str, ...]
    units: Mapping[str, str]
    transfer: tuple[Sheet, ...]
    margins: tuple[Sheet, ...]
    budgets: tuple[Bars, ...]

    @property
    def ambients(self) -> list[float]:
        """Ambient temperatures of the review [K], ascending."""
        return sorted(set(map(float, self.values["ambient"])))

    def section(self, sheet: Sheet, over: str, ambient: float) -> tuple[Array, Array, Array | None]:
        """A figure over one input, all else at its typ: abscissa, figure, what is allowed.

        Parameters
        ----------
        sheet : Sheet
        over : str
            Input.
        ambient : float
            [K].
        """
        same = self.values["ambient"] == ambient
        for name, values in self.values.items():
            if name not in (over, "ambient"):
                same = same & (values == self.typical[name])
        index = np.flatnonzero(same)
        index = index[np.argsort(self.values[over][index], kind="stable")]
        allowed = None if sheet.allowed is None else sheet.allowed[index]
        return self.values[over][index], sheet.values[index], allowed


def numbers_of(review: Review) -> Numbers:
    """Compute the numbers of a design; this takes seconds.

    Parameters
    ----------
    review : Review
    """
    return Numbers(
        values=review.conditions.values,
        typical=review.typical,
        inputs=tuple(review.design.inputs),
        units=condition_units(review.design),
        transfer=tuple(_transfer(review)),
        margins=tuple(_margins(review)),
        budgets=tuple(_budgets(review)),
    )


def _transfer(review: Review) -> list[Sheet]:
    return [
        Sheet(
            f"error of {name}", "V", np.where(transfer.judged, transfer.error, np.nan),
            transfer.allowed if transfer.requirement.has_accuracy else None,
        )
        for name, transfer in review.transfer.items()
    ]  # fmt: skip


def _margins(review: Review) -> list[Sheet]:
    loops = review.loops
    sheets = [Sheet(f"phase margin of {ref}", "deg", loops.phase_margin(ref)) for ref in loops.amplifiers]
    return [*sheets, Sheet("least damping ratio", "1", loops.least_damping)] if sheets else []


def _budgets(review: Review) -> list[Bars]:
    sheets = []
    for name, budget in review.budget.items():
        at = budget.worst
        if at is None:
            continue
        contributions = tuple((c.parameter, float(c.value[at])) for c in budget.shown(at)[:MOST_BARS])
        totals = [("nominal error", float(budget.error[at])), ("worst case", float(budget.worst_case[at])),
                  ("root-sum-square", float(budget.rss[at]))]  # fmt: skip
        if budget.requirement.has_accuracy:
            totals.append(("allowed", float(budget.allowed[at])))
        sheets.append(Bars(f"error budget of {name}", contributions, tuple(totals), budget.conditions.at(at)))
    return sheets
