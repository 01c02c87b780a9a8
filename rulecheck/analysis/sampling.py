"""The work of sampling: batches of a circuit with drawn parameters, trims set anew in each sample."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING, Any

import numpy as np

from ..devices.constants import Array
from ..errors import AnalysisError
from .conditions import Conditions
from .islands import Piece, cut, solve_pieces
from .network import build_network
from .operating_points import OperatingPoints
from .sensitivity import touches
from .spreads import Deviation, deviations, in_force, moved, of_supply
from .transfer import law_values, trim_error
from .trims import null, trims_among

if TYPE_CHECKING:
    from ..design.model import Requirement
    from .review import Review
    from .values import Overrides

MOST_BYTES = 32 * 2**20
"""Bound of the matrices that a batch works on."""
MATRICES = 6
"""Matrices of the nodal equations that Newton's method holds for each condition at a time."""

Amounts = list[tuple[Deviation, Array]]


class _Batch:
    """A piece at conditions near some nominal ones, from whose solution every solve starts."""

    def __init__(self, piece: Piece, nominal: Conditions) -> None:
        self.piece = piece
        self.cache: dict[Any, Any] = {}
        self._solve(nominal, {}, self.cache)

    def solve(self, conditions: Conditions, overrides: Overrides) -> OperatingPoints:
        """Operating points; the cache is a copy, so that nothing of one batch reaches another."""
        return self._solve(conditions, overrides, dict(self.cache))

    def _solve(self, conditions: Conditions, overrides: Overrides, cache: dict[Any, Any]) -> OperatingPoints:
        placed = solve_pieces(
            (self.piece,), conditions, with_clamps=False, overrides=overrides, temperatures={}, cache=cache
        )
        return OperatingPoints(self.piece.design, conditions, placed)


class Sampler:
    """Samples of one requirement in batches of one size.

    Parameters
    ----------
    review : Review
    requirement : Requirement
    conditions : Conditions
        Those at which each sample is solved.
    count : int
        Samples wanted; the last batch may hold some more.
    most_bytes : int
        Bound of the matrices of a batch.
    """

    def __init__(
        self, review: Review, requirement: Requirement, conditions: Conditions, count: int, most_bytes: int
    ) -> None:  # fmt: skip
        self.review, self.design, self.requirement = review, review.design, requirement
        self.piece = _piece_of(review, requirement.output)
        self.deviations = [
            d for d in deviations(self.design) if touches(requirement, review.operating_points, d)
        ]  # fmt: skip
        self.trims = trims_among(self.design, self.piece.design.parts)
        self.points_each = conditions.size
        matrix = 8 * (build_network(self.piece.design).unknowns + 1) ** 2
        most_rows = max(1, most_bytes // (MATRICES * matrix))
        self.batches = -(-count // max(1, most_rows // self.points_each))
        self.size = -(-count // self.batches)
        self.together = max(1, most_rows // self.size)
        self.conditions = conditions.take(np.tile(np.arange(self.points_each), self.size))
        self.force = [in_force(self.design, d, self.conditions) for d in self.deviations]
        self._trim_batches: dict[tuple[str, int], _Batch] = {}

    def run(self, random: np.random.Generator) -> Iterator[tuple[Array, Array]]:
        """Outputs and laws of batch after batch, shape (samples, conditions).

        The trims, which take one condition a sample, are set for several batches together.
        """
        batch = _Batch(self.piece, self.conditions)
        low = np.array([d.low for d in self.deviations])
        high = np.array([d.high for d in self.deviations])
        for first in range(0, self.batches, self.together):
            batches = min(self.together, self.batches - first)
            amounts = low + (high - low) * random.random((batches * self.size, len(low)))
            positions = self._set_trims(amounts)
            for i in range(batches):
                own = slice(i * self.size, (i + 1) * self.size)
                yield self._solve(batch, amounts[own], {ref: p[own] for ref, p in positions.items()})

    def _solve(self, batch: _Batch, amounts: Array, positions: dict[str, Array]) -> tuple[Array, Array]:
        everywhere = np.repeat(amounts, self.points_each, axis=0).T
        moves = [(d.moves, a * f) for d, a, f in zip(self.deviations, everywhere, self.force, strict=True)]
        overrides, conditions = moved(self.design, self.conditions, moves)
        set_to = {ref: np.repeat(p, self.points_each) for ref, p in positions.items()}
        conditions = Conditions({**conditions.values, **set_to}, conditions.scenario, conditions.absent)
        points = batch.solve(conditions, overrides)
        shape = (self.size, self.points_each)
        law = law_values(self.requirement, points)
        return points.voltage(self.requirement.output).reshape(shape), law.reshape(shape)

    def _set_trims(self, amounts: Array) -> dict[str, Array]:
        """Positions of the trims in each sample, set one after the other at typical supplies."""
        steady = [(d, a) for d, a in zip(self.deviations, amounts.T, strict=True) if not of_supply(self.design, d)]
        positions: dict[str, Array] = {}
        for ref in self.trims:
            spread = self.design.parts[ref].position
            low, high = (spread.min, spread.max) if spread.min < spread.max else (0.0, 1.0)
            start = np.full(len(amounts), self.review.typical[ref])
            positions[ref] = null(self._trim_error(ref, steady, dict(positions)), start, low, high)
        return positions

    def _trim_error(self, ref: str, amounts: Amounts, others: dict[str, Array]) -> Callable[[Array], Array]:
        """The error that a trim nulls, as a function of its positions in the samples."""
        requirement = self.design.requirements[self.design.parts[ref].adjusts]

        def solver(conditions: Conditions) -> OperatingPoints:
            key = (ref, conditions.size)
            if key not in self._trim_batches:
                self._trim_batches[key] = _Batch(self.piece, conditions)
            overrides, drawn = moved(self.design, conditions, [(d.moves, a) for d, a in amounts])
            return self._trim_batches[key].solve(drawn, overrides)

        return lambda here: trim_error(self.design, requirement, {**others, ref: here}, solver)


def _piece_of(review: Review, net: str) -> Piece:
    """The piece in which a net is free to move, at its own place in the design."""
    pieces = cut(review.design, review.circuit, frozenset(review.design.parts))
    for piece in pieces:
        if net in piece.copies[0].island.nets:
            return piece
    raise AnalysisError(f"net {net} does not follow the parts of a circuit", "there is nothing to sample")
