"""The solution of one circuit at a batch of conditions, with self-heating."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from ..devices.constants import AnyArray, Array, BoolArray
from .equations import Currents, Equations
from .network import Network, build_network
from .newton import State, solve
from .thermal import build_thermal
from .values import Overrides, Parameters, Values, compute_values

if TYPE_CHECKING:
    from ..design.model import Design
    from .conditions import Conditions

TEMPERATURE_STEP = 1e-7  # K: far inside 1 mK, so that voltages keep 1e-6 of reading
THERMAL_ROUNDS = 60
SWINGING = 0.8  # of the last change: slower than this is no approach
LEAST_TEMPERATURE, MOST_TEMPERATURE = 1.0, 2000.0  # K


class Solution:
    """Solved operating points of one circuit; arrays have the conditions first and are NaN where not converged.

    Attributes
    ----------
    conditions : Conditions
    converged : ndarray of bool, shape (conditions,)
    """

    def __init__(
        self, network: Network, equations: Equations, conditions: Conditions, values: Values, state: State,
        temperatures: dict[str, Array], parameters: Parameters,
    ) -> None:  # fmt: skip
        self.network = network
        self.equations = equations
        self.conditions = conditions
        self.values = values
        self.state_vector = state
        self.parameters = parameters
        self.converged: BoolArray = state.converged
        self._temperatures = temperatures
        self._voltages = _blank(equations.node_voltages(state.x, values), self.converged)
        self._currents = _currents(equations, values, state)

    def voltage(self, net: str) -> Array:
        """Voltage of a net (or of an internal node ``REF.pin``) [V]."""
        return self._voltages[:, self.network.nodes[net]]

    def temperature(self, part: str) -> Array:
        """Temperature of a part, of its junction where it has one [K]."""
        return _blank(self._temperatures.get(part, self.conditions.values["ambient"]), self.converged)

    def vbe(self, part: str) -> Array:
        """Base-emitter voltage between terminals, signed [V]."""
        pins = self.network.design.parts[part].pins
        return self.voltage(pins["B"]) - self.voltage(pins["E"])

    def vce(self, part: str) -> Array:
        """Collector-emitter voltage between terminals, signed [V]."""
        pins = self.network.design.parts[part].pins
        return self.voltage(pins["C"]) - self.voltage(pins["E"])

    def state(self, amplifier: str) -> AnyArray:
        """State of an amplifier: ``linear``, ``high``, ``low`` or ``unpowered``, array of str."""
        i = self.network.amplifiers.index(amplifier)
        low, high, powered = self.equations.limits(self._all_voltages, self.values)
        u = self.state_vector.x[:, self.equations.gain_rows[i]]
        out = np.where(u > high[:, i], "high", np.where(u < low[:, i], "low", "linear"))
        return np.where(powered[:, i], out, "unpowered")

    def limits(self, amplifier: str) -> tuple[Array, Array]:
        """Low and high limit of an amplifier's internal output [V]."""
        i = self.network.amplifiers.index(amplifier)
        low, high, _ = self.equations.limits(self._all_voltages, self.values)
        return _blank(low[:, i], self.converged), _blank(high[:, i], self.converged)

    def linear(self, amplifier: str) -> BoolArray:
        """Whether an amplifier is inside its limits (and the point converged)."""
        return np.asarray(self.state(amplifier) == "linear") & self.converged

    def current(self, part: str, pin: str) -> Array:
        """Current into a pin of a part [A]."""
        kind = self.network.design.parts[part].kind
        found = _PIN_CURRENT[kind](self, part, pin)
        return _blank(np.broadcast_to(found, self.converged.shape).copy(), self.converged)

    def clamp_currents(self) -> dict[str, Array]:
        """Currents of the input clamps and drive limits by name (``U1.IN-.hi``: from IN- to V+) [A]."""
        return {
            f"{ref}.{name}": _blank(self._currents.clamp[:, i], self.converged)
            for i, (ref, name) in enumerate(e.key for e in self.network.clamps)
        }

    def dissipation(self, part: str) -> Array:
        """Power turned to heat in a transistor, amplifier, diode or resistor [W]."""
        return _blank(_dissipation(self.network, self._all_voltages, self._currents, self.values, part), self.converged)

    def moved_last(self) -> list[str]:
        """For each condition the net that moved most in the last step of the solver."""
        nodes = list(self.network.nodes)
        return [nodes[int(i)] for i in self.state_vector.moved]

    @property
    def _all_voltages(self) -> Array:
        return self.equations.node_voltages(self.state_vector.x, self.values)


def _blank(array: Array, converged: BoolArray) -> Array:
    mask = converged if array.ndim == 1 else converged[:, None]
    return np.where(mask, array, np.nan)


def _currents(equations: Equations, values: Values, state: State) -> Currents:
    linear = equations.linear_matrix(values)
    tangents = equations.junction_voltages(state.x, values)
    return equations.evaluate(state.x, tangents, values, linear)[3]


def _two_terminal(kind: str) -> Callable[[Solution, str, str], Array]:
    def current(points: Solution, part: str, pin: str) -> Array:
        return _along(points.network, points._currents, points.values, part, pin)

    current.__name__ = kind
    return current


def _along(network: Network, currents: Currents, values: Values, part: str, pin: str) -> Array:
    """Current into `pin` of a part made of two-terminal elements."""
    node = network.nodes[network.design.parts[part].pins[pin]]
    total = np.zeros(1)
    groups = (
        (network.resistors, currents.resistor), (network.branches, currents.branch),
        (network.diodes, currents.diode), (network.sources, values.source),
    )  # fmt: skip
    for elements, amounts in groups:
        for i, e in enumerate(elements):
            if e.key[0] == part:
                total = total + (amounts[:, i] if e.a == node else 0) - (amounts[:, i] if e.b == node else 0)
    return total


def _transistor_current(points: Solution, part: str, pin: str) -> Array:
    i = points.network.transistors.index(part)
    c, b = points._currents.collector[:, i], points._currents.base[:, i]
    return {"C": c, "B": b, "E": -c - b}[pin]


def _amplifier_current(points: Solution, part: str, pin: str) -> Array:
    i = points.network.amplifiers.index(part)
    out = points._currents.output[:, i]
    if pin == "OUT":
        return -out
    keys = {e.key: j for j, e in enumerate(points.network.sources)}
    if pin in ("IN+", "IN-"):
        return points.values.source[:, keys[part, pin]]
    supply = points.values.source[:, keys[part, "supply_current"]]
    return supply + np.maximum(out, 0) if pin == "V+" else -supply + np.minimum(out, 0)


def _no_current(points: Solution, part: str, pin: str) -> Array:
    return np.zeros(points.converged.shape)


_PIN_CURRENT: dict[str, Callable[[Solution, str, str], Array]] = {
    **{k: _two_terminal(k) for k in ("resistor", "potentiometer", "diode", "photodiode", "voltage-source",
                                     "current-source")},
    "npn": _transistor_current, "pnp": _transistor_current, "op-amp": _amplifier_current,
    "capacitor": _no_current, "connector": _no_current,
}  # fmt: skip


def _dissipation(network: Network, v: Array, currents: Currents, values: Values, part: str) -> Array:
    design = network.design
    kind, pins = (
        design.parts[part].kind,
        {p: v[:, network.nodes[n]] for p, n in design.parts[part].pins.items()},
    )
    if kind in ("npn", "pnp"):
        i = network.transistors.index(part)
        return (pins["C"] - pins["E"]) * currents.collector[:, i] + (pins["B"] - pins["E"]) * currents.base[:, i]
    if kind == "op-amp":
        out = currents.output[:, network.amplifiers.index(part)]
        quiet = values.source[:, [e.key for e in network.sources].index((part, "supply_current"))]
        sourced = np.maximum(out, 0) * (pins["V+"] - pins["OUT"])
        sunk = np.minimum(out, 0) * (pins["V-"] - pins["OUT"])
        return quiet * (pins["V+"] - pins["V-"]) + sourced + sunk
    if kind in ("resistor", "diode", "potentiometer"):
        flows = [(p, _along(network, currents, values, part, p)) for p in design.parts[part].pins]
        total: Array = np.sum([pins[p] * current for p, current in flows], axis=0)
        return total
    return np.zeros(len(v))


def solve_circuit(
    design: Design, conditions: Conditions, *, with_clamps: bool = False, overrides: Overrides | None = None,
    temperatures: Mapping[str, Array] | None = None, cache: dict[Any, Any] | None = None,
) -> Solution:  # fmt: skip
    """Operating points of one circuit, electrical and thermal solutions brought together.

    Parameters
    ----------
    design : Design
    conditions : Conditions
    with_clamps : bool
        Fault scenarios.
    overrides : mapping, optional
        Parameters in place of their nominal, see `Parameters`.
    temperatures : dict of str to ndarray, optional
        Part temperatures imposed in place of the computed ones [K].
    cache : dict, optional
        Solved states by all that they depend on; looked into and added to.

    Returns
    -------
    Solution
    """
    task = _Task(design, conditions, with_clamps, Parameters(design, overrides), temperatures or {})
    memory = {} if cache is None else cache
    key = task.key()
    if key not in memory:
        # a batch of the same shape and topology, solved before, is a start near by: what differs is a part's
        # value or a small step of an input, and the solution stays on the same branch
        near = task.topology()
        memory[key] = task.run(memory.get(near))
        memory.setdefault(near, memory[key][0])
    state, nodes = memory[key]
    temps = task.temperatures(nodes)
    return Solution(task.network, task.equations, conditions, task.values(nodes), state, temps, task.parameters)


class _Task:
    """One batch to solve: what it depends on, and the loop between currents and temperatures."""

    def __init__(
        self, design: Design, conditions: Conditions, with_clamps: bool, parameters: Parameters,
        imposed: Mapping[str, Array],
    ) -> None:  # fmt: skip
        self.network = build_network(design, with_clamps)
        self.equations = Equations(self.network)
        self.thermal = build_thermal(design)
        self.conditions, self.parameters, self.imposed = conditions, parameters, imposed

    @property
    def ambient(self) -> Array:
        return self.conditions.values["ambient"]

    def temperatures(self, nodes: Array) -> dict[str, Array]:
        """Temperatures of the parts that are not at ambient."""
        return {ref: nodes[:, i] for ref, i in self.thermal.node.items()} | dict(self.imposed)

    def values(self, nodes: Array) -> Values:
        temps = self.temperatures(nodes)
        return compute_values(self.network, self.conditions, lambda ref: temps.get(ref, self.ambient), self.parameters)

    def unheated(self) -> Array:
        """Temperatures of the thermal nodes without dissipation."""
        return self.thermal.temperatures(self.ambient, np.zeros((self.conditions.size, len(self.thermal.held))))

    def topology(self) -> str:
        """Digest of nodes, elements and number of conditions."""
        network, design = self.network, self.network.design
        lists = (network.resistors, network.branches, network.sources, network.diodes, network.clamps)
        kinds = [design.parts[r].kind for r in network.transistors]
        text = repr((lists, network.nodes, network.transistors, kinds, network.amplifiers, self.conditions.size))
        digest = hashlib.sha256(text.encode())
        for array in (network.terminals, network.pins):
            digest.update(array.tobytes())
        return digest.hexdigest()

    def key(self) -> str:
        """Digest of all that the solution depends on: topology, conditions, parameters read, thermal paths."""
        thermal, design = self.thermal, self.network.design
        self.values(self.unheated())  # reads every parameter that matters
        nets = [(n, net.role, net.tempco, net.compliance, net.source) for n, net in design.nets.items()]
        text = repr((self.topology(), nets, thermal.node, sorted(thermal.heated), [*self.imposed]))
        arrays = [thermal.rise, thermal.from_ambient, thermal.held, *self.conditions.values.values()]
        arrays += [*self.conditions.absent.values(), *self.imposed.values()]
        digest = hashlib.sha256(text.encode())
        for name, value in sorted(self.parameters.read.items()):
            digest.update(repr(name).encode() + value.tobytes())
        for array in arrays:
            digest.update(np.ascontiguousarray(array).tobytes())
        return digest.hexdigest()

    def run(self, state: State | None) -> tuple[State, Array]:
        """Solve (from `state`, if any), heat, and solve again until no temperature moves."""
        nodes = self.unheated()
        size = self.conditions.size
        change, share, lost = np.full(size, np.inf), np.ones(size), np.zeros(size, bool)
        for _ in range(THERMAL_ROUNDS):
            values = self.values(nodes)
            state = solve(self.equations, values, state, lost)
            lost = ~state.converged
            moved = self.heated(values, state, nodes)
            last, change = change, np.abs(moved - nodes).max(axis=1, initial=0.0)
            if (change[state.converged] < TEMPERATURE_STEP).all():
                return state, nodes
            # where the temperatures swing to and fro, smaller steps find the point between
            share = np.where(change > SWINGING * last, share / 2, share)
            nodes = nodes + share[:, None] * (moved - nodes)
        assert state is not None
        state.converged = state.converged & (change < TEMPERATURE_STEP)
        return state, nodes

    def heated(self, values: Values, state: State, nodes: Array) -> Array:
        """Temperatures of the thermal nodes for the dissipations at a state; kept where it did not converge."""
        if not self.thermal.rise.any():
            return nodes
        v = self.equations.node_voltages(state.x, values)
        currents = _currents(self.equations, values, state)
        power = np.zeros((self.conditions.size, len(self.thermal.held)))
        for ref, i in self.thermal.node.items():
            if ref in self.thermal.heated:
                power[:, i] += _dissipation(self.network, v, currents, values, ref)
        found = self.thermal.temperatures(self.ambient, power)
        # a runaway leaves the physical span; such a point is reported as not converged
        plausible = (found > LEAST_TEMPERATURE) & (found < MOST_TEMPERATURE)
        return np.where(state.converged[:, None] & plausible, found, nodes)
