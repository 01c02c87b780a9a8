"""Margins of a return ratio: sampled on a grid, refined at crossings."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from ..devices.constants import Array, BoolArray, ComplexArray, Index, IntArray

POINTS_PER_DECADE = 12
REFINEMENTS = 48
HIGHEST = 1e12  # Hz, where the search for crossings ends
CHUNK = 1 << 21  # complex numbers held at once


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


@dataclass(frozen=True)
class Margins:
    """Margins at every condition, shape (conditions,); NaN where there is none.

    Attributes
    ----------
    dc_return_ratio : ndarray
    phase_margin : ndarray [deg]
        Least over unity crossings.
    crossover : ndarray [Hz]
        The crossing of least margin.
    gain_margin : ndarray [dB]
        Nearest to 0 dB over crossings of -180°.
    modulus_margin : ndarray
    """

    dc_return_ratio: Array
    phase_margin: Array
    crossover: Array
    gain_margin: Array
    modulus_margin: Array


def margins(ratio: Ratio, natural: ComplexArray, judged: BoolArray) -> Margins:
    """Margins of a return ratio at the conditions where it is judged.

    Parameters
    ----------
    ratio : Ratio
    natural : ndarray of complex, shape (conditions, modes) [1/s]
        Natural frequencies; the grid spans them and has points at their magnitudes.
    judged : ndarray of bool, shape (conditions,)

    Returns
    -------
    Margins
    """
    out = {name: np.full(len(judged), np.nan) for name in Margins.__dataclass_fields__}
    where = np.flatnonzero(judged)
    if where.size:
        grid = frequency_grid(natural[where])
        step = max(1, CHUNK // (grid.shape[1] * ratio.mu.shape[1] + 1))
        for first in range(0, where.size, step):  # chunks bound the memory; each is one batch
            part = slice(first, first + step)
            found = _margins(ratio, grid[part], where[part])
            for name, array in found.items():
                out[name][where[part]] = array
    return Margins(**out)


def frequency_grid(natural: ComplexArray) -> Array:
    """Frequencies for each condition, shape (conditions, points), ascending [Hz].

    From a decade under the lowest natural frequency to far beyond the highest, with points at the
    natural frequencies themselves, where a lightly damped one would slip between the others.
    """
    size = np.abs(natural) / (2 * np.pi)
    known = np.isfinite(size) & (size > 0)
    low = np.min(size, where=known, initial=1e3) / 10
    high = min(max(np.max(size, where=known & (size < HIGHEST), initial=1e6) * 10, low * 100), HIGHEST)
    count = int(np.ceil(np.log10(high / low) * POINTS_PER_DECADE)) + 1
    common = np.broadcast_to(np.geomspace(low, high, count), (len(natural), count))
    own = np.where(known & (size < high), size, low)
    width = np.where(known, np.clip(np.abs(natural.real) / np.maximum(np.abs(natural), 1e-300), 1e-4, 0.1), 0.1)
    return np.sort(np.concatenate([common, own, own * (1 - width), own * (1 + width)], axis=1), axis=1)


def _margins(ratio: Ratio, grid: Array, where: IntArray) -> dict[str, Array]:
    value = ratio.at(grid, where)
    dc = ratio.dc[where]
    phase = _unwrapped(value, dc)
    level = np.log(np.maximum(np.abs(value), 1e-300))

    def of_level(t: ComplexArray) -> Array:
        return np.log(np.maximum(np.abs(t), 1e-300))

    rows, cells, found = _crossings(ratio, grid, where, level, of_level)
    at = ratio.at(found, where[rows])
    margin = 180 + phase[rows, cells] + np.degrees(np.angle(at / value[rows, cells]))
    phase_margin, crossover = _least(margin, margin, found, rows, len(where))
    # phases of -180° and a turn more or less are where T is real and negative
    turned = np.imag(value)
    rows, cells, found = _crossings(ratio, grid, where, np.where(value.real < 0, turned, np.nan), np.imag)
    at = ratio.at(found, where[rows])
    gain = -20 * np.log10(np.maximum(np.abs(at), 1e-300))
    negative = at.real < 0
    gain_margin, _ = _least(np.abs(gain[negative]), gain[negative], found[negative], rows[negative], len(where))
    return {
        "dc_return_ratio": dc,
        "phase_margin": phase_margin,
        "crossover": crossover,
        "gain_margin": gain_margin,
        "modulus_margin": _modulus(ratio, grid, where, value),
    }


def _unwrapped(value: ComplexArray, dc: Array) -> Array:
    """Phase [deg] of each grid point, counted on from the value at DC."""
    start = np.where(dc < 0, -180.0, 0.0)
    angle = np.degrees(np.angle(value))
    reference = np.where(dc < 0, 180.0, 0.0)
    steps = np.diff(np.concatenate([reference[:, None], angle], axis=1), axis=1)
    return start[:, None] + np.cumsum((steps + 180) % 360 - 180, axis=1)


def _crossings(
    ratio: Ratio, grid: Array, where: IntArray, sampled: Array, measure: Callable[[ComplexArray], Array]
) -> tuple[IntArray, IntArray, Array]:
    """Sign changes of `sampled` refined by bisection: rows, grid cells and frequencies [Hz]."""
    with np.errstate(invalid="ignore"):
        rows, cells = np.nonzero((sampled[:, :-1] > 0) != (sampled[:, 1:] > 0))
    known = np.isfinite(sampled[rows, cells]) & np.isfinite(sampled[rows, cells + 1])
    rows, cells = rows[known], cells[known]
    low, high = np.log(grid[rows, cells]), np.log(grid[rows, cells + 1])
    positive = sampled[rows, cells] > 0
    for _ in range(REFINEMENTS):
        middle = (low + high) / 2
        same = (measure(ratio.at(np.exp(middle), where[rows])) > 0) == positive
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    return rows, cells, np.exp((low + high) / 2)


def _least(order: Array, value: Array, frequency: Array, rows: IntArray, count: int) -> tuple[Array, Array]:
    """Of the crossings of each row the one least by `order`: its value and frequency; NaN where none."""
    best, place = np.full(count, np.nan), np.full(count, np.nan)
    by_row = np.lexsort((order, rows))
    chosen, first = np.unique(rows[by_row], return_index=True)
    best[chosen], place[chosen] = value[by_row[first]], frequency[by_row[first]]
    return best, place


GOLDEN = (np.sqrt(5) - 1) / 2


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
    for _ in range(40):
        one, two = high - GOLDEN * (high - low), low + GOLDEN * (high - low)
        left = np.abs(1 + ratio.at(np.exp(one), where[rows])) < np.abs(1 + ratio.at(np.exp(two), where[rows]))
        high, low = np.where(left, two, high), np.where(left, low, one)
    np.minimum.at(least, rows, np.abs(1 + ratio.at(np.exp((low + high) / 2), where[rows])))
    return least
