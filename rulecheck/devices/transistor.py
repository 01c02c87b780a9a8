"""Bipolar transistor: currents, exact derivatives and charge storage.

All functions are in npn sense; a pnp enters with its voltages and currents reversed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .constants import NOMINAL_TEMPERATURE, Array, saturation_scale, thermal_voltage
from .junction import critical_voltage, junction_current


@dataclass(frozen=True, slots=True)
class HotTransistor:
    """Parameters of transistors at their junction temperature, arrays of shape (conditions, transistors).

    Attributes
    ----------
    saturation : ndarray [A]
    forward_beta, reverse_beta : ndarray
    early : ndarray [V]
        Infinite where there is no Early effect.
    knee : ndarray [A]
    leakage : ndarray [A]
        Saturation current of the base-emitter leakage.
    slope, leakage_slope : ndarray [V]
        Emission coefficient times thermal voltage.
    mismatch : ndarray [V]
        Added to the base-emitter voltage.
    critical : ndarray [V]
        Junction voltage of greatest curvature.
    """

    saturation: Array
    forward_beta: Array
    reverse_beta: Array
    early: Array
    knee: Array
    leakage: Array
    slope: Array
    leakage_slope: Array
    mismatch: Array
    critical: Array


@dataclass(frozen=True, slots=True)
class TransistorResponse:
    """Currents into collector and base, and their derivatives, shape (conditions, transistors).

    ``dc_be`` is the derivative of the collector current by the base-emitter voltage, and so on [S];
    ``transport_be`` that of ``I_F/q_b``, to which the stored charge is proportional.
    """

    collector: Array
    base: Array
    dc_be: Array
    dc_bc: Array
    db_be: Array
    db_bc: Array
    transport_be: Array


def heat(parameters: dict[str, Array], temperature: Array) -> HotTransistor:
    """Parameters at temperature.

    Parameters
    ----------
    parameters : dict of str to ndarray
        By the names of the design file, at 25 °C.
    temperature : ndarray, shape (conditions, transistors) [K]

    Returns
    -------
    HotTransistor
    """
    p = parameters
    one = np.ones_like(temperature)
    growth = saturation_scale(temperature, p["bandgap"], p["temperature_exponent"], one)
    beta_growth = (temperature / NOMINAL_TEMPERATURE) ** p["beta_exponent"]
    vt = thermal_voltage(temperature)
    saturation, slope = p["saturation_current"] * growth, p["emission_coefficient"] * vt
    return HotTransistor(
        saturation=saturation,
        forward_beta=p["forward_beta"] * beta_growth,
        reverse_beta=p["reverse_beta"] * beta_growth,
        early=p["early_voltage"] * one,
        knee=p["knee_current"] * one,
        leakage=p["leakage_saturation_current"] * growth ** (1 / p["leakage_emission_coefficient"]),
        slope=slope,
        leakage_slope=p["leakage_emission_coefficient"] * vt,
        mismatch=p["mismatch"] * one,
        critical=critical_voltage(saturation, slope),
    )


def respond(v_be: Array, v_bc: Array, hot: HotTransistor) -> TransistorResponse:
    """Currents and derivatives from the voltages between internal nodes.

    Parameters
    ----------
    v_be, v_bc : ndarray, shape (conditions, transistors) [V]
    hot : HotTransistor

    Returns
    -------
    TransistorResponse
        Currents positive into the terminals [A].
    """
    forward, g_f = junction_current(v_be + hot.mismatch, hot.saturation, hot.slope)
    reverse, g_r = junction_current(v_bc, hot.saturation, hot.slope)
    leak, g_l = junction_current(v_be + hot.mismatch, hot.leakage, hot.leakage_slope)

    q_1 = 1 / (1 - v_bc / hot.early)
    root = np.sqrt(1 + 4 * np.maximum(forward / hot.knee, -0.24))
    q_b = q_1 / 2 * (1 + root)
    dq_be = q_1 * g_f / (hot.knee * root)
    dq_bc = q_1**2 / hot.early * (1 + root) / 2

    transport = (forward - reverse) / q_b
    return TransistorResponse(
        collector=transport - reverse / hot.reverse_beta,
        base=forward / hot.forward_beta + reverse / hot.reverse_beta + leak,
        dc_be=(g_f - transport * dq_be) / q_b,
        dc_bc=-(g_r + transport * dq_bc) / q_b - g_r / hot.reverse_beta,
        db_be=g_f / hot.forward_beta + g_l,
        db_bc=g_r / hot.reverse_beta,
        transport_be=(g_f - forward / q_b * dq_be) / q_b,
    )
