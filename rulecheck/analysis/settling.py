"""Where a circuit settles from a given state: implicit steps in time, then the bare equations.

The steps follow the circuit's own capacitors and the bandwidth of its amplifiers, so that a state goes to the
solution that the real circuit would go to; they are as long as Newton's method stands, since only the end counts.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array
from .equations import Aid
from .newton import State, iterate
from .small_signal import linearise
from .values import Values, take

if TYPE_CHECKING:
    from .solution import Solution

STRAY = 1e-12  # F
"""From every node to ground, about what a board has: a node without any would move at once."""
FIRST_STEP, LAST_STEP, SHORTEST = 1e-9, 1e2, 1e-16  # s
LONGER, SHORTER = 4.0, 0.125
STEPS = 60
ITERATIONS, LAST_ITERATIONS = 20, 40
LOOSE = 1e5


def settle(points: Solution, values: Values, start: State) -> State:
    """The solutions of the bare equations that a circuit comes to from given states.

    Parameters
    ----------
    points : Solution
        Of the circuit, with at least one point that converged; its charges are those of the walk.
    values : Values
        Element values, one row a start.
    start : State

    Returns
    -------
    State
        `converged` where one was reached.
    """
    equations, state = points.equations, start.take(np.arange(len(start.x)))
    storage = _storage(points)
    step, active = np.full(len(state.x), FIRST_STEP), np.arange(len(state.x))
    with np.errstate(all="ignore"):  # a wild iterate is a step that was too long, and is taken back
        for _ in range(STEPS):
            here = state.take(active)
            aid = Aid(1 / step[active], storage, here.x)
            moved = iterate(equations, take(values, active), here, ITERATIONS, aid, loose=LOOSE)
            state.put(active[moved.converged], moved.take(moved.converged))
            step[active] *= np.where(moved.converged, LONGER, SHORTER)
            active = active[(step[active] < LAST_STEP) & (step[active] > SHORTEST)]
            if not active.size:
                break
        return iterate(equations, values, state, LAST_ITERATIONS)


def _storage(points: Solution) -> Array:
    """What stores energy, as a matrix on the unknowns of the equations with the row of the fixed nodes."""
    equations, network = points.equations, points.network
    one = np.flatnonzero(points.converged)[0]
    nodes = np.arange(network.free)
    matrix = np.zeros((equations.size + 1, equations.size + 1))
    matrix[: network.free, : network.free] = linearise(points).capacitance[one, : network.free, : network.free]
    matrix[nodes, nodes] += STRAY
    for row, ref in zip(equations.gain_rows, network.amplifiers, strict=True):
        matrix[row, row] = -1 / (2 * np.pi * points.parameters.of(ref, "gain_bandwidth")[0])
    return matrix
