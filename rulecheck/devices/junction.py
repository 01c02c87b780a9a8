"""The exponential junction and the step limit that keeps Newton's method on it."""

from __future__ import annotations

import numpy as np

from .constants import Array

# Beyond this exponent (5e43 times the saturation current) the law goes on as a straight line, so that
# a wild iterate gives a finite number; no answer of a circuit lies there.
STRAIGHT_ABOVE = 100.0


def junction_current(voltage: Array, saturation: Array, slope: Array) -> tuple[Array, Array]:
    """Current and conductance of ``I = I_S·(exp(V/slope) − 1)``.

    Parameters
    ----------
    voltage : ndarray [V]
    saturation : ndarray [A]
        Saturation current at the junction's temperature.
    slope : ndarray [V]
        Emission coefficient times thermal voltage.

    Returns
    -------
    current : ndarray [A]
    conductance : ndarray [S]
    """
    exponent = voltage / slope
    bounded = np.minimum(exponent, STRAIGHT_ABOVE)
    growth = np.expm1(bounded)
    over = exponent - bounded
    current = saturation * (growth + (growth + 1) * over)
    return current, saturation * (growth + 1) / slope


def limited_step(wanted: Array, last: Array, slope: Array, critical: Array) -> Array:
    """Junction voltage to linearise about next, a bounded step from the last one.

    Above the critical voltage (where the curve bends most) a forward step grows only with the
    logarithm of what the linear solution asks for; falling steps are bounded likewise when they leave
    the exponential region.

    Parameters
    ----------
    wanted, last : ndarray [V]
        What the linear solution asks for, and the present point of linearisation.
    slope : ndarray [V]
        Emission coefficient times thermal voltage.
    critical : ndarray [V]
        ``slope·ln(slope/(√2·I_S))``, see `critical_voltage`.

    Returns
    -------
    ndarray [V]
        Equal to `wanted` where the step is harmless.
    """
    step = wanted - last
    forward = (wanted > critical) & (np.abs(step) > 2 * slope)
    if not forward.any():
        return wanted
    ratio = np.maximum(1 + step / slope, 1e-12)
    from_on = np.where(ratio > 1e-12, last + slope * np.log(ratio), critical)
    from_off = slope * np.log(np.maximum(wanted, slope) / slope)
    limited = np.where(last > 0, np.where(step > 0, from_on, wanted), np.maximum(from_off, critical * 0.9))
    return np.where(forward, limited, wanted)


def critical_voltage(saturation: Array, slope: Array) -> Array:
    """Voltage of greatest curvature of a junction [V]."""
    return slope * np.log(slope / (np.sqrt(2.0) * np.maximum(saturation, 1e-300)))
