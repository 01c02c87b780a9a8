"""Sources of noise in a circuit: where each acts, and how strong it is at every operating point.

All are uncorrelated: thermal noise of every resistance, shot noise of every junction current and photocurrent,
voltage and input current noise of amplifiers. Supplies, references and the inputs themselves are quiet.

References
----------
.. [1] A. van der Ziel, "Noise in Solid State Devices and Circuits", Wiley 1986: both flows over a junction make
   noise, ``2q(I + 2·I_S) = 4kT·n·g − 2q·I``, which at 0 V is the thermal noise of its conductance.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from ..devices import diode, transistor
from ..devices.constants import BOLTZMANN, ELEMENTARY_CHARGE, Array
from ..devices.transistor import HotTransistor, TransistorResponse
from .network import Element
from .solution import Solution

NO_VOLTAGE = 1e-9  # V: below it the two flows of a transistor are taken as equal
CORNER_OF = {"voltage_noise": "voltage_noise_corner", "current_noise": "current_noise_corner"}


@dataclass
class NoiseSources:
    """Sources in the order in which they were found.

    Attributes
    ----------
    names : list of (str, str)
        Part or net, and which of its sources.
    incidence : list of ndarray, each of shape (unknowns,)
        What a unit of the source adds to the equations.
    level : list of ndarray, each of shape (conditions,) or (1,)
        White power density [A²/Hz], [V²/Hz] of those that act as a voltage.
    corner : list of float
        Frequency below which the density rises as 1/f [Hz].
    missing : dict of str to tuple of str
        Amplifiers and the noise parameters that they lack.
    """

    size: int
    free: int
    names: list[tuple[str, str]] = field(default_factory=list)
    incidence: list[Array] = field(default_factory=list)
    level: list[Array] = field(default_factory=list)
    corner: list[float] = field(default_factory=list)
    missing: dict[str, tuple[str, ...]] = field(default_factory=dict)

    def between(self, name: tuple[str, str], a: int, b: int, level: Array, corner: float = 0.0) -> None:
        """Add a noise current between two nodes; what flows at fixed nodes is of no account."""
        rows = np.zeros(self.size)
        for node, sign in ((a, 1.0), (b, -1.0)):
            if node < self.free:
                rows[node] += sign
        self._add(name, rows, level, corner)

    def in_row(self, name: tuple[str, str], row: int, level: Array, corner: float = 0.0) -> None:
        """Add a noise voltage to the equation of a branch or an amplifier."""
        rows = np.zeros(self.size)
        rows[row] = 1.0
        self._add(name, rows, level, corner)

    def _add(self, name: tuple[str, str], rows: Array, level: Array, corner: float) -> None:
        if rows.any() and level.any():
            self.names.append(name)
            self.incidence.append(rows)
            self.level.append(level)
            self.corner.append(corner)


def noise_sources(points: Solution) -> NoiseSources:
    """All sources of a circuit at its operating points.

    Parameters
    ----------
    points : Solution

    Returns
    -------
    NoiseSources
    """
    network = points.network
    found = NoiseSources(points.equations.size + len(network.amplifiers), network.free)
    _resistances(points, found)
    _transistors(points, found)
    _diodes(points, found)
    for i, ref in enumerate(network.amplifiers):
        _amplifier(points, found, i, ref)
    return found


def _thermal(points: Solution, element: Element) -> Array:
    """4kT at the temperature of an element's part; of loads and source resistances at ambient [J]."""
    ref = element.key[0]
    is_part = ref in points.network.design.parts
    heat = points.temperature(ref) if is_part else points.conditions.values["ambient"]
    return 4 * BOLTZMANN * heat


def _resistances(points: Solution, found: NoiseSources) -> None:
    network, values = points.network, points.values
    for i, e in enumerate(network.resistors):
        found.between(e.key, e.a, e.b, _thermal(points, e) * values.conductance[:, i])
    for i, e in enumerate(network.branches):
        found.in_row(e.key, network.branch_row(i), _thermal(points, e) * values.branch_resistance[:, i])


def _transistors(points: Solution, found: NoiseSources) -> None:
    network, hot = points.network, points.values.transistor
    at = points.equations.junction_voltages(points.state_vector.x, points.values)
    flows = transistor_flows(at.v_be, at.v_bc, hot, transistor.respond(at.v_be, at.v_bc, hot))
    for i, ref in enumerate(network.transistors):
        collector, base, emitter = (int(n) for n in network.terminals[i])
        ends = {"collector current": (collector, emitter), "base current": (base, emitter),
                "base-collector current": (base, collector)}  # fmt: skip
        for name, (a, b) in ends.items():
            found.between((ref, name), a, b, 2 * ELEMENTARY_CHARGE * flows[name][:, i])


def transistor_flows(v_be: Array, v_bc: Array, hot: HotTransistor, response: TransistorResponse) -> Mapping[str, Array]:
    """Both flows over each junction added up, by what they are noise of; the collector current's between C and E.

    Forward active, those are the collector current and the base current. Near saturation the flows of the
    transport current oppose each other: their difference is the current, ``coth(V_CE/(2·n·V_T))`` their sum over
    their difference.

    Parameters
    ----------
    v_be, v_bc : ndarray, shape (conditions, transistors) [V]
        In npn sense.
    hot : HotTransistor
    response : TransistorResponse
        At these voltages.

    Returns
    -------
    dict of str to ndarray, shape (conditions, transistors) [A]
    """
    back = response.db_bc * hot.slope - hot.saturation / hot.reverse_beta
    transport = response.collector + back
    across = v_be + hot.mismatch - v_bc
    none = np.abs(across) < NO_VOLTAGE
    at_rest = -2 * hot.slope * (response.dc_bc + response.db_bc)
    both_ways = transport / np.tanh(np.where(none, 1.0, across) / (2 * hot.slope))
    return {
        "collector current": np.where(none, at_rest, both_ways),
        "base current": response.base - back + 2 * (hot.saturation / hot.forward_beta + hot.leakage),
        "base-collector current": 2 * response.db_bc * hot.slope - back,
    }


def _diodes(points: Solution, found: NoiseSources) -> None:
    network, hot = points.network, points.values.diode
    voltage = points.equations.junction_voltages(points.state_vector.x, points.values).diode
    current, conductance = diode.respond(voltage, hot)
    flow = 2 * conductance * hot.slope - current
    for i, e in enumerate(network.diodes):
        found.between((e.key[0], "junction current"), e.a, e.b, 2 * ELEMENTARY_CHARGE * flow[:, i])
    for i, e in enumerate(network.sources):
        if e.key[1] == "photocurrent":
            found.between(e.key, e.a, e.b, 2 * ELEMENTARY_CHARGE * np.abs(points.values.source[:, i]))


def _amplifier(points: Solution, found: NoiseSources, index: int, ref: str) -> None:
    network, p = points.network, points.parameters
    part = network.design.parts[ref]
    lacking = []
    for name, corner in CORNER_OF.items():
        if getattr(part, name) is None:
            lacking.append(name)
        elif getattr(part, corner) is None:
            lacking.append(corner)
    if lacking:
        found.missing[ref] = tuple(lacking)
    corners = {name: float(p.of(ref, corner)[0]) for name, corner in CORNER_OF.items()}
    voltage, current = (p.of(ref, name) ** 2 for name in CORNER_OF)
    found.in_row((ref, "voltage_noise"), network.gain_row(index), voltage, corners["voltage_noise"])
    ground = next(e.b for e in network.sources if e.key == (ref, "IN+"))
    for pin, node in zip(("IN+", "IN-"), network.pins[index], strict=False):
        found.between((ref, f"current_noise {pin}"), int(node), ground, current, corners["current_noise"])
