"""Samples: a circuit solved again with its parameters drawn at random within their spreads."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..circuit.islands import ideal_nets
from ..devices.constants import Array, BoolArray, IntArray
from ..errors import AnalysisError
from .conditions import Conditions
from .islands import Piece, cut, solve_pieces
from .operating_points import OperatingPoints
from .queries import at_typical
from .sensitivity import touches
from .spreads import Deviation, deviations, in_force, moved, of_supply
from .transfer import judged, law_values, trim_error
from .trims import null, trims_among

if TYPE_CHECKING:
    from ..design.model import Design, Requirement
    from .review import Review
    from .values import Overrides

MOST_BYTES = 32 * 2**20
"""Bound of the matrices that a batch of samples works on; outputs and laws of all samples are kept beside them."""
MATRICES = 6
"""Matrices of the nodal equations that Newton's method holds for each condition at a time."""
CONFIDENCE = 1.959963984540054
"""Standard deviations to either side that hold 95 % of a normal distribution."""


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
        return np.isnan(self.output).sum(axis=0)

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


def wilson(hits: Any, count: int) -> Share:  # noqa: ANN401  # a number or an array of them
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
    law = law_values(requirement, points)
    error = np.abs(points.voltage(requirement.output) - law)
    with np.errstate(all="ignore"):
        ratio = error / (requirement.absolute + requirement.reading * np.abs(law))
    asked = judged(requirement, points, review.typical)
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
    once. Trims are set anew in every sample, at typical supplies. A seed gives the same draws whatever the batches,
    and all samples start from the nominal solution.

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
    conditions = review.conditions.take(rows)
    sampler = _Sampler(review, requirement, conditions, count, most_bytes)
    output, law = np.empty((2, count, len(rows)))
    random, done = np.random.default_rng(seed), 0
    for found, asked in sampler.run(random):
        new = min(len(found), count - done)
        output[done : done + new], law[done : done + new] = found[:new], asked[:new]
        done += new
        if progress is not None:
            progress(done)
    error = output - law
    with np.errstate(invalid="ignore"):
        inside = np.abs(error) <= requirement.absolute + requirement.reading * np.abs(law)
    return Samples(requirement, conditions, rows, seed, output, error, inside)


class _Batch:
    """One piece at conditions near nominal ones, from whose solution every solve starts."""

    def __init__(self, design: Design, piece: Piece, nominal: Conditions) -> None:
        self.design, self.piece = design, piece
        self.cache: dict[Any, Any] = {}
        self._solve(nominal, {}, self.cache)

    def solve(self, overrides: Overrides, conditions: Conditions) -> OperatingPoints:
        return self._solve(conditions, overrides, dict(self.cache))

    def _solve(self, conditions: Conditions, overrides: Overrides, cache: dict[Any, Any]) -> OperatingPoints:
        placed = solve_pieces(
            (self.piece,), conditions, with_clamps=False, overrides=overrides, temperatures={}, cache=cache
        )
        return OperatingPoints(self.design, conditions, placed)


class _Sampler:
    """Batches of samples of one requirement, all of one size."""

    def __init__(
        self, review: Review, requirement: Requirement, conditions: Conditions, count: int, most_bytes: int
    ) -> None:  # fmt: skip
        self.review, self.design, self.requirement = review, review.design, requirement
        self.points_each = conditions.size
        self.piece = _piece_of(review, requirement.output)
        self.deviations = [
            d for d in deviations(self.design) if touches(requirement, review.operating_points, d)
        ]  # fmt: skip
        unknowns = max(p.solution.network.unknowns for p in review.operating_points.placed)
        each = MATRICES * 8 * (unknowns + 1) ** 2 * self.points_each
        self.batches = -(-count // max(1, most_bytes // each))
        self.size = -(-count // self.batches)
        self.conditions = conditions.take(np.tile(np.arange(self.points_each), self.size))
        self.force = [in_force(self.design, d, self.conditions) for d in self.deviations]
        self.trims = trims_among(self.design, self.piece.design.parts)
        self.trim_batches: dict[str, _Batch] = {}

    def run(self, random: np.random.Generator) -> Iterator[tuple[Array, Array]]:
        """Outputs and laws of batch after batch, shape (samples, conditions)."""
        batch = _Batch(self.design, self.piece, self.conditions)
        low = np.array([d.low for d in self.deviations])
        high = np.array([d.high for d in self.deviations])
        for _ in range(self.batches):
            amounts = low + (high - low) * random.random((self.size, len(low)))
            positions = self._set_trims(amounts)
            everywhere = np.repeat(amounts, self.points_each, axis=0).T
            moves = [(d.moves, a * f) for d, a, f in zip(self.deviations, everywhere, self.force, strict=True)]
            overrides, conditions = moved(self.design, self.conditions, moves)
            points = batch.solve(overrides, _with(conditions, positions, self.points_each))
            shape = (self.size, self.points_each)
            law = law_values(self.requirement, points)
            yield points.voltage(self.requirement.output).reshape(shape), law.reshape(shape)

    def _set_trims(self, amounts: Array) -> dict[str, Array]:
        """Positions of the trims in each sample, set one after the other."""
        steady = [(d, a) for d, a in zip(self.deviations, amounts.T, strict=True) if not of_supply(self.design, d)]
        positions: dict[str, Array] = {}
        for ref in self.trims:
            spread = self.design.parts[ref].position
            low, high = (spread.min, spread.max) if spread.min < spread.max else (0.0, 1.0)
            start = np.full(self.size, self.review.typical[ref])
            positions[ref] = null(self._trim_error(ref, steady, positions), start, low, high)
        return positions

    def _trim_error(
        self, ref: str, amounts: list[tuple[Deviation, Array]], others: dict[str, Array]
    ) -> Callable[[Array], Array]:
        """Error that a trim nulls, as a function of its positions in the samples."""
        requirement = self.design.requirements[self.design.parts[ref].adjusts]

        def solver(conditions: Conditions) -> OperatingPoints:
            if ref not in self.trim_batches:
                self.trim_batches[ref] = _Batch(self.design, self.piece, conditions)
            overrides, changed = moved(self.design, conditions, [(d.moves, a) for d, a in amounts])
            return self.trim_batches[ref].solve(overrides, changed)

        return lambda here: trim_error(self.design, requirement, {**others, ref: here}, solver)


def _with(conditions: Conditions, positions: dict[str, Array], repeats: int) -> Conditions:
    repeated = {ref: np.repeat(values, repeats) for ref, values in positions.items()}
    return Conditions({**conditions.values, **repeated}, conditions.scenario, conditions.absent)


def _piece_of(review: Review, net: str) -> Piece:
    """The piece in which a net is free to move, at its own place in the design."""
    if net in ideal_nets(review.design):
        raise AnalysisError(f"net {net} is held by an ideal source", "there is nothing to sample")
    pieces = cut(review.design, review.circuit, frozenset(review.design.parts))
    found = [piece for piece in pieces if net in piece.copies[0].island.nets]
    if not found:
        raise AnalysisError(f"no part stands on net {net}", "there is nothing to sample")
    return found[0]
