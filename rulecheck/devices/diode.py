"""Diodes: signal and clamp diodes, and the junction of a photodiode."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .constants import Array, doubling_scale, saturation_scale, thermal_voltage
from .junction import junction_current

# The input clamps of an amplifier in fault scenarios: representative figures, common practice.
CLAMP_SATURATION = 1e-14
CLAMP_RESISTANCE = 20.0
CLAMP_BANDGAP = 1.12
CLAMP_EXPONENT = 3.0
MOST_EXPONENT = 300.0  # no iterate needs more, and what a wild one asks for stays finite


@dataclass(frozen=True, slots=True)
class HotDiode:
    """Parameters of diodes at temperature, arrays of shape (conditions, diodes).

    Attributes
    ----------
    saturation : ndarray [A]
    slope : ndarray [V]
        Emission coefficient times thermal voltage.
    leakage : ndarray [A]
        Further reverse current, from K to A.
    """

    saturation: Array
    slope: Array
    leakage: Array


def heat(parameters: dict[str, Array], temperature: Array) -> HotDiode:
    """Parameters of signal diodes at `temperature` [K], shape (conditions, diodes)."""
    p = parameters
    n = p["emission_coefficient"]
    growth = saturation_scale(temperature, p["bandgap"], p["temperature_exponent"], n)
    leakage = p["reverse_leakage"] * doubling_scale(temperature, p["leakage_doubling"])
    return HotDiode(p["saturation_current"] * growth, n * thermal_voltage(temperature), leakage)


def heat_photodiode(dark: Array, doubling: Array, temperature: Array) -> HotDiode:
    """The junction of photodiodes at `temperature` [K]: the dark current is its saturation current [A]."""
    current = dark * doubling_scale(temperature, doubling)
    return HotDiode(current, thermal_voltage(temperature), np.zeros_like(current))


def heat_clamps(temperature: Array) -> HotDiode:
    """The clamp diodes of amplifiers at `temperature` [K]."""
    one = np.ones_like(temperature)
    growth = saturation_scale(temperature, CLAMP_BANDGAP * one, CLAMP_EXPONENT * one, one)
    return HotDiode(CLAMP_SATURATION * growth, thermal_voltage(temperature), 0 * one)


def respond(voltage: Array, hot: HotDiode) -> tuple[Array, Array]:
    """Current from A to K [A] and conductance [S] at the junction voltage [V]."""
    current, conductance = junction_current(voltage, hot.saturation, hot.slope)
    off = np.maximum(0.0, -np.expm1(np.minimum(voltage / hot.slope, 0.0)))
    fall = np.where(voltage < 0, 1 - off, 0.0)
    return current - hot.leakage * off, conductance + hot.leakage * fall / hot.slope


def respond_with_resistance(voltage: Array, hot: HotDiode, resistance: float) -> tuple[Array, Array]:
    """Current and conductance of a diode in series with a resistance, without an internal node.

    Solves ``v = V_T·ln(1 + i/I_S) + R·i`` by Newton's method on the exponent, which is Lambert's W.

    Parameters
    ----------
    voltage : ndarray [V]
        Across diode and resistance together.
    hot : HotDiode
    resistance : float [ohm]

    Returns
    -------
    current : ndarray [A]
    conductance : ndarray [S]
    """
    z = hot.saturation * resistance / hot.slope
    target = voltage / hot.slope
    # exponent y of the junction: y + z·(e^y − 1) = target; start on the branch that dominates
    y = np.where(target > 1, np.minimum(target, np.log1p(np.maximum(target, 0.0) / z)), target)
    for _ in range(40):
        e = np.exp(np.minimum(y, MOST_EXPONENT))
        step = (y + z * (e - 1) - target) / (1 + z * e)
        y = y - step
        if np.all(np.abs(step) <= 1e-15 * (1 + np.abs(y))):
            break
    y = np.minimum(y, MOST_EXPONENT)
    current = hot.saturation * np.expm1(y)
    g = hot.saturation * np.exp(y) / hot.slope
    return current, g / (1 + g * resistance)
