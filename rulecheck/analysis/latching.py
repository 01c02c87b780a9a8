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

from ..devices.constants import Array, BoolArray, Index, IntArray
from .conditions import Conditions, Row, from_rows
from .newton import State, iterate
from .settling import STRAY, settle
from .small_signal import linearise
from .solution import LEAST_TEMPERATURE, MOST_TEMPERATURE, Solution
from .stability import analyse_loops
from .thermal import build_thermal
from .values import Values, compute_values

if TYPE_CHECKING:
    from ..design.model import Design
    from .islands import Placed
    from .operating_points import OperatingPoints
    from .review import Review

MOST_CONDITIONS = 48
DIFFERS, DIFFERS_BY_SHARE = 1e-3, 1e-3
"""A solution is another one where some net is off by more than this many volts and this share of its voltage."""
PUSH = 1e3  # V at the input of an amplifier: beyond what any feedback brings
CUT = 5.0  # V off the base-emitter voltage of a transistor
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
        By island and condition; several at one condition where there are several.
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
    return Latching(points, tuple(found), starts, lost)


@dataclass(frozen=True)
class _Origin:
    """Where a start comes from: a part held somewhere, or a row of the fault scenarios."""

    part: str = ""
    words: str = ""
    amplifier: int = -1
    transistor: int = -1
    volts: float = 0.0
    fault: int = -1


@dataclass
class _Batch:
    """Starts of one circuit: to which rows of its nominal solution they belong, at which temperatures."""

    points: Solution
    rows: IntArray
    heat: dict[str, Array]

    @classmethod
    def at(cls, points: Solution, rows: IntArray) -> _Batch:
        """At the temperatures of the nominal solution."""
        return cls(points, rows, {ref: points.temperature(ref)[rows] for ref in points.network.design.parts})

    def take(self, index: Index) -> _Batch:
        """The chosen starts."""
        return _Batch(self.points, self.rows[index], {ref: t[index] for ref, t in self.heat.items()})

    @property
    def conditions(self) -> Conditions:
        return self.points.conditions.take(self.rows)

    @property
    def values(self) -> Values:
        points = self.points
        return compute_values(points.network, self.conditions, self.heat.__getitem__, points.parameters)

    def solution(self, state: State) -> Solution:
        """The batch with a state as if it were its solution."""
        points = self.points
        return Solution(
            points.network, points.equations, self.conditions, self.values, state, self.heat, points.parameters
        )


class _Search:
    """Second solutions of one circuit.

    Attributes
    ----------
    starts, lost : int
    rows : ndarray of int
        Row of the nominal solution of each that was found.
    origins : list of _Origin
    found : Solution
    """

    def __init__(self, points: Solution, faults: Solution) -> None:
        pushed = _pushed(points)
        faulty = _from_faults(points, faults)
        rows = np.concatenate([pushed[0], faulty[0]])
        origins = [*pushed[2], *faulty[2]]
        batch, state = _Batch.at(points, rows), _joined(pushed[1], faulty[1])
        state = settle(points, batch.values, state)
        self.starts, self.lost = len(rows), int((~state.converged).sum())
        others = np.flatnonzero(state.converged & _differs(points, rows, state.x))
        others = others[_first_of_each(points, rows[others], state.x[others])]
        batch, state = _warmed(batch.take(others), state.take(others))
        solution = batch.solution(state)
        keep = np.flatnonzero(state.converged & _differs(points, batch.rows, state.x) & _is_stable(solution))
        self.rows = batch.rows[keep]
        self.origins = [origins[i] for i in others[keep]]
        self.found = batch.take(keep).solution(state.take(keep))

    def records(self, placed: Placed, fault: Placed, scenarios: Sequence[str]) -> list[SecondPoint]:
        """What was found, in the names of one place of the circuit in the design."""
        here = {solved: name for name, solved in placed.parts.items()}
        states = {here[ref]: self.found.state(ref) for ref in self.found.network.amplifiers}
        voltages = {name: self.found.voltage(solved) for name, solved in placed.nets.items()}
        records = []
        for i, (row, origin) in enumerate(zip(self.rows, self.origins, strict=True)):
            if origin.fault < 0:
                words = f"{here[origin.part]} {origin.words}"
            else:
                words = scenarios[int(np.flatnonzero(fault.index == origin.fault)[0])]
            records.append(
                SecondPoint(
                    index=int(np.flatnonzero(placed.index == row)[0]),
                    start=words,
                    part=here.get(origin.part),
                    states={ref: str(state[i]) for ref, state in states.items()},
                    voltages={net: float(v[i]) for net, v in voltages.items()},
                )
            )
        return records
