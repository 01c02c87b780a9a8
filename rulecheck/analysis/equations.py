"""The nodal equations of a network: residual and Jacobian for a batch of conditions.

Row signs: a node's row is the sum of currents that leave it; it is zero at the solution.
Junctions enter by their tangent at a voltage of linearisation which Newton's method moves by bounded
steps; where that voltage is the junction's own, the residual is the true one.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..devices import amplifier, diode, transistor
from ..devices.constants import Array, BoolArray, Index, IntArray
from .network import Element, Network
from .values import Values

ROUNDING = 4 * float(np.finfo(float).eps)


@dataclass
class Tangents:
    """Voltages that junctions are linearised about, in npn sense, shape (conditions, devices) [V]."""

    v_be: Array
    v_bc: Array
    diode: Array

    def take(self, index: Index) -> Tangents:
        """The chosen conditions."""
        return Tangents(self.v_be[index], self.v_bc[index], self.diode[index])

    def put(self, index: Index, other: Tangents) -> None:
        """Write `other` into the chosen conditions."""
        self.v_be[index], self.v_bc[index], self.diode[index] = other.v_be, other.v_bc, other.diode


@dataclass(frozen=True)
class Aid:
    """A crutch for convergence: the rows ``weight·matrix·(x − anchor)`` are added.

    It serves conductances to ground, capacitors of a pseudo-transient step and amplifier lag alike,
    and is absent from every answer.
    """

    weight: Array
    matrix: Array
    anchor: Array

    def take(self, index: Index) -> Aid:
        """The chosen conditions."""
        return Aid(self.weight[index], self.matrix, self.anchor[index])


@dataclass(frozen=True)
class Currents:
    """Element currents at a state, shape (conditions, elements) [A]."""

    resistor: Array
    diode: Array
    clamp: Array
    branch: Array
    collector: Array
    base: Array
    output: Array


class Equations:
    """Residual and Jacobian of a network; the index arrays are laid out once."""

    def __init__(self, network: Network) -> None:
        self.network = network
        self.size = network.unknowns
        order = [*network.resistors, *network.sources, *network.diodes, *network.clamps, *network.branches]
        self.incidence = self._incidence(order)
        self.terminal_rows = network.rows(network.terminals)
        self.pin_rows = network.rows(network.pins)
        amps = np.arange(len(network.amplifiers))
        self.output_rows = network.free + len(network.branches) + amps
        self.gain_rows = self.output_rows + len(network.amplifiers)
        self.terminal_incidence = self._scatter(self.terminal_rows)

    def _incidence(self, elements: list[Element]) -> Array:
        matrix = np.zeros((len(elements), self.size + 1))
        for i, e in enumerate(elements):
            matrix[i, self.network.row(e.a)] += 1
            matrix[i, self.network.row(e.b)] -= 1
        return matrix

    def _scatter(self, rows: IntArray) -> Array:
        """Matrix that adds the columns of (conditions, devices·terminals) into their rows."""
        flat = rows.T.ravel().astype(int)
        matrix = np.zeros((flat.size, self.size + 1))
        matrix[np.arange(flat.size), flat] = 1
        return matrix

    def node_voltages(self, x: Array, values: Values) -> Array:
        """All node voltages, shape (conditions, nodes)."""
        return np.concatenate([x[:, : self.network.free], values.fixed], axis=1)

    def junction_voltages(self, x: Array, values: Values) -> Tangents:
        """Voltages of all junctions at a state."""
        v = self.node_voltages(x, values)
        c, b, e = (v[:, self.network.terminals[:, i]] for i in range(3))
        sign = values.polarity
        return Tangents((b - e) * sign, (b - c) * sign, self._across(v, self.network.diodes))

    @staticmethod
    def _across(v: Array, elements: list[Element]) -> Array:
        return v[:, [e.a for e in elements]] - v[:, [e.b for e in elements]]

    def limits(self, v: Array, values: Values) -> tuple[Array, Array, BoolArray]:
        """Low and high output limits of amplifiers [V], and whether they are powered."""
        pins = self.network.pins
        low = v[:, pins[:, 4]] + values.low_headroom
        high = v[:, pins[:, 3]] - values.high_headroom
        return low, high, high > low

    def linear_matrix(self, values: Values, aid: Aid | None = None) -> Array:
        """The part of the Jacobian that no iterate changes, shape (conditions, unknowns+1, unknowns+1)."""
        count = values.fixed.shape[0]
        jacobian = np.zeros((count, self.size + 1, self.size + 1))
        for i, e in enumerate(self.network.resistors):
            self._stamp(jacobian, self.network.row(e.a), self.network.row(e.b), values.conductance[:, i])
        for i, e in enumerate(self.network.branches):
            row, a, b = self.network.branch_row(i), self.network.row(e.a), self.network.row(e.b)
            jacobian[:, a, row] += 1
            jacobian[:, b, row] -= 1
            jacobian[:, row, a] += 1
            jacobian[:, row, b] -= 1
            jacobian[:, row, row] -= values.branch_resistance[:, i]
        if aid is not None:
            jacobian += aid.weight[:, None, None] * aid.matrix
        return jacobian

    @staticmethod
    def _stamp(jacobian: Array, a: int, b: int, g: Array) -> None:
        jacobian[:, a, a] += g
        jacobian[:, b, b] += g
        jacobian[:, a, b] -= g
        jacobian[:, b, a] -= g

    def evaluate(
        self, x: Array, tangents: Tangents, values: Values, linear: Array, aid: Aid | None = None
    ) -> tuple[Array, Array, Array, Currents]:
        """Residual, Jacobian, residual tolerance and currents at a state.

        Parameters
        ----------
        x : ndarray, shape (conditions, unknowns)
        tangents : Tangents
        values : Values
        linear : ndarray
            From `linear_matrix`.
        aid : Aid, optional

        Returns
        -------
        residual : ndarray, shape (conditions, unknowns)
        jacobian : ndarray, shape (conditions, unknowns, unknowns)
        tolerance : ndarray, shape (conditions, unknowns)
        currents : Currents
        """
        v = self.node_voltages(x, values)
        jacobian = linear.copy()
        actual = self.junction_voltages(x, values)
        currents = self._currents(x, v, actual, tangents, values, jacobian)
        stacked = np.concatenate(
            [currents.resistor, values.source, currents.diode, currents.clamp, currents.branch], axis=1
        )
        terminals = np.concatenate([currents.collector, currents.base, -currents.collector - currents.base], axis=1)
        residual = stacked @ self.incidence + terminals @ self.terminal_incidence
        scale = np.abs(stacked) @ np.abs(self.incidence) + np.abs(terminals) @ self.terminal_incidence
        rounding = values.conductance * np.abs(v[:, [e.a for e in self.network.resistors]])
        floor = rounding @ np.abs(self.incidence[: len(self.network.resistors)])
        self._branch_rows(residual, v, x, values)
        self._amplifier_rows(residual, jacobian, v, x, values)
        if aid is not None:
            residual[:, : self.size] += aid.weight[:, None] * (
                (x - aid.anchor) @ aid.matrix[: self.size, : self.size].T
            )
        tolerance = 1e-15 + 3e-10 * scale + ROUNDING * floor
        tolerance[:, self.network.free :] = 1e-9
        n = self.size
        return residual[:, :n], jacobian[:, :n, :n], tolerance[:, :n], currents

    def _currents(
        self, x: Array, v: Array, actual: Tangents, tangents: Tangents, values: Values, jacobian: Array
    ) -> Currents:
        network = self.network
        response = transistor.respond(tangents.v_be, tangents.v_bc, values.transistor)
        d_be, d_bc = actual.v_be - tangents.v_be, actual.v_bc - tangents.v_bc
        sign = values.polarity
        collector = sign * (response.collector + response.dc_be * d_be + response.dc_bc * d_bc)
        base = sign * (response.base + response.db_be * d_be + response.db_bc * d_bc)
        for i, (c, b, e) in enumerate(self.terminal_rows):
            stamp_transistor(jacobian, (c, b, e), response, i)
        current, g = diode.respond(tangents.diode, values.diode)
        for i, element in enumerate(network.diodes):
            self._stamp(jacobian, network.row(element.a), network.row(element.b), g[:, i])
        across = self._across(v, network.clamps)
        clamp, g_clamp = diode.respond_with_resistance(across, values.clamp, diode.CLAMP_RESISTANCE)
        for i, element in enumerate(network.clamps):
            self._stamp(jacobian, network.row(element.a), network.row(element.b), g_clamp[:, i])
        first = network.free
        return Currents(
            resistor=values.conductance * self._across(v, network.resistors),
            diode=current + g * (actual.diode - tangents.diode),
            clamp=clamp,
            branch=x[:, first : first + len(network.branches)],
            collector=collector,
            base=base,
            output=x[:, self.output_rows],
        )

    def _branch_rows(self, residual: Array, v: Array, x: Array, values: Values) -> None:
        first = self.network.free
        last = first + len(self.network.branches)
        drop = self._across(v, self.network.branches)
        residual[:, first:last] = drop - values.branch_resistance * x[:, first:last] - values.branch_voltage

    def _amplifier_rows(self, residual: Array, jacobian: Array, v: Array, x: Array, values: Values) -> None:
        low, high, powered = self.limits(v, values)
        pins = self.network.pins
        for i in range(len(self.network.amplifiers)):
            plus, minus, out, v_pos, v_neg = self.pin_rows[i]
            row, gain_row = self.output_rows[i], self.gain_rows[i]
            current, u = x[:, row], x[:, gain_row]
            on = powered[:, i]
            lo, hi, gain = low[:, i], high[:, i], values.gain[:, i]
            r = values.output_resistance[:, i]
            node = v[:, pins[i]]
            residual[:, out] -= current
            residual[:, v_pos] += np.maximum(current, 0)
            residual[:, v_neg] += np.minimum(current, 0)
            jacobian[:, out, row] -= 1
            jacobian[:, v_pos, row] += current > 0
            jacobian[:, v_neg, row] += current < 0
            drive = node[:, 2] + r * current - amplifier.internal_output(u, lo, hi)
            wanted = node[:, 0] - node[:, 1] + values.offset[:, i] - amplifier.differential_input(u, gain, lo, hi)
            residual[:, row] = np.where(on, drive, current)
            residual[:, gain_row] = np.where(on, wanted, u)
            above, below = on & (u > hi), on & (u < lo)
            inside = on & ~above & ~below
            jacobian[:, row, out] += on
            jacobian[:, row, row] += np.where(on, r, 1)
            jacobian[:, row, gain_row] -= inside
            jacobian[:, row, v_pos] -= above
            jacobian[:, row, v_neg] -= below
            jacobian[:, gain_row, plus] += on
            jacobian[:, gain_row, minus] -= on
            jacobian[:, gain_row, gain_row] += np.where(inside, -1 / gain, np.where(on, -1, 1))
            jacobian[:, gain_row, v_pos] += np.where(above, 1 - 1 / gain, 0)
            jacobian[:, gain_row, v_neg] += np.where(below, 1 - 1 / gain, 0)


def stamp_transistor(
    matrix: Array, rows: tuple[int, int, int], response: transistor.TransistorResponse, index: int
) -> None:
    """Add the conductances of one transistor to a batch of matrices; rows are collector, base, emitter."""
    c, b, e = rows
    columns = ((b, 1, 1), (e, -1, 0), (c, 0, -1))
    for node, by_be, by_bc in columns:
        into_c = response.dc_be[:, index] * by_be + response.dc_bc[:, index] * by_bc
        into_b = response.db_be[:, index] * by_be + response.db_bc[:, index] * by_bc
        matrix[:, c, node] += into_c
        matrix[:, b, node] += into_b
        matrix[:, e, node] -= into_c + into_b
