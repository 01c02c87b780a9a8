"""Adjoint of the coupled electrical and thermal equations: what an output owes to every element value.

With residuals ``F(x, T, p) = 0`` of the nodal equations and ``T = ambient + rise·P(x, T, p)`` of the packages,
one transposed solve of the nodal equations gives ``λ`` of the output, and ``Λ`` of the power in each package.
The temperatures are few, and are eliminated by a small system of their own. Then
``dy/dp = −(λ − Λ·w)·∂F/∂p − w·∂P/∂p`` for any number of parameters, without another solve.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..devices import diode, transistor
from ..devices.constants import Array
from .equations import Equations
from .spreads import Move, moved
from .thermal import build_thermal
from .values import Parameters, Values, compute_values, take
from .weighted import HEATING, Excerpt, WeightedEquations, Weights, excerpt

if TYPE_CHECKING:
    from .solution import Solution

TEMPERATURE_STEP = 1e-3  # K: a saturation current changes by 1e-4 of itself
SOURCE_ROLES = ("voltage", "voltage_tempco", "input")


class Adjoint:
    """Slopes of one net's voltage in any parameters, at all operating points of a solution.

    Parameters
    ----------
    solution : Solution
    net : str
        As named in the solution.
    """

    def __init__(self, solution: Solution, net: str) -> None:
        self.solution = solution
        self.rows = np.flatnonzero(solution.converged)
        self.network = solution.network
        self.x = solution.state_vector.x[self.rows]
        self.conditions = solution.conditions.take(self.rows)
        self._temperatures: dict[str, Array] = {}
        values = take(solution.values, self.rows)
        self._set_up_heat()
        voltages = solution.equations.node_voltages(self.x, values)
        self.equations = WeightedEquations(solution.equations, self.x, voltages, self.heated)
        self.weights = self._weights(values, self.network.nodes[net])

    def slope(self, moves: tuple[Move, ...], step: float) -> Array:
        """Derivative of the output in a deviation, shape (conditions,); NaN where not converged.

        Parameters
        ----------
        moves : tuple of Move
            Named as in the solution.
        step : float
            Difference over which element values, not solutions, are compared.
        """
        owners = {move.owner for move in moves}
        sources = {move.owner for move in moves if move.key in SOURCE_ROLES}
        part = excerpt(self.network, owners - sources | self._driven(sources), sources | self._hidden(sources))
        sides = []
        for amount in (step, -step):
            overrides, conditions = moved(self.network.design, self.conditions, [(moves, amount)])
            parameters = Parameters(self.network.design, {**self.solution.parameters.overrides, **overrides})
            values = compute_values(part.network, conditions, self._temperature, parameters)
            sides.append(self.equations.terms(part, values, self.weights))
        found = np.full(self.solution.converged.shape, np.nan)
        found[self.rows] = (sides[0] - sides[1]).sum(axis=1) / (2 * step)
        return found

    def _driven(self, sources: set[str]) -> set[str]:
        """Inputs among sources that are currents, so that an element is theirs."""
        return {e.key[0] for e in self.network.sources if e.key[1] in ("drive", "photocurrent")} & sources

    @staticmethod
    def _hidden(sources: set[str]) -> set[str]:
        return {f"{name}.source" for name in sources}

    def _temperature(self, ref: str) -> Array:
        if ref not in self._temperatures:
            self._temperatures[ref] = self.solution.temperature(ref)[self.rows]
        return self._temperatures[ref]

    def _set_up_heat(self) -> None:
        """Find the thermal nodes that any power warms, and the parts on them."""
        design = self.network.design
        thermal = build_thermal(design)
        warm = np.flatnonzero(thermal.rise.any(axis=1))
        self.rise = thermal.rise[np.ix_(warm, warm)]
        place = {int(node): i for i, node in enumerate(warm)}
        self.on_node = [{ref for ref, node in thermal.node.items() if place.get(node) == i} for i in range(len(warm))]
        self.heated = {
            ref: i
            for i, refs in enumerate(self.on_node)
            for ref in refs & thermal.heated
            if design.parts[ref].kind in HEATING
        }

    def _weights(self, values: Values, output: int) -> Weights:
        equations = self.solution.equations
        count, size, nodes = len(self.rows), equations.size, len(self.rise)
        right = np.zeros((count, size + 1, 1 + nodes))
        right[:, self.network.row(output), 0] = 1.0
        right[:, :, 1:] = self._power_gradient(values)
        tangents = equations.junction_voltages(self.x, values)
        jacobian = equations.evaluate(self.x, tangents, values, equations.linear_matrix(values))[1]
        solved = np.zeros_like(right)
        solved[:, :size] = _solve_transposed(jacobian, right[:, :size])
        lam, power = solved[:, :, 0], solved[:, :, 1:]
        w = self._temperature_weights(lam, power)
        heat = np.concatenate([-w, np.zeros((count, 1))], axis=1)
        return Weights(-lam + np.einsum("rik,rk->ri", power, w), heat)

    def _temperature_weights(self, lam: Array, power: Array) -> Array:
        """What the output owes to the power in each heated node, temperatures coupled [V/W]."""
        count, nodes = len(self.rows), len(self.rise)
        if not nodes:
            return np.zeros((count, 0))
        along = np.empty((count, nodes))
        feedback = np.empty((count, nodes, nodes))
        none = np.zeros((count, nodes + 1))
        for j in range(nodes):
            part = excerpt(self.network, self.on_node[j], set())
            hot, cold = (self._values_at(part, j, step) for step in (TEMPERATURE_STEP, -TEMPERATURE_STEP))
            along[:, j] = self._change(part, hot, cold, Weights(lam, none))
            for k in range(nodes):
                unit = none.copy()
                unit[:, k] = 1.0
                feedback[:, k, j] = self._change(part, hot, cold, Weights(-power[:, :, k], unit))
        coupled = np.eye(nodes) - self.rise @ feedback
        return _solve_transposed(coupled, along[..., None])[..., 0] @ self.rise

    def _change(self, part: Excerpt, hot: Values, cold: Values, weights: Weights) -> Array:
        difference = self.equations.terms(part, hot, weights) - self.equations.terms(part, cold, weights)
        return difference.sum(axis=1) / (2 * TEMPERATURE_STEP)

    def _values_at(self, part: Excerpt, node: int, warmer: float) -> Values:
        def temperature(ref: str) -> Array:
            return self._temperature(ref) + (warmer if ref in self.on_node[node] else 0.0)

        return compute_values(part.network, self.conditions, temperature, self.solution.parameters)

    def _power_gradient(self, values: Values) -> Array:
        """Derivatives of the powers in the heated nodes by the unknowns, shape (conditions, unknowns + 1, nodes)."""
        gradient = _PowerGradient(self.solution.equations, self.x, values, self.heated, len(self.rise))
        return gradient.total


class _PowerGradient:
    """Powers differentiated by the unknowns; written as in `WeightedEquations`."""

    def __init__(
        self, equations: Equations, x: Array, values: Values, heated: dict[str, int], nodes: int
    ) -> None:  # fmt: skip
        self.network, self.x, self.values, self.heated = equations.network, x, values, heated
        self.equations = equations
        self.v = equations.node_voltages(x, values)
        self.total = np.zeros((len(x), equations.size + 1, nodes))
        if heated:
            self._two_terminal()
            self._transistors()
            self._amplifiers()
        self.total[:, -1] = 0.0  # fixed nodes do not move

    def _add(self, node: int, place: int, amount: Array) -> None:
        self.total[:, self.network.row(node), place] += amount

    def _across(self, a: int, b: int) -> Array:
        return self.v[:, a] - self.v[:, b]

    def _two_terminal(self) -> None:
        """Resistors and diodes, the halves of potentiometers, and the supply currents of amplifiers."""
        network, values = self.network, self.values
        tangents = self.equations.junction_voltages(self.x, values)
        current, conductance = diode.respond(tangents.diode, values.diode)
        for i, e in enumerate(network.resistors):
            if e.key[0] in self.heated and e.key[1] not in ("load", "source_resistance"):
                slope = 2 * values.conductance[:, i] * self._across(e.a, e.b)
                self._pair(e.a, e.b, e.key[0], slope)
        for i, e in enumerate(network.diodes):
            if e.key[0] in self.heated:
                self._pair(e.a, e.b, e.key[0], current[:, i] + conductance[:, i] * self._across(e.a, e.b))
        for i, e in enumerate(network.branches):
            if e.key[0] in self.heated:
                self._pair(e.a, e.b, e.key[0], self.x[:, network.branch_row(i)])
                self.total[:, network.branch_row(i), self.heated[e.key[0]]] += self._across(e.a, e.b)
        for i, e in enumerate(network.sources):
            if e.key[0] in self.heated and e.key[1] == "supply_current":
                self._pair(e.a, e.b, e.key[0], values.source[:, i])

    def _pair(self, a: int, b: int, ref: str, slope: Array) -> None:
        self._add(a, self.heated[ref], slope)
        self._add(b, self.heated[ref], -slope)

    def _transistors(self) -> None:
        tangents = self.equations.junction_voltages(self.x, self.values)
        response = transistor.respond(tangents.v_be, tangents.v_bc, self.values.transistor)
        for i, ref in enumerate(self.network.transistors):
            if ref not in self.heated:
                continue
            c, b, e = (int(node) for node in self.network.terminals[i])
            ce, be, sign = self._across(c, e), self._across(b, e), self.values.polarity[0, i]
            by_be = ce * response.dc_be[:, i] + be * response.db_be[:, i]
            by_bc = ce * response.dc_bc[:, i] + be * response.db_bc[:, i]
            collector, base = sign * response.collector[:, i], sign * response.base[:, i]
            place = self.heated[ref]
            self._add(c, place, collector - by_bc)
            self._add(b, place, base + by_be + by_bc)
            self._add(e, place, -collector - base - by_be)

    def _amplifiers(self) -> None:
        """What flows between output and rails; supply currents are with the two-terminal elements."""
        for i, ref in enumerate(self.network.amplifiers):
            if ref not in self.heated:
                continue
            place, row = self.heated[ref], self.network.output_row(i)
            _, _, out, high, low = (int(node) for node in self.network.pins[i])
            current = self.x[:, row]
            sourced = current > 0
            self.total[:, row, place] += np.where(sourced, self._across(high, out), self._across(low, out))
            self._add(high, place, np.where(sourced, current, 0.0))
            self._add(low, place, np.where(sourced, 0.0, current))
            self._add(out, place, -current)


def _solve_transposed(matrix: Array, right: Array) -> Array:
    """Solution of the transposed systems of a batch; NaN where a matrix is singular."""
    turned = matrix.transpose(0, 2, 1)
    try:
        return np.linalg.solve(turned, right)
    except np.linalg.LinAlgError:
        singular = np.linalg.slogdet(turned)[0] == 0
        found = np.linalg.solve(np.where(singular[:, None, None], np.eye(matrix.shape[-1]), turned), right)
        found[singular] = np.nan
        return found
