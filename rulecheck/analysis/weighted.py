"""The nodal equations and dissipations summed under weights, for changes of element values at a fixed state.

The adjoint method asks how ``λ·F + h·P`` depends on an element value: F the residuals of the nodal equations,
P the powers in the packages, λ and h their weights. Most elements are a current between two nodes, and what
counts of it is the difference of the weights there.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..devices import amplifier, diode, transistor
from ..devices.constants import Array, IntArray
from .equations import Equations
from .network import Element, Network
from .values import Values

HEATING = ("npn", "pnp", "op-amp", "resistor", "diode", "potentiometer")
"""Kinds of parts whose currents heat their package."""


@dataclass(frozen=True)
class Weights:
    """Weights of the nodal equations and of the powers, at the states of some conditions.

    Attributes
    ----------
    rows : ndarray, shape (conditions, unknowns + 1)
        Of the nodal equations; the last is of fixed nodes, 0.
    heat : ndarray, shape (conditions, heated nodes + 1)
        Of the powers; the last is of parts that do not heat, 0.
    """

    rows: Array
    heat: Array


@dataclass(frozen=True)
class Excerpt:
    """The elements of a network that a change touches.

    Attributes
    ----------
    network : Network
        With these elements only; its nodes are the fixed ones that move.
    transistors, amplifiers, branches, fixed : ndarray of int
        Places of its elements, and of its nodes, in the whole network.
    """

    network: Network
    transistors: IntArray
    amplifiers: IntArray
    branches: IntArray
    fixed: IntArray


def excerpt(network: Network, owners: set[str], nodes: set[str]) -> Excerpt:
    """Elements of some owners (parts, or nets with a load or source), and all on some fixed nodes."""
    names = [name for name in network.fixed if name in nodes]
    fixed = np.array([network.nodes[name] for name in names], dtype=np.intp)

    def touched(elements: list[Element]) -> list[int]:
        return [i for i, e in enumerate(elements) if e.key[0] in owners or e.a in fixed or e.b in fixed]

    def chosen(refs: list[str], pins: IntArray) -> IntArray:
        on = np.isin(pins, fixed)
        return np.array([i for i, ref in enumerate(refs) if ref in owners or on[i].any()], dtype=np.intp)

    branches = touched(network.branches)
    transistors, amplifiers = (
        chosen(network.transistors, network.terminals),
        chosen(network.amplifiers, network.pins),
    )
    part = Network(
        network.design,
        with_clamps=False,
        nodes={name: i for i, name in enumerate(names)},
        resistors=[network.resistors[i] for i in touched(network.resistors)],
        branches=[network.branches[i] for i in branches],
        sources=[network.sources[i] for i in touched(network.sources)],
        diodes=[network.diodes[i] for i in touched(network.diodes)],
        transistors=[network.transistors[i] for i in transistors],
        amplifiers=[network.amplifiers[i] for i in amplifiers],
        terminals=network.terminals[transistors],
        pins=network.pins[amplifiers],
    )
    return Excerpt(part, transistors, amplifiers, np.array(branches, dtype=np.intp), fixed)


class WeightedEquations:
    """Terms of ``λ·F + h·P`` of a network at one state.

    Parameters
    ----------
    equations : Equations
    x : ndarray, shape (conditions, unknowns)
    voltages : ndarray, shape (conditions, nodes)
    heated : dict of str to int
        Heated node by part, for parts whose currents heat it.
    """

    def __init__(self, equations: Equations, x: Array, voltages: Array, heated: dict[str, int]) -> None:
        self.equations, self.network = equations, equations.network
        self.x, self.voltages, self.heated = x, voltages, heated

    def terms(self, part: Excerpt, values: Values, weights: Weights) -> Array:
        """Terms that depend on the values of an excerpt, shape (conditions, terms).

        Those of powers are written by internal nodes and with the terminal resistances as heaters of their own,
        which is the same at a solution.
        """
        v = self.voltages
        if part.fixed.size:
            v = v.copy()
            v[:, part.fixed] = values.fixed
        groups = [
            self._two_terminal(part, v, values, weights),
            self._branches(part, v, values, weights),
            self._transistors(part, v, values, weights),
            self._amplifiers(part, v, values, weights),
        ]
        return np.concatenate(groups, axis=1)

    def _drops(self, elements: list[Element], v: Array, weights: Weights) -> tuple[Array, Array]:
        """Voltages across elements, and what a current through them weighs."""
        a, b = (np.array([getattr(e, end) for e in elements], dtype=np.intp) for end in ("a", "b"))
        rows = self.network.rows
        across = v[:, a] - v[:, b]
        heat = weights.heat[:, [self._heats(e) for e in elements]]
        return across, weights.rows[:, rows(a)] - weights.rows[:, rows(b)] + heat * across

    def _heats(self, element: Element) -> int:
        owner, role = element.key
        # the bias currents of an amplifier do not count as heat, its supply current does
        return -1 if role in ("IN+", "IN-", "load", "source_resistance") else self.heated.get(owner, -1)

    def _two_terminal(self, part: Excerpt, v: Array, values: Values, weights: Weights) -> Array:
        network = part.network
        across, weight = self._drops(network.resistors, v, weights)
        resistors = values.conductance * across * weight
        sources = values.source * self._drops(network.sources, v, weights)[1]
        across, weight = self._drops(network.diodes, v, weights)
        diodes = diode.respond(across, values.diode)[0] * weight
        return np.concatenate([resistors, sources, diodes], axis=1)

    def _branches(self, part: Excerpt, v: Array, values: Values, weights: Weights) -> Array:
        columns = self.network.free + part.branches
        current = self.x[:, columns]
        across, flow = self._drops(part.network.branches, v, weights)
        law = across - values.branch_resistance * current - values.branch_voltage
        return law * weights.rows[:, columns] + current * flow

    def _transistors(self, part: Excerpt, v: Array, values: Values, weights: Weights) -> Array:
        terminals, sign = part.network.terminals, values.polarity
        c, b, e = (v[:, terminals[:, i]] for i in range(3))
        into_c, into_b, into_e = (weights.rows[:, self.network.rows(terminals[:, i])] for i in range(3))
        heat = weights.heat[:, [self.heated.get(ref, -1) for ref in part.network.transistors]]
        response = transistor.respond((b - e) * sign, (b - c) * sign, values.transistor)
        collector = sign * response.collector * (into_c - into_e + heat * (c - e))
        return collector + sign * response.base * (into_b - into_e + heat * (b - e))

    def _amplifiers(self, part: Excerpt, v: Array, values: Values, weights: Weights) -> Array:
        i = part.amplifiers
        plus, minus, out, high, low = (v[:, part.network.pins[:, k]] for k in range(5))
        current, u = self.x[:, self.equations.output_rows[i]], self.x[:, self.equations.gain_rows[i]]
        least, most = low + values.low_headroom, high - values.high_headroom
        heat = weights.heat[:, [self.heated.get(ref, -1) for ref in part.network.amplifiers]]
        drive = out + values.output_resistance * current - amplifier.internal_output(u, least, most)
        wanted = plus - minus + values.offset - amplifier.differential_input(u, values.gain, least, most)
        total = drive * weights.rows[:, self.equations.output_rows[i]]
        total = total + wanted * weights.rows[:, self.equations.gain_rows[i]]
        power = np.maximum(current, 0) * (high - out) + np.minimum(current, 0) * (low - out)
        return np.where(most > least, total, 0.0) + heat * power
