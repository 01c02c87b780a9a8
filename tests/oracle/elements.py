"""The elements of a circuit, each written from its equation for a whole stack of trial vectors."""

from __future__ import annotations

import math

import numpy as np

BOLTZMANN = 1.380649e-23
CHARGE = 1.602176634e-19
NORMAL = 298.15
STEP = 1e-30


def thermal_voltage(temperature):
    """The thermal voltage kT/q."""
    return BOLTZMANN * temperature / CHARGE


def exponential(x):
    """An exponential that goes on straight where no solution lies, so that trial steps stay finite."""
    limit = 300.0
    capped = np.where(x.real > limit, limit, x)
    return np.where(x.real > limit, math.exp(limit) * (1 + x - limit), np.exp(capped))


class Junction:
    """A two-terminal exponential element ``I(V)`` from anode to cathode."""

    def __init__(self, anode, cathode, saturation, scale, leakage=0.0):
        self.anode, self.cathode = anode, cathode
        self.saturation, self.scale, self.leakage = saturation, scale, leakage

    def current(self, v):
        """Current from anode to cathode."""
        e = exponential(v / self.scale)
        reverse = np.where(v.real < 0, 1 - e, 0)
        return self.saturation * (e - 1) - self.leakage * reverse

    def junctions(self):
        """Pairs of nodes whose forward step is limited."""
        return [(self.anode, self.cathode, 1.0)]

    def stamp(self, net):
        """Add the current to the residual."""
        net.flow(self.anode, self.cathode, self.current(net.v(self.anode) - net.v(self.cathode)))


class Transistor:
    """The bipolar transistor between its internal nodes."""

    def __init__(self, p, kind, nodes, temperature):
        ratio = temperature / NORMAL
        vt = thermal_voltage(temperature)
        grown = ratio**p.temperature_exponent * math.exp(
            CHARGE * p.bandgap / BOLTZMANN * (1 / NORMAL - 1 / temperature)
        )
        self.p = p
        self.sign = 1.0 if kind == "npn" else -1.0
        self.c, self.b, self.e = nodes
        self.saturation = p.saturation_current * grown
        self.beta_f = p.forward_beta * ratio**p.beta_exponent
        self.beta_r = p.reverse_beta * ratio**p.beta_exponent
        self.scale = p.emission_coefficient * vt
        self.early, self.knee = p.early_voltage, p.knee_current
        self.leak = p.leakage_saturation_current * grown ** (1 / p.leakage_emission_coefficient)
        self.leak_scale = p.leakage_emission_coefficient * vt
        self.mismatch = p.vbe_offset

    def transport(self, vbe, vbc):
        """Forward and reverse currents and the base charge."""
        forward = self.saturation * (exponential((vbe + self.mismatch) / self.scale) - 1)
        reverse = self.saturation * (exponential(vbc / self.scale) - 1)
        charge = (1 + np.sqrt(1 + 4 * forward / self.knee)) / (2 * (1 - vbc / self.early))
        return forward, reverse, charge

    def currents(self, vbe, vbc):
        """Collector and base currents of an npn, positive into the pins."""
        forward, reverse, charge = self.transport(vbe, vbc)
        leak = self.leak * (exponential((vbe + self.mismatch) / self.leak_scale) - 1)
        collector = (forward - reverse) / charge - reverse / self.beta_r
        return collector, forward / self.beta_f + reverse / self.beta_r + leak

    def voltages(self, net):
        """Internal base-emitter and base-collector voltages with the sign of an npn."""
        base = net.v(self.b)
        return self.sign * (base - net.v(self.e)), self.sign * (base - net.v(self.c))

    def junctions(self):
        """Pairs of nodes whose forward step is limited."""
        return [(self.b, self.e, self.sign), (self.b, self.c, self.sign)]

    def stamp(self, net):
        """Add the pin currents to the residual."""
        ic, ib = self.currents(*self.voltages(net))
        net.leave(self.c, self.sign * ic)
        net.leave(self.b, self.sign * ib)
        net.leave(self.e, -self.sign * (ic + ib))

    def diffusion(self, net):
        """Slope of the collector transport current over the base-emitter voltage, for the transit time."""
        vbe, vbc = self.voltages(net)
        forward, _, charge = self.transport(vbe + 1j * STEP, vbc)
        return (forward / charge).imag[0] / STEP


class Conductor:
    """A resistance between two nodes."""

    def __init__(self, a, b, resistance):
        self.a, self.b, self.resistance = a, b, resistance

    def stamp(self, net):
        """Add the current to the residual."""
        net.flow(self.a, self.b, (net.v(self.a) - net.v(self.b)) / self.resistance)


class Current:
    """A constant current from one node to another through the source."""

    def __init__(self, a, b, current):
        self.a, self.b, self.current = a, b, current

    def stamp(self, net):
        """Add the current to the residual."""
        net.flow(self.a, self.b, self.current * net.scale_sources)


class Voltage:
    """An ideal voltage source with its branch current as an unknown."""

    def __init__(self, p, n, voltage, name):
        self.p, self.n, self.voltage, self.branch = p, n, voltage, f"branch:{name}"

    def stamp(self, net):
        """Add the branch current, and the equation that fixes the voltage."""
        net.flow(self.p, self.n, net.v(self.branch))
        net.equation(self.branch, net.v(self.p) - net.v(self.n) - self.voltage * net.scale_sources)


class Amplifier:
    """The op-amp: a gain between limits that follow its supplies, and the currents of its pins."""

    def __init__(self, p, ref, pins, temperature):
        self.p, self.ref, self.pins = p, ref, pins
        self.gain = p.open_loop_gain
        self.headroom = (p.end("output_headroom", "low"), p.end("output_headroom", "high"))
        doubling = 2 ** ((temperature - NORMAL) / p.bias_current_doubling) if p.bias_current_doubling else 1.0
        # `bias_difference` is the offset current that one unit has; the format knows only its limit
        self.bias = {
            "IN+": (p.bias_current + p.bias_difference / 2) * doubling,
            "IN-": (p.bias_current - p.bias_difference / 2) * doubling,
        }
        self.z, self.branch = f"z:{ref}", f"branch:{ref}"

    def limits(self, net):
        """Lowest and highest internal output voltage."""
        return net.v(self.pins["V-"]) + self.headroom[0], net.v(self.pins["V+"]) - self.headroom[1]

    def powered(self, net):
        """Whether the supply is more than both headrooms."""
        low, high = self.limits(net)
        return high[0].real > low[0].real

    def state(self, net):
        """The name of the state at the solution."""
        if not self.powered(net):
            return "unpowered"
        low, high = (limit[0].real for limit in self.limits(net))
        z = net.v(self.z)[0].real
        return "high" if z > high else "low" if z < low else "linear"

    def stamp(self, net):
        """Add the pin currents and the two equations of gain and output."""
        pins = self.pins
        for pin in ("IN+", "IN-"):
            net.leave(pins[pin], self.bias[pin] * net.scale_sources)
        out = net.v(self.branch)
        net.leave(pins["OUT"], -out)
        quiescent = self.p.supply_current
        net.leave(pins["V+"], quiescent + np.where(out.real > 0, out, 0))
        net.leave(pins["V-"], -quiescent + np.where(out.real > 0, 0, out))
        z = net.v(self.z)
        difference = net.v(pins["IN+"]) - net.v(pins["IN-"]) + self.p.offset
        if not self.powered(net):
            net.equation(self.z, z - difference)
            net.equation(self.branch, out)
            return
        low, high = self.limits(net)
        inside = np.where(z.real > high.real, high, np.where(z.real < low.real, low, z))
        net.equation(self.z, (z - inside) + inside / min(self.gain, net.gain_limit) - difference)
        net.equation(self.branch, net.v(pins["OUT"]) - inside + self.p.output_resistance * out)
