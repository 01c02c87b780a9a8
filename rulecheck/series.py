"""Preferred values of resistors and capacitors: the E series of IEC 60063."""

from __future__ import annotations

import functools
import math

# Up to E24 the values are agreed ones: eight differ from the rounded powers (2.7 where rounding gives 2.6).
_E24 = (
    1.0, 1.1, 1.2, 1.3, 1.5, 1.6, 1.8, 2.0, 2.2, 2.4, 2.7, 3.0,
    3.3, 3.6, 3.9, 4.3, 4.7, 5.1, 5.6, 6.2, 6.8, 7.5, 8.2, 9.1,
)  # fmt: skip

# E48 to E192 are 10^(i/N) to three digits, with one value of E192 agreed otherwise.
_ROUNDED, _AGREED = 9.19, 9.20

#: Series by the tolerance each is made for, as fractions, coarsest first (IEC 60063); E3 is for more still.
TOLERANCES = {"E6": 0.2, "E12": 0.1, "E24": 0.05, "E48": 0.02, "E96": 0.01, "E192": 0.005}

SERIES = ("E3", *TOLERANCES)

# Wide of rounding in floats, narrow against the finest step of 1.2 %.
_SAME = 1e-6


@functools.cache
def values(series: str) -> tuple[float, ...]:
    """Values of a series from 1 to below 10, in order.

    Raises
    ------
    ValueError
        No such series.
    """
    if series not in SERIES:
        raise ValueError(f"no series {series!r}; there are {', '.join(SERIES)}")
    count = int(series[1:])
    if count <= 24:
        return _E24[:: 24 // count]
    rounded = (round(10.0 ** (i / count), 2) for i in range(count))
    return tuple(_AGREED if value == _ROUNDED else value for value in rounded)


def nearest(value: float, series: str = "E96") -> float:
    """Value of a series nearest to a positive `value` by ratio.

    Raises
    ------
    ValueError
        `value` is not positive and finite, or there is no such series.
    """
    decade = _decade(value)
    candidates = [_at(mantissa, decade) for mantissa in values(series)] + [_at(1.0, decade + 1)]
    return min(candidates, key=lambda candidate: abs(math.log(candidate / value)))


def in_series(value: float, series: str) -> bool:
    """Whether `value` is one of a series; one that is not positive is in none."""
    return 0.0 < value < math.inf and math.isclose(value, nearest(value, series), rel_tol=_SAME)


def series_for_tolerance(tolerance: float) -> str:
    """Series made for parts of a tolerance, given as a fraction: 0.01 gives ``E96``, all closer ``E192``."""
    if tolerance > TOLERANCES["E6"] * (1.0 + _SAME):
        return "E3"
    return next((name for name, least in TOLERANCES.items() if tolerance >= least * (1.0 - _SAME)), "E192")


def decade_values(series: str, low: float, high: float) -> tuple[float, ...]:
    """Values of a series over all decades from `low` to `high`, both included, in order.

    Raises
    ------
    ValueError
        `low` or `high` is not positive and finite, or there is no such series.
    """
    decades = range(_decade(low), _decade(high) + 1)
    spanned = (_at(mantissa, decade) for decade in decades for mantissa in values(series))
    return tuple(value for value in spanned if low * (1.0 - _SAME) <= value <= high * (1.0 + _SAME))


def _decade(value: float) -> int:
    if not 0.0 < value < math.inf:
        raise ValueError(f"a preferred value is positive and finite, {value} is not")
    return math.floor(math.log10(value))


def _at(mantissa: float, decade: int) -> float:
    """Value in a decade, as the float nearest to the decimal: 4.7e3 and never 4700.000000000001."""
    return float(f"{mantissa}e{decade}")
