"""Search for second stable operating points: states in which a circuit stays once it has got there.

Every amplifier is pushed to each of its limits, and every transistor cut off, while the rest of the circuit
settles; then it is let go, and the circuit settles by itself. The states of fault scenarios are starts too. What
is found solves the bare equations, without the clamps of fault scenarios, and is judged by the natural frequencies
of the circuit linearised about it. A search is no proof that there is nothing else.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array, BoolArray, IntArray
from .conditions import Conditions, Row, from_rows
from .latching_starts import Batch, from_faults, from_pushes, joined, pushes_of
from .newton import State, iterate
from .settling import STRAY, settle
from .small_signal import linearise
from .solution import LEAST_TEMPERATURE, MOST_TEMPERATURE, Solution
from .stability import analyse_loops
from .thermal import build_thermal

if TYPE_CHECKING:
    from ..design.model import Design
    from .islands import Placed
    from .operating_points import OperatingPoints
    from .review import Review

MOST_CONDITIONS = 48
DIFFERS, DIFFERS_BY_SHARE = 1e-3, 1e-3
"""A solution is another one where some net is off by more than this many volts and this share of its voltage."""
ITERATIONS = 80
THERMAL_ROUNDS, TEMPERATURE_STEP = 30, 1e-4


@dataclass(frozen=True)
class SecondPoint:
    """A stable solution beside the nominal one.

    Attributes
    ----------
    index : int
        Condition of the search, the first of those that are the same for this part of the circuit.
    start : str
        From where it was reached, in words.
    part : str or None
        Amplifier or transistor that was pushed there; None from a fault scenario.
    states : mapping of str to str
        Of the amplifiers of this island: ``linear``, ``high``, ``low``, ``unpowered``.
    voltages : mapping of str to float [V]
        Of the nets of this island.
    """

    index: int
    start: str
    part: str | None
    states: Mapping[str, str]
    voltages: Mapping[str, float]


@dataclass(frozen=True)
class Latching:
    """Result of the search.

    Attributes
    ----------
    points : OperatingPoints
        The nominal solution at the conditions of the search.
    found : tuple of SecondPoint
        By condition; several at one where there are several, or in several islands.
    starts, lost : int
        How many there were, and how many of them settled nowhere.
    """

    points: OperatingPoints
    found: tuple[SecondPoint, ...]
    starts: int
    lost: int


def find_latching(review: Review) -> Latching:
    """Search the corners of a design: inputs at the ends of their ranges, ambient at its ends, typical supplies.

    Parameters
    ----------
    review : Review

    Returns
    -------
    Latching
    """
    return search(review.solve(corners(review.design, review.typical)), review.faults)


def corners(design: Design, typical: Row) -> Conditions:
    """Conditions of the search: corners of the inputs, or each at its ends alone where those would be too many.

    Parameters
    ----------
    design : Design
    typical : dict of str to float
        What is not varied.

    Returns
    -------
    Conditions
    """
    ends = {name: (source.low, source.high) for name, source in design.inputs.items()}
    ambient = list(dict.fromkeys((design.ambient.min, design.ambient.max)))
    if 2 ** len(ends) * len(ambient) <= MOST_CONDITIONS:
        rows = [dict(zip(ends, corner, strict=True)) for corner in itertools.product(*ends.values())]
    else:
        rows = [{n: e[i] for n, e in ends.items()} for i in (0, 1)]
        rows += [{n: v} for n, e in ends.items() for v in e][: MOST_CONDITIONS // len(ambient) - 2]
    return from_rows([row | {"ambient": heat} for heat in ambient for row in rows], typical)


def search(points: OperatingPoints, faults: OperatingPoints) -> Latching:
    """Stable solutions beside the nominal ones.

    Parameters
    ----------
    points : OperatingPoints
        Nominal, at the conditions of the search, of a design without changes.
    faults : OperatingPoints
        Fault scenarios of the same design, for starts.

    Returns
    -------
    Latching
    """
    found: list[SecondPoint] = []
    searches: dict[int, _Search] = {}
    for placed, fault in zip(points.placed, faults.placed, strict=True):
        solution = placed.solution
        if not (solution.network.amplifiers or solution.network.transistors) or not solution.converged.any():
            continue
        if id(solution) not in searches:
            searches[id(solution)] = _Search(solution, fault.solution)
        words = faults.conditions.scenario or ()
        found += searches[id(solution)].records(placed, fault, words)
    starts, lost = (sum(getattr(s, name) for s in searches.values()) for name in ("starts", "lost"))
    return Latching(points, tuple(sorted(found, key=lambda second: second.index)), starts, lost)


class _Search:
    """Second solutions of one circuit.

    Attributes
    ----------
    starts, lost : int
    rows, cause : ndarray of int
        Of each that was found: row of the nominal solution; which push, or beyond those which row of the faults.
    found : Solution
    """

    def __init__(self, points: Solution, faults: Solution) -> None:
        self.pushes = pushes_of(points.network)
        pushed, faulty = from_pushes(points, self.pushes), from_faults(points, faults)
        rows = np.concatenate([pushed.rows, faulty.rows])
        cause = np.concatenate([pushed.cause, len(self.pushes) + faulty.cause])
        batch = Batch.at(points, rows)
        state = settle(points, batch.values(), joined(pushed.state, faulty.state))
        self.starts, self.lost = len(rows), int((~state.converged).sum())
        others = np.flatnonzero(state.converged & _differs(points, rows, state.x))
        others = others[_first_of_each(points, rows[others], state.x[others])]
        batch, state = _warmed(batch.take(others), state.take(others))
        stable = _is_stable(batch.solution(state))
        keep = np.flatnonzero(state.converged & stable & _differs(points, batch.rows, state.x))
        self.rows, self.cause = batch.rows[keep], cause[others[keep]]
        self.found = batch.take(keep).solution(state.take(keep))

    def records(self, placed: Placed, fault: Placed, scenarios: Sequence[str]) -> list[SecondPoint]:
        """What was found, in the names of one place of the circuit in the design."""
        here = {solved: name for name, solved in placed.parts.items()}
        states = {here[ref]: self.found.state(ref) for ref in self.found.network.amplifiers}
        voltages = {name: self.found.voltage(solved) for name, solved in placed.nets.items()}
        records = []
        for i, (row, cause) in enumerate(zip(self.rows, self.cause, strict=True)):
            index = _first(placed.index == row)
            if index is None:  # a condition that another place of the same circuit meets
                continue
            push = self.pushes[cause] if cause < len(self.pushes) else None
            scenario = _first(fault.index == cause - len(self.pushes))
            of_fault = "a fault scenario" if scenario is None else scenarios[scenario]
            records.append(
                SecondPoint(
                    index=index,
                    start=f"{here[push.part]} {push.words}" if push else of_fault,
                    part=here[push.part] if push else None,
                    states={ref: str(state[i]) for ref, state in states.items()},
                    voltages={net: float(v[i]) for net, v in voltages.items()},
                )
            )
        return records


def _first(mask: BoolArray) -> int | None:
    where = np.flatnonzero(mask)
    return int(where[0]) if where.size else None


def _same(one: Array, other: Array) -> BoolArray:
    """Whether node voltages are those of one solution; nodes last."""
    return np.all(np.abs(one - other) <= DIFFERS + DIFFERS_BY_SHARE * np.abs(other), axis=-1)


def _differs(points: Solution, rows: IntArray, x: Array) -> BoolArray:
    """Where a state is not the nominal solution of its row."""
    free = points.network.free
    return ~_same(x[:, :free], points.state_vector.x[rows, :free])


def _first_of_each(points: Solution, rows: IntArray, x: Array) -> IntArray:
    """Indices of states that are none of those before them at the same row."""
    free = points.network.free
    alike = _same(x[:, None, :free], x[None, :, :free]) & (rows[:, None] == rows)
    return np.flatnonzero(~np.tril(alike, -1).any(axis=1))


def _is_stable(solution: Solution) -> BoolArray:
    """Where all natural frequencies lie left of the axis, with stray capacitance at every node."""
    system = linearise(solution)
    strays = np.zeros(system.capacitance.shape[-1])
    strays[: solution.network.free] = STRAY
    rightmost = analyse_loops(replace(system, capacitance=system.capacitance + np.diag(strays))).rightmost
    return np.less(rightmost, 0, where=np.isfinite(rightmost), out=np.zeros(rightmost.shape, bool))


def _warmed(batch: Batch, state: State) -> tuple[Batch, State]:
    """Bring temperatures in line with the dissipations of these states; what runs away has not converged."""
    network = batch.points.network
    thermal = build_thermal(network.design)
    change = np.zeros(len(batch.rows))
    for _ in range(THERMAL_ROUNDS if thermal.rise.any() and len(batch.rows) else 0):
        solution = batch.solution(state)
        power = np.zeros((len(batch.rows), len(thermal.held)))
        for ref in thermal.heated:
            power[:, thermal.node[ref]] += np.nan_to_num(solution.dissipation(ref))
        nodes = thermal.temperatures(batch.conditions.values["ambient"], power)
        nodes = np.clip(nodes, LEAST_TEMPERATURE, MOST_TEMPERATURE)
        heat = {**batch.heat, **{ref: nodes[:, i] for ref, i in thermal.node.items()}}
        change = np.max([np.abs(heat[ref] - batch.heat[ref]) for ref in thermal.node], axis=0)
        batch = replace(batch, heat=heat)
        state = iterate(batch.points.equations, batch.values(), state, ITERATIONS)
        if not change.max() > TEMPERATURE_STEP:
            break
    state.converged = state.converged & ~(change > TEMPERATURE_STEP)
    return batch, state
