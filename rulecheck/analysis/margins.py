"""Margins of a return ratio: sampled on a grid, refined at crossings; each figure when it is first asked."""

from __future__ import annotations

from collections.abc import Callable
from functools import cached_property
from typing import Protocol

import numpy as np

from ..devices.constants import Array, BoolArray, ComplexArray, Index, IntArray

POINTS_PER_DECADE = 12
REFINEMENTS = 24
BEYOND_WIDEST = 1e3
"""The search for crossings ends at this many times the largest gain-bandwidth."""
RESONANT = 0.5  # damping ratio below which a natural frequency gets grid points of its own
CHUNK = 1 << 21  # complex numbers held at once
TINY = 1e-300


class Ratio(Protocol):
    """A return ratio that can be evaluated at frequencies of chosen conditions."""

    @property
    def dc(self) -> Array:
        """Value at zero frequency, shape (conditions,)."""

    @property
    def mu(self) -> ComplexArray:
        """Time constants, shape (conditions, modes); sets the memory one evaluation takes."""

    def at(self, frequency: Array, index: Index = slice(None)) -> ComplexArray:
        """Value at `frequency` [Hz]."""


class Margins:
    """Margins of one return ratio at every condition, shape (conditions,); NaN where there is none.

    Parameters
    ----------
    ratio : Ratio
    natural : ndarray of complex, shape (conditions, modes) [1/s]
        Natural frequencies; the grid spans them and has points at lightly damped ones.
    judged : ndarray of bool, shape (conditions,)
        Where the amplifier is not saturated.
    widest : float
        Largest gain-bandwidth [Hz].
    """

    def __init__(self, ratio: Ratio, natural: ComplexArray, judged: BoolArray, widest: float) -> None:
        self._ratio = ratio
        self._judged = judged
        self._where: IntArray = np.flatnonzero(judged)
        self._natural = natural
        self._widest = widest

    @property
    def dc_return_ratio(self) -> Array:
        """Return ratio at zero frequency; positive is negative feedback."""
        return np.where(self._judged, self._ratio.dc, np.nan)

    @property
    def phase_margin(self) -> Array:
        """Least phase margin over unity crossings [deg]."""
        return self._at_unity[0]

    @property
    def crossover(self) -> Array:
        """The unity crossing of least phase margin [Hz]."""
        return self._at_unity[1]

    @cached_property
    def _grid(self) -> Array:
        return frequency_grid(self._natural[self._where], BEYOND_WIDEST * self._widest)

    @cached_property
    def _sampled(self) -> ComplexArray:
        grid, where = self._grid, self._where
        step = max(1, CHUNK // (grid.shape[1] * self._ratio.mu.shape[1] + 1))
        # chunks bound the memory; each is one batch
        parts = [self._ratio.at(grid[i : i + step], where[i : i + step]) for i in range(0, len(where), step)]
        return np.concatenate(parts) if parts else np.zeros(grid.shape, complex)

    @cached_property
    def _at_unity(self) -> tuple[Array, Array]:
        value = self._sampled
        phase = _unwrapped(value, self._ratio.dc[self._where])
        rows, cells, found = self._crossings(_level(value), _level)
        at = self._ratio.at(found, self._where[rows])
        margin = 180 + phase[rows, cells] + np.degrees(np.angle(at / value[rows, cells]))
        return self._least(margin, margin, found, rows)

    @cached_property
    def gain_margin(self) -> Array:
        """Gain margin at -180° [dB], nearest to 0 dB over its crossings."""
        value = self._sampled
        # phases of -180° and a turn more or less are where T is real and negative
        rows, _, found = self._crossings(np.where(value.real < 0, value.imag, np.nan), np.imag)
        at = self._ratio.at(found, self._where[rows])
        gain = -20 * np.log10(np.maximum(np.abs(at), TINY))
        real = at.real < 0
        return self._least(np.abs(gain[real]), gain[real], found[real], rows[real])[0]

    @cached_property
    def modulus_margin(self) -> Array:
        """Least ``|1 + T|`` over frequency."""
        out = np.full(len(self._judged), np.nan)
        if self._where.size:
            out[self._where] = _modulus(self._ratio, self._grid, self._where, self._sampled)
        return out

    def _crossings(self, sampled: Array, measure: Callable[[ComplexArray], Array]) -> tuple[IntArray, IntArray, Array]:
        """Sign changes of `sampled`, refined: rows, grid cells and frequencies [Hz].

        Bisection alternates with the secant of the bracket's ends, so that either kind of curve is fast.
        """
        with np.errstate(invalid="ignore"):
            rows, cells = np.nonzero((sampled[:, :-1] > 0) != (sampled[:, 1:] > 0))
        known = np.isfinite(sampled[rows, cells]) & np.isfinite(sampled[rows, cells + 1])
        rows, cells = rows[known], cells[known]
        low, high = np.log(self._grid[rows, cells]), np.log(self._grid[rows, cells + 1])
        at_low, at_high = sampled[rows, cells], sampled[rows, cells + 1]
        for round_ in range(REFINEMENTS):
            share = np.full(low.shape, 0.5) if round_ % 3 == 0 else np.clip(at_low / (at_low - at_high), 1e-3, 0.999)
            middle = low + share * (high - low)
            found = measure(self._ratio.at(np.exp(middle), self._where[rows]))
            same = (found > 0) == (at_low > 0)
            low, at_low = np.where(same, middle, low), np.where(same, found, at_low)
            high, at_high = np.where(same, high, middle), np.where(same, at_high, found)
        nearer = np.where(np.abs(at_low) < np.abs(at_high), low, high)
        return rows, cells, np.exp(nearer)

    def _least(self, order: Array, value: Array, frequency: Array, rows: IntArray) -> tuple[Array, Array]:
        """Of the crossings of each condition the one least by `order`: its value and frequency; NaN where none."""
        best, place = np.full(len(self._judged), np.nan), np.full(len(self._judged), np.nan)
        by_row = np.lexsort((order, rows))
        chosen, first = np.unique(rows[by_row], return_index=True)
        best[self._where[chosen]], place[self._where[chosen]] = value[by_row[first]], frequency[by_row[first]]
        return best, place


def frequency_grid(natural: ComplexArray, highest: float) -> Array:
    """Frequencies for each condition, shape (conditions, points), ascending [Hz].

    From a decade under the lowest natural frequency to a decade above the highest, or to `highest`, with
    points at the lightly damped natural frequencies, which would slip between the others.
    """
    size = np.abs(natural) / (2 * np.pi)
    known = np.isfinite(size) & (size > 0)
    low = np.min(size, where=known, initial=1e3) / 10
    high = max(min(np.max(size, where=known, initial=1e6) * 10, highest), low * 100)
    count = int(np.ceil(np.log10(high / low) * POINTS_PER_DECADE)) + 1
    common = np.broadcast_to(np.geomspace(low, high, count), (len(natural), count))
    damping = np.where(known, -natural.real / np.where(known, np.abs(natural), 1), 1.0)
    resonant = known & (natural.imag > 0) & (np.abs(damping) < RESONANT) & (size < high)
    most = int(resonant.sum(axis=1).max(initial=0))
    chosen = np.argsort(~resonant, axis=1, kind="stable")[:, :most]
    own = np.where(np.take_along_axis(resonant, chosen, 1), np.take_along_axis(size, chosen, 1), low)
    width = np.clip(np.abs(np.take_along_axis(damping, chosen, 1)), 1e-4, 0.1)
    return np.sort(np.concatenate([common, own, own * (1 - width), own * (1 + width)], axis=1), axis=1)


def _level(t: ComplexArray) -> Array:
    return np.log(np.maximum(np.abs(t), TINY))


def _unwrapped(value: ComplexArray, dc: Array) -> Array:
    """Phase [deg] of each grid point, counted on from the value at DC."""
    start = np.where(dc < 0, -180.0, 0.0)
    reference = np.where(dc < 0, 180.0, 0.0)
    steps = np.diff(np.concatenate([reference[:, None], np.degrees(np.angle(value))], axis=1), axis=1)
    return start[:, None] + np.cumsum((steps + 180) % 360 - 180, axis=1)


GOLDEN = (np.sqrt(5) - 1) / 2
GOLDEN_STEPS = 26
NEAR_LEAST = 1.3
"""A minimum between grid points may be deeper than the least one seen: all that come this near are refined."""


def _modulus(ratio: Ratio, grid: Array, where: IntArray, value: ComplexArray) -> Array:
    """Least ``|1 + T|``, by golden section about the low grid points."""
    distance = np.abs(1 + value)
    padded = np.pad(distance, ((0, 0), (1, 1)), constant_values=np.inf)
    low_points = (distance <= padded[:, :-2]) & (distance <= padded[:, 2:])
    least = distance.min(axis=1)
    rows, cells = np.nonzero(low_points & (distance <= NEAR_LEAST * least[:, None]))
    low = np.log(grid[rows, np.maximum(cells - 1, 0)])
    high = np.log(grid[rows, np.minimum(cells + 1, grid.shape[1] - 1)])

    def measure(x: Array) -> Array:
        return np.abs(1 + ratio.at(np.exp(x), where[rows]))

    one, two = high - GOLDEN * (high - low), low + GOLDEN * (high - low)
    at_one, at_two = measure(one), measure(two)
    for _ in range(GOLDEN_STEPS):
        left = at_one < at_two
        high, low = np.where(left, two, high), np.where(left, low, one)
        new = np.where(left, high - GOLDEN * (high - low), low + GOLDEN * (high - low))
        at_new = measure(new)
        one, two, at_one, at_two = (
            np.where(left, new, two),
            np.where(left, one, new),
            np.where(left, at_new, at_two),
            np.where(left, at_one, at_new),
        )
    np.minimum.at(least, rows, np.minimum(at_one, at_two))
    return least
