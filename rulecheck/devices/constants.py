"""Physical constants; `k` and `q` are exact since the SI of 2019."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

BOLTZMANN = 1.380649e-23
"""Boltzmann constant, J/K."""
ELEMENTARY_CHARGE = 1.602176634e-19
"""Elementary charge, C."""
NOMINAL_TEMPERATURE = 298.15
"""Temperature at which parameters are stated, K."""

Array = NDArray[np.floating[Any]]
BoolArray = NDArray[np.bool_]
IntArray = NDArray[np.integer[Any]]
ComplexArray = NDArray[np.complexfloating[Any, Any]]
AnyArray = NDArray[Any]
Index = AnyArray | slice
"""Chooses conditions: integers, booleans or a slice."""


def thermal_voltage(temperature: Array) -> Array:
    """Thermal voltage kT/q.

    Parameters
    ----------
    temperature : ndarray, any shape [K]

    Returns
    -------
    ndarray, same shape [V]
    """
    return BOLTZMANN / ELEMENTARY_CHARGE * temperature


def saturation_scale(temperature: Array, bandgap: Array, exponent: Array, emission: Array) -> Array:
    """Ratio of a saturation current to its value at 25 °C.

    ``(T/T_n)^(X/n) · exp((q·E_g/(n·k))·(1/T_n − 1/T))``; a transistor takes ``n = 1`` here.

    Parameters
    ----------
    temperature : ndarray [K]
    bandgap : ndarray [V]
    exponent : ndarray
        Temperature exponent X.
    emission : ndarray
        Emission coefficient n.

    Returns
    -------
    ndarray, the broadcast shape
    """
    slope = ELEMENTARY_CHARGE * bandgap / (emission * BOLTZMANN)
    power: Array = (temperature / NOMINAL_TEMPERATURE) ** (exponent / emission)
    return power * np.exp(slope * (1 / NOMINAL_TEMPERATURE - 1 / temperature))


def doubling_scale(temperature: Array, doubling: Array) -> Array:
    """Growth from 25 °C of a current that doubles every `doubling` kelvin (infinite: constant)."""
    return np.exp2((temperature - NOMINAL_TEMPERATURE) / doubling)
