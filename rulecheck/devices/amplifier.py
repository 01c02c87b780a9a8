"""Operational amplifier: a gain between limits, bias currents, two poles."""

from __future__ import annotations

import numpy as np

from .constants import Array, BoolArray, doubling_scale

# The characteristic from differential input to internal output is followed by one number u a
# amplifier: inside the limits u is the internal output and the input is u/A0; outside, the output
# stays at the limit and the input grows with u itself. Both regions then have coefficients of order
# one, whatever the gain, and the state of an amplifier is where its u lies.


def internal_output(u: Array, low: Array, high: Array) -> Array:
    """Internal output voltage at the characteristic's parameter `u` [V]."""
    return np.clip(u, low, high)


def differential_input(u: Array, gain: Array, low: Array, high: Array) -> Array:
    """Differential input that belongs to the parameter `u` [V]."""
    inside = np.clip(u, low, high)
    return inside / gain + (u - inside)


def is_linear(u: Array, low: Array, high: Array) -> BoolArray:
    """Whether the amplifier is inside its output limits."""
    return (u >= low) & (u <= high)


def relocate(u: Array, last: Array, gain: Array, low: Array, high: Array) -> Array:
    """Parameter after a step that changed the region.

    The step was computed with the slope of the last region; beyond the limit it goes on with the
    slope of the new one, and never across the whole linear region.
    """
    was = is_linear(last, low, high)
    above, below = u > high, u < low
    out = np.where(above, high + (u - high) / gain, np.where(below, low + (u - low) / gain, u))
    middle = (low + high) / 2
    from_high = np.maximum(high - (high - u) * gain, middle)
    from_low = np.minimum(low + (u - low) * gain, middle)
    back = np.where(last > high, from_high, from_low)
    returns = ((last > high) & (u < high)) | ((last < low) & (u > low))
    return np.where(was, out, np.where(returns, back, u))


def input_currents(bias: Array, offset: Array, doubling: Array, temperature: Array) -> tuple[Array, Array]:
    """Currents into IN+ and IN- [A] at `temperature` [K]."""
    growth = doubling_scale(temperature, doubling)
    return (bias + offset / 2) * growth, (bias - offset / 2) * growth
