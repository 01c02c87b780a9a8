"""The operating point of a design at one point of its conditions."""

from __future__ import annotations

import numpy as np

from .heat import Heat
from .network import Network, ambient_of
from .newton import NoSolutionError
from .reading import read


class Point:
    """The solved state of one design at one point, with names for its figures."""

    def __init__(self, network, x):
        self.network, self.x = network, x
        network.residual(x[:, None].astype(complex))

    def voltage(self, net):
        """Voltage of a net."""
        return float(self.network.entry(self.x, net))

    def voltages(self):
        """Voltage of every net that the design names."""
        internal = (":", " inside ", "clamp ", " source")
        return {name: self.voltage(name) for name in self.network.index if not any(mark in name for mark in internal)}

    def states(self):
        """State of every amplifier."""
        return {ref: amplifier.state(self.network) for ref, amplifier in self.network.amplifiers.items()}

    def transistor_currents(self, ref):
        """Collector and base current into the pins."""
        q = self.network.transistors[ref]
        ic, ib = q.currents(*q.voltages(self.network))
        return q.sign * float(ic[0].real), q.sign * float(ib[0].real)

    def clamp_currents(self):
        """Current of every clamp diode."""
        result = {}
        for name, diode in self.network.clamped.items():
            v = np.array([self.voltage(diode.anode) - self.voltage(diode.cathode)], dtype=complex)
            result[name] = float(diode.current(v)[0].real)
        return result

    def dissipation(self):
        """Power that each part turns to heat: transistors and amplifiers always, resistors as they stand."""
        return {ref: self.part_power(ref, table) for ref, table in self.network.design["parts"].items()}

    def part_power(self, ref, table):
        """Power that one part turns to heat."""
        pins, kind = table["pins"], table["kind"]
        if kind in ("npn", "pnp"):
            ic, ib = self.transistor_currents(ref)
            emitter = self.voltage(pins["E"])
            return (self.voltage(pins["C"]) - emitter) * ic + (self.voltage(pins["B"]) - emitter) * ib
        if kind == "op-amp":
            amplifier = self.network.amplifiers[ref]
            out = float(self.network.entry(self.x, amplifier.branch))
            high, low = self.voltage(pins["V+"]), self.voltage(pins["V-"])
            rail = high if out > 0 else low
            return (high - low) * amplifier.p.supply_current + (rail - self.voltage(pins["OUT"])) * out
        if ref in self.network.resistors:
            return (self.voltage(pins[0]) - self.voltage(pins[1])) ** 2 / self.network.resistors[ref].resistance
        return 0.0


def solve(text, point, catalogue_text=None, clamps=False, start=None):
    """The operating point of a design's text at one point, with its temperatures."""
    return solve_design(read(text, catalogue_text), point, clamps, start)


def solve_design(design, point, clamps=False, start=None):
    """The operating point of a design that has been read, so that a test may change its numbers."""
    heat = Heat(design, point.get("ambient", ambient_of(design)))
    temperatures = heat.start()
    for _ in range(100):
        network = Network(design, point, temperatures, clamps)
        solved = Point(network, network.solve(start))
        start = solved.x
        new = heat.temperatures(solved.dissipation())
        moved = max((abs(new[ref] - temperatures[ref]) for ref in new), default=0.0)
        temperatures = new
        if moved < 1e-7:
            solved.temperatures = temperatures
            return solved
    raise NoSolutionError("temperatures do not settle")
