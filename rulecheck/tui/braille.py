"""Curves drawn in Braille signs: eight dots a character, logarithmic axes, lines, dashes and marks."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

Array = np.ndarray[Any, np.dtype[Any]]
#: Value of each dot of a Braille sign, by row and column (Unicode, block 2800).
_DOTS = np.array([[0x01, 0x08], [0x02, 0x10], [0x04, 0x20], [0x40, 0x80]])
#: A quantity that spans this ratio or more is drawn over its logarithm.
LOG_FROM = 30.0
DASH, GAP = 6, 5


@dataclass(frozen=True, slots=True)
class Axis:
    """A span of values, and how it is divided.

    Parameters
    ----------
    low, high : float
    log : bool
        Whether by the logarithm of the magnitude; then both have one sign.
    """

    low: float
    high: float
    log: bool = False

    @classmethod
    def of(cls, values: Array, *, log: bool | None = None, room: float = 0.0) -> Axis:
        """An axis that holds all finite values.

        Parameters
        ----------
        values : ndarray
        log : bool, optional
            None: logarithmic where the values have one sign and span decades.
        room : float
            Left free at either end, as a share of the span.
        """
        known = values[np.isfinite(values)]
        if not known.size:
            return cls(0.0, 1.0)
        low, high = float(known.min()), float(known.max())
        one_sign = low * high > 0
        if log is None:
            log = one_sign and max(abs(low), abs(high)) >= LOG_FROM * min(abs(low), abs(high))
        log = log and one_sign
        if low == high:
            step = abs(low) / 2 or 0.5
            return cls(low - step, high + step)
        if not log:
            step = room * (high - low)
            return cls(low - step, high + step)
        factor = (max(abs(low), abs(high)) / min(abs(low), abs(high))) ** room
        return cls(low / factor, high * factor, True) if low > 0 else cls(low * factor, high / factor, True)

    def place(self, values: Array) -> Array:
        """Where values stand on the axis: 0 at its low end, 1 at its high end."""
        if not self.log:
            return (np.asarray(values, float) - self.low) / (self.high - self.low)
        with np.errstate(all="ignore"):
            return np.log(np.asarray(values, float) / self.low) / np.log(self.high / self.low)

    def ticks(self, most: int) -> list[float]:
        """Round values on the axis, at most so many: powers of ten where it is logarithmic."""
        if self.log:
            sign = np.sign(self.low)
            ends = sorted(np.log10(np.abs([self.low, self.high])))
            powers = np.arange(np.ceil(ends[0] - 1e-9), np.floor(ends[1] + 1e-9) + 1)
            powers = powers[:: max(1, -(-len(powers) // max(most, 1)))]
            if len(powers) >= 2:
                return [float(sign * 10.0**power) for power in powers]
        return _round_steps(self.low, self.high, most)


def _round_steps(low: float, high: float, most: int) -> list[float]:
    rough = (high - low) / max(most, 1)
    power = 10.0 ** np.floor(np.log10(rough))
    step = next(power * factor for factor in (1, 2, 5, 10) if power * factor >= rough * (1 - 1e-9))
    first, last = np.ceil(low / step - 1e-9), np.floor(high / step + 1e-9)
    return [float(round(n * step, 15)) for n in np.arange(first, last + 1)]


@dataclass
class Canvas:
    """A field of characters that is drawn on by its dots.

    Parameters
    ----------
    width, height : int
        In characters.
    """

    width: int
    height: int
    _dots: Array = field(init=False)

    def __post_init__(self) -> None:
        self._dots = np.zeros((self.height * 4, self.width * 2), bool)

    def line(self, x: Array, y: Array) -> None:
        """A line through points, broken where one is not finite.

        Parameters
        ----------
        x, y : ndarray, shape (points,)
            0 to 1 from left to right and from bottom to top.
        """
        columns, rows = self._places(np.asarray(x, float), np.asarray(y, float))
        whole = np.isfinite(columns) & np.isfinite(rows)
        joined = whole[:-1] & whole[1:]
        share = np.linspace(0, 1, 2 * (self._dots.shape[0] + self._dots.shape[1]))
        across, down = (v[:-1][joined][:, None] + np.diff(v)[joined][:, None] * share for v in (columns, rows))
        self._set(across.ravel(), down.ravel())
        self._set(columns[whole], rows[whole])

    def points(self, x: Array, y: Array) -> None:
        """Points by themselves, two dots wide and high.

        Parameters
        ----------
        x, y : ndarray, shape (points,)
            0 to 1 from left to right and from bottom to top.
        """
        columns, rows = self._places(np.asarray(x, float), np.asarray(y, float))
        whole = np.isfinite(columns) & np.isfinite(rows)
        left, top = (np.floor(v[whole] / 2) * 2 for v in (columns, rows))
        for right, down in ((0, 0), (1, 0), (0, 1), (1, 1)):
            self._set(left + right, top + down)

    def dashed(self, y: float) -> None:
        """A dashed line across at a height from 0 to 1."""
        columns = np.arange(self._dots.shape[1])
        columns = columns[columns % (DASH + GAP) < DASH]
        self._set(columns.astype(float), np.full(columns.shape, self._places(np.zeros(1), np.array([y]))[1][0]))

    def cell(self, x: float, y: float) -> tuple[int, int]:
        """Row and column of the character at a point."""
        columns, rows = self._places(np.array([x]), np.array([y]))
        row = int(np.clip(np.rint(rows[0]), 0, self._dots.shape[0] - 1)) // 4
        return row, int(np.clip(np.rint(columns[0]), 0, self._dots.shape[1] - 1)) // 2

    def rows(self) -> list[str]:
        """The drawing, a text a row."""
        cells = self._dots.reshape(self.height, 4, self.width, 2).transpose(0, 2, 1, 3)
        codes = (cells * _DOTS).sum(axis=(2, 3))
        return ["".join(chr(0x2800 + code) if code else " " for code in row) for row in codes]

    def _places(self, x: Array, y: Array) -> tuple[Array, Array]:
        return x * (self._dots.shape[1] - 1), (1 - y) * (self._dots.shape[0] - 1)

    def _set(self, columns: Array, rows: Array) -> None:
        columns, rows = np.rint(columns), np.rint(rows)
        inside = (columns >= 0) & (columns < self._dots.shape[1]) & (rows >= 0) & (rows < self._dots.shape[0])
        self._dots[rows[inside].astype(int), columns[inside].astype(int)] = True
