"""Starts of the search for second operating points: parts pushed aside, and states of fault scenarios."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from ..devices.constants import Array, Index, IntArray
from ..devices.junction import critical_voltage
from .conditions import Conditions
from .network import Network
from .newton import State, iterate
from .settling import settle
from .solution import Solution
from .values import Values, compute_values, take

PUSH = 1e3  # V at the input of an amplifier: beyond what any feedback brings
CUT = -5.0  # V on the base-emitter voltage of a transistor
ITERATIONS = 80


@dataclass(frozen=True)
class Push:
    """A part that is held aside while the rest of its circuit settles.

    Attributes
    ----------
    part : str
        Amplifier or transistor.
    words : str
        How it is held.
    volts : float
        Added to the input of the amplifier, or to the base-emitter voltage of the transistor.
    """

    part: str
    words: str
    volts: float


@dataclass(frozen=True)
class Batch:
    """A circuit at rows of its nominal solution, and at temperatures of its parts."""

    points: Solution
    rows: IntArray
    heat: dict[str, Array]

    @classmethod
    def at(cls, points: Solution, rows: IntArray) -> Batch:
        """At the temperatures of the nominal solution."""
        return cls(points, rows, {ref: points.temperature(ref)[rows] for ref in points.network.design.parts})

    def take(self, index: Index) -> Batch:
        """The chosen rows."""
        return Batch(self.points, self.rows[index], {ref: t[index] for ref, t in self.heat.items()})

    @property
    def conditions(self) -> Conditions:
        """Conditions, one a row."""
        return self.points.conditions.take(self.rows)

    def values(self) -> Values:
        """Element values, one row each."""
        points = self.points
        return compute_values(points.network, self.conditions, self.heat.__getitem__, points.parameters)

    def solution(self, state: State) -> Solution:
        """The circuit in a state that solves its equations."""
        points = self.points
        return Solution(
            points.network, points.equations, self.conditions, self.values(), state, self.heat, points.parameters
        )


@dataclass(frozen=True)
class Starts:
    """States to settle from.

    Attributes
    ----------
    rows : ndarray of int, shape (starts,)
        Row of the nominal solution that each belongs to.
    state : State
    cause : ndarray of int, shape (starts,)
        Which push or which row of the fault scenarios it comes from.
    """

    rows: IntArray
    state: State
    cause: IntArray


def pushes_of(network: Network) -> tuple[Push, ...]:
    """What is pushed in a circuit: each amplifier to each limit, each transistor off."""
    ends = (("high", PUSH), ("low", -PUSH))
    pushes = [Push(ref, f"pushed to its {end} limit", volts) for ref in network.amplifiers for end, volts in ends]
    return (*pushes, *(Push(ref, "cut off", CUT) for ref in network.transistors))


def from_pushes(points: Solution, pushes: tuple[Push, ...]) -> Starts:
    """Each part pushed aside, the rest settled about it, then let go.

    Parameters
    ----------
    points : Solution
        Nominal.
    pushes : tuple of Push

    Returns
    -------
    Starts
    """
    network = points.network
    base = np.flatnonzero(points.converged)
    rows, cause = np.tile(base, len(pushes)), np.repeat(np.arange(len(pushes)), len(base))
    values = Batch.at(points, rows).values()
    onto_amplifier = np.array([[p.volts * (p.part == ref) for ref in network.amplifiers] for p in pushes])[cause]
    onto_transistor = np.array([[p.volts * (p.part == ref) for ref in network.transistors] for p in pushes])[cause]
    aside = replace(
        values,
        offset=values.offset + onto_amplifier,
        transistor=replace(values.transistor, mismatch=values.transistor.mismatch + onto_transistor),
    )
    state = _settled(points, aside, _on_limits(points, values, points.state_vector.take(rows), onto_amplifier))
    return Starts(rows, _let_go(points, values, state, onto_amplifier), cause)


def _on_limits(points: Solution, values: Values, state: State, push: Array) -> State:
    """The state with pushed amplifiers already at their limits: the circuit without their feedback."""
    equations, rows = points.equations, points.equations.gain_rows
    low, high, _ = equations.limits(equations.node_voltages(state.x, values), values)
    limit = np.where(push > 0, high, low)
    state.x[:, rows] = np.where(push != 0, limit + push, state.x[:, rows])
    return state


def _settled(points: Solution, values: Values, state: State) -> State:
    with np.errstate(all="ignore"):
        found = iterate(points.equations, values, state, ITERATIONS)
    left = np.flatnonzero(~found.converged)
    if left.size:
        found.put(left, settle(points, take(values, left), state.take(left)))
    return found


def _let_go(points: Solution, values: Values, state: State, push: Array) -> State:
    """Take the push away: an amplifier stays at its limit if its inputs hold it there, else it starts on the limit."""
    equations, rows = points.equations, points.equations.gain_rows
    low, high, _ = equations.limits(equations.node_voltages(state.x, values), values)
    u = state.x[:, rows] - push
    u = np.where(push > 0, np.maximum(u, high), np.where(push < 0, np.minimum(u, low), u))
    state.x[:, rows] = u
    # a transistor that was cut off may have volts on its base: linearised there its current would be without bound
    hot = values.transistor
    state.tangents.v_be = np.minimum(state.tangents.v_be, critical_voltage(hot.saturation, hot.slope))
    return state


def from_faults(points: Solution, faults: Solution) -> Starts:
    """States of fault scenarios, put to the conditions of the same ambient with all inputs at one end.

    Parameters
    ----------
    points : Solution
        Nominal.
    faults : Solution
        The same circuit in fault scenarios.

    Returns
    -------
    Starts
    """
    ambient, heat = points.conditions.values["ambient"], faults.conditions.values["ambient"]
    inputs = points.network.design.inputs.items()
    low, high = (
        np.logical_and.reduce(
            [points.converged, *(points.conditions.values[name] == getattr(source, end) for name, source in inputs)]
        )
        for end in ("low", "high")
    )
    pairs = np.argwhere((low | high)[:, None] & faults.converged & (ambient[:, None] == heat))
    rows, cause = pairs[:, 0], pairs[:, 1]
    state = faults.state_vector.take(cause)
    state.x = state.x[:, _unknowns_of(points.network, faults.network)]
    return Starts(rows, state, cause)


def _unknowns_of(network: Network, faults: Network) -> list[int]:
    """Where the unknowns of a network are among those of its faults, which have more branches."""
    branches = {e.key: faults.branch_row(i) for i, e in enumerate(faults.branches)}
    nodes = [faults.nodes[name] for name in list(network.nodes)[: network.free]]
    return [*nodes, *(branches[e.key] for e in network.branches), *range(faults.output_row(0), faults.unknowns)]


def joined(one: State, other: State) -> State:
    """Two batches of states as one."""
    state = State(
        np.concatenate([one.x, other.x]),
        one.tangents.take(np.zeros(0, int)),
        np.concatenate([one.converged, other.converged]),
        np.concatenate([one.moved, other.moved]),
    )
    for name in ("v_be", "v_bc", "diode"):
        setattr(state.tangents, name, np.concatenate([getattr(one.tangents, name), getattr(other.tangents, name)]))
    return state
