"""Resistors and independent sources: a linear change with temperature."""

from __future__ import annotations

from .constants import NOMINAL_TEMPERATURE, Array


def scale(temperature: Array, tempco: Array | float) -> Array:
    """Factor ``1 + tempco·(T − T_n)`` on a value stated at 25 °C.

    Parameters
    ----------
    temperature : ndarray [K]
    tempco : ndarray or float [1/K]

    Returns
    -------
    ndarray
    """
    return 1 + tempco * (temperature - NOMINAL_TEMPERATURE)
