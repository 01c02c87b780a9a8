"""Linearised circuit: ``G + s·C`` at each operating point.

The unknowns are those of the nodal equations and one more an amplifier, the output of its first
pole: ``(V(IN+) − V(IN−)) = y·(1 + s/ω_1)/A0`` and ``y = u·(1 + s/ω_2)`` with the internal output ``u``.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from ..devices import diode, transistor
from ..devices.constants import Array, BoolArray, Index, IntArray
from .values import Overrides, Parameters, columns

if TYPE_CHECKING:
    from .solution import Solution


@dataclass(frozen=True)
class SmallSignal:
    """Linear network at each operating point.

    Attributes
    ----------
    conductance, capacitance : ndarray, shape (conditions, size, size)
    output_rows : ndarray of int, shape (amplifiers,)
        Row of ``V(OUT) + r·i − u = 0`` of each amplifier.
    internal_columns : ndarray of int, shape (amplifiers,)
        Column of the internal output u.
    state_columns : ndarray of int, shape (amplifiers,)
        Column of the output y of the first pole.
    linear : ndarray of bool, shape (conditions, amplifiers)
    converged : ndarray of bool, shape (conditions,)
    amplifiers : tuple of str
    widest : float
        Largest gain-bandwidth [Hz]; infinite without amplifiers.
    """

    conductance: Array
    capacitance: Array
    output_rows: IntArray
    internal_columns: IntArray
    state_columns: IntArray
    linear: BoolArray
    converged: BoolArray
    amplifiers: tuple[str, ...]
    widest: float

    def take(self, index: Index) -> SmallSignal:
        """The chosen conditions."""
        return replace(
            self,
            conductance=self.conductance[index],
            capacitance=self.capacitance[index],
            linear=self.linear[index],
            converged=self.converged[index],
        )

    @property
    def judged(self) -> BoolArray:
        """Conditions at which stability is judged: no amplifier is saturated that is ever linear."""
        ever = self.linear[self.converged].any(axis=0)
        judged: BoolArray = self.converged & (self.linear | ~ever).all(axis=1)
        return judged


def linearise(points: Solution, overrides: Overrides | None = None) -> SmallSignal:
    """Linearise at all operating points; conditions that did not converge hold meaningless numbers.

    Parameters
    ----------
    points : Solution
    overrides : mapping of (part reference, parameter) to float or ndarray, optional
        Capacitances, transit times and poles in place of their nominal; they move no operating point.

    Returns
    -------
    SmallSignal
    """
    equations, network, values = points.equations, points.network, points.values
    x = points.state_vector.x
    tangents = equations.junction_voltages(x, values)
    jacobian = equations.evaluate(x, tangents, values, equations.linear_matrix(values))[1]
    count, base = jacobian.shape[:2]
    amps = len(network.amplifiers)
    size = base + amps
    # one row and column more than needed: what concerns fixed nodes is stamped there and cut off
    g = np.zeros((count, size + 1, size + 1))
    g[:, :base, :base] = jacobian
    c = np.zeros_like(g)
    linear = np.stack([points.linear(r) for r in network.amplifiers], axis=1) if amps else np.zeros((count, 0), bool)
    states = base + np.arange(amps)
    p = Parameters(network.design, {**points.parameters.overrides, **(overrides or {})})
    _amplifier_poles(points, p, g, c, equations.gain_rows, states, linear)
    stamp = _Stamp(c, [*range(network.free), *[size] * (len(network.nodes) - network.free)])
    _transistor_charges(points, p, stamp)
    _diode_charges(points, p, stamp)
    _capacitors(points, p, stamp)
    widest = max((float(p.of(r, "gain_bandwidth").max()) for r in network.amplifiers), default=np.inf)
    return SmallSignal(
        conductance=g[:, :size, :size],
        capacitance=c[:, :size, :size],
        output_rows=equations.output_rows,
        internal_columns=equations.gain_rows,
        state_columns=states,
        linear=linear,
        converged=points.converged,
        amplifiers=tuple(network.amplifiers),
        widest=widest,
    )


@dataclass
class _Stamp:
    """Puts capacitances between nodes into the matrix; fixed nodes fall into the last row."""

    matrix: Array
    rows: list[int]

    def add(self, a: int, b: int, value: Array) -> None:
        i, j = self.rows[a], self.rows[b]
        self.matrix[:, i, i] += value
        self.matrix[:, j, j] += value
        self.matrix[:, i, j] -= value
        self.matrix[:, j, i] -= value


def _amplifier_poles(
    points: Solution, p: Parameters, g: Array, c: Array, rows: IntArray, states: IntArray, linear: BoolArray
) -> None:
    count = len(g)
    for i, ref in enumerate(points.network.amplifiers):
        row, state, on = rows[i], states[i], linear[:, i]
        gain = points.values.gain[:, i]
        second = columns([p.of(ref, "second_pole", np.inf)], count)[:, 0]
        bandwidth = columns([p.of(ref, "gain_bandwidth")], count)[:, 0]
        # saturated amplifiers keep the row of the operating point; their state just follows
        g[:, row, row] = np.where(on, 0.0, g[:, row, row])
        g[:, row, state] = np.where(on, -1 / gain, 0.0)
        c[:, row, state] = np.where(on, -1 / (2 * np.pi * bandwidth), 0.0)
        g[:, state, state] = 1.0
        g[:, state, row] = np.where(on, -1.0, 0.0)
        c[:, state, row] = np.where(on, -1 / (2 * np.pi * second), 0.0)


def _transistor_charges(points: Solution, p: Parameters, stamp: _Stamp) -> None:
    network = points.network
    tangents = points.equations.junction_voltages(points.state_vector.x, points.values)
    response = transistor.respond(tangents.v_be, tangents.v_bc, points.values.transistor)
    for i, ref in enumerate(network.transistors):
        collector, base, emitter = network.terminals[i]
        stored = p.of(ref, "transit_time") * response.transport_be[:, i]
        stamp.add(base, emitter, p.of(ref, "emitter_capacitance") + stored)
        stamp.add(base, collector, p.of(ref, "collector_capacitance"))


def _diode_charges(points: Solution, p: Parameters, stamp: _Stamp) -> None:
    voltage = points.equations.junction_voltages(points.state_vector.x, points.values).diode
    _, conductance = diode.respond(voltage, points.values.diode)
    for i, element in enumerate(points.network.diodes):
        ref, kind = element.key
        stored = p.of(ref, "transit_time") * conductance[:, i] if kind == "junction" else np.zeros(1)
        stamp.add(element.a, element.b, p.of(ref, "capacitance") + stored)


def _capacitors(points: Solution, p: Parameters, stamp: _Stamp) -> None:
    network = points.network
    ground = next(i for n, i in network.nodes.items() if n in p.design.nets and p.design.nets[n].role == "ground")
    for ref, part in p.design.parts.items():
        pins = [network.nodes[n] for n in part.pins.values()]
        if part.kind == "capacitor":
            stamp.add(pins[0], pins[1], p.of(ref, "value"))
        if part.kind == "op-amp":
            plus, minus = network.nodes[part.pins["IN+"]], network.nodes[part.pins["IN-"]]
            stamp.add(plus, minus, p.of(ref, "input_capacitance"))
            for node in (plus, minus):
                stamp.add(node, ground, p.of(ref, "common_mode_capacitance"))
    for name, net in p.design.nets.items():
        for key in ("load_capacitance", "source_capacitance"):
            if getattr(net, key) is not None and name in network.nodes:
                stamp.add(network.nodes[name], ground, p.of(name, key))
