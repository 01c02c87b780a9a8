"""Samples: a circuit solved again with its parameters drawn at random within their spreads."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..devices.constants import Array, BoolArray, IntArray
from ..errors import AnalysisError
from .batches import Batch
from .budget import trims_among
from .queries import at_typical
from .sensitivity import Sensitivity
from .spreads import Deviation, deviations, in_force, of_supply
from .transfer import judged, law_values
from .trims import null

if TYPE_CHECKING:
    from ..design.model import Requirement
    from .conditions import Conditions
    from .review import Review

MOST_BYTES = 32 * 2**20
"""Bound of the matrices that a batch of samples works on; the outputs of all samples are kept beside them."""
MATRICES = 6
"""Matrices of the nodal equations that Newton's method holds for each condition at a time."""
CONFIDENCE = 1.959963984540054
"""Standard deviations of a normal distribution that hold 95 % of it."""


@dataclass(frozen=True)
class Share:
    """A share of the samples, with the 95 % confidence interval of what it estimates (Wilson's score interval).

    Attributes
    ----------
    value, low, high : ndarray
    """

    value: Array
    low: Array
    high: Array


@dataclass(frozen=True)
class Samples:
    """Outputs of a requirement over samples of the design.

    Attributes
    ----------
    requirement : Requirement
    conditions : Conditions
        Those sampled.
    rows : ndarray of int, shape (conditions,)
        Their places among the review conditions.
    seed : int
    output, error : ndarray, shape (samples, conditions) [V]
        Output, and output less law; NaN where a sample has no operating point.
    inside : ndarray of bool, shape (samples, conditions)
        Whether the accuracy holds; a sample without an operating point is outside.
    """

    requirement: Requirement
    conditions: Conditions
    rows: IntArray
    seed: int
    output: Array
    error: Array
    inside: BoolArray

    @property
    def count(self) -> int:
        """Number of samples."""
        return len(self.error)

    @property
    def failed(self) -> IntArray:
        """Number of samples without an operating point, by condition."""
        return np.isnan(self.error).sum(axis=0)

    def mean(self, values: Array | None = None) -> Array:
        """Mean by condition, of the error or of `values` of its shape."""
        return self._over_samples(np.mean, values)

    def std(self, values: Array | None = None) -> Array:
        """Standard deviation by condition, of the error or of `values` of its shape."""
        return self._over_samples(lambda column: np.std(column, ddof=1) if column.size > 1 else np.nan, values)

    def quantile(self, q: float, values: Array | None = None) -> Array:
        """Quantile by condition, of the error or of `values` of its shape; `q` from 0 to 1."""
        return self._over_samples(lambda column: np.quantile(column, q), values)

    def fraction_inside(self) -> Share:
        """Share of the samples that are inside the accuracy, by condition."""
        return wilson(self.inside.sum(axis=0), self.count)

    def fraction_of_units(self) -> Share:
        """Share of the samples that are inside the accuracy at all sampled conditions."""
        return wilson(self.inside.all(axis=1).sum(), self.count)

    def over_review(self, values: Array, size: int) -> Array:
        """Figures by sampled condition laid out over all `size` review conditions, NaN between them."""
        laid = np.full(size, np.nan)
        laid[self.rows] = values
        return laid

    def _over_samples(self, figure: Callable[[Array], Any], values: Array | None) -> Array:
        columns = (self.error if values is None else values).T
        known = [column[np.isfinite(column)] for column in columns]
        return np.array([figure(column) if column.size else np.nan for column in known], dtype=float)


def wilson(hits: Array | IntArray | int, count: int) -> Share:
    """Share of `hits` in `count` trials with its 95 % confidence interval.

    Parameters
    ----------
    hits : int or ndarray of int
    count : int

    Returns
    -------
    Share
    """
    share = np.asarray(hits) / count
    z2 = CONFIDENCE**2 / count
    middle = (share + z2 / 2) / (1 + z2)
    reach = np.sqrt(z2 * (share * (1 - share) + z2 / 4)) / (1 + z2)
    return Share(share, np.maximum(middle - reach, 0.0), np.minimum(middle + reach, 1.0))


def sampled_rows(review: Review, requirement: Requirement) -> IntArray:
    """Review conditions that are sampled: the inputs' grid at typ ambient and supplies, and the worst nominal point.

    Raises
    ------
    AnalysisError
        Where the requirement asks its law at no condition.
    """
    points = review.operating_points
    asked = judged(requirement, points, review.typical)
    law = law_values(requirement, points)
    error = np.abs(points.voltage(requirement.output) - law)
    with np.errstate(all="ignore"):
        ratio = error / (requirement.absolute + requirement.reading * np.abs(law))
    ratio = np.where(asked, ratio if requirement.has_accuracy else error, np.nan)
    if not np.isfinite(ratio).any():
        raise AnalysisError(f"requirement {requirement.name} is judged at no condition", "there is nothing to sample")
    chosen = asked & at_typical(review, [n for n in review.conditions.values if n not in review.design.inputs])
    chosen[np.nanargmax(ratio)] = True
    return np.flatnonzero(chosen)


def draw(
    review: Review, requirement: Requirement, count: int, seed: int, *, rows: IntArray | None = None,
    progress: Callable[[int], None] | None = None, most_bytes: int = MOST_BYTES,
) -> Samples:  # fmt: skip
    """Draw parameters within their spreads and solve the circuit of a requirement's output with them.

    Deviations are uniform between their limits, each by itself; what parts share (see `spreads.deviations`) is drawn
    once. Trims are set anew in every sample, at typical supplies. All samples start from the nominal solution, in
    batches of a fixed size, so that a seed gives the same figures however the work is shared out.

    Parameters
    ----------
    review : Review
    requirement : Requirement
        With a law.
    count : int
    seed : int
    rows : ndarray of int, optional
        Review conditions to sample, default `sampled_rows`.
    progress : callable, optional
        Told the number of samples done after each batch; what it raises ends the work.
    most_bytes : int
        Bound of the matrices of a batch.

    Returns
    -------
    Samples
    """
    rows = sampled_rows(review, requirement) if rows is None else rows
    sampler = _Sampler(review, requirement, rows, count, most_bytes)
    outputs, laws = [], []
    done = 0
    for output, law in sampler.run(np.random.default_rng(seed)):
        outputs.append(output)
        laws.append(law)
        done = min(done + len(output), count)
        if progress is not None:
            progress(done)
    output, law = np.concatenate(outputs)[:count], np.concatenate(laws)[:count]
    error = output - law
    with np.errstate(invalid="ignore"):
        inside = np.abs(error) <= requirement.absolute + requirement.reading * np.abs(law)
    return Samples(requirement, sampler.conditions, rows, seed, output, error, inside)


class _Sampler:
    """Batches of samples of one requirement."""

    def __init__(self, review: Review, requirement: Requirement, rows: IntArray, count: int, most_bytes: int) -> None:
        self.review, self.requirement = review, requirement
        self.conditions = review.conditions.take(rows)
        sensitivity_free = Sensitivity.reach(requirement, review.operating_points)
        self.deviations = [d for d in deviations(review.design) if sensitivity_free(d)]
        batch = Batch(review, requirement.output)
        size = MATRICES * 8 * (batch.unknowns + 1) ** 2 * len(rows)
        batches = -(-count // max(1, most_bytes // size))
        self.in_batch = -(-count // batches)  # of equal size, so that all start from one nominal solution
        self.batches = batches
