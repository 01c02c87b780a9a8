"""Small-signal response from an input to an output, and its −3 dB bandwidth, at every operating point.

Temperatures stand still here: self-heating is far slower than any signal whose bandwidth is asked.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array, BoolArray, ComplexArray, Index
from .equations import Equations
from .newton import State
from .small_signal import linearise
from .solution import Solution
from .stability import FASTEST, CircuitLoops, analyse_loops

if TYPE_CHECKING:
    from .network import Element
    from .operating_points import OperatingPoints

HALF_POWER = 1 / np.sqrt(2)
HALVINGS = 48
POINTS_PER_DECADE = 16
NO_GAIN = 1e-9
"""Gain at zero frequency as a share of the largest below which it is rounding, not a reference for −3 dB."""
CHUNK = 1 << 21  # complex numbers held at once


@dataclass(frozen=True)
class Response:
    """Response of a node to a source, ``p − s·Σ w_i/(1 + s·μ_i)`` with p and w of the form ``a + s·b``.

    The second part, b, is of capacitors from the node that is driven.

    Attributes
    ----------
    start : ndarray, shape (conditions, 2)
        a and b of p.
    weight : ndarray of complex, shape (conditions, modes, 2)
    mu : ndarray of complex, shape (conditions, modes) [s]
    natural : ndarray of complex, shape (conditions, modes) [1/s]
        Natural frequencies; NaN where one is at infinity.
    settles : ndarray of bool, shape (conditions,)
        Converged, and all natural frequencies left of the axis.
    """

    start: Array
    weight: ComplexArray
    mu: ComplexArray
    natural: ComplexArray
    settles: BoolArray

    @property
    def dc(self) -> Array:
        """Gain at zero frequency, shape (conditions,)."""
        return self.start[:, 0]

    def at(self, frequency: Array, index: Index = slice(None)) -> ComplexArray:
        """Gain at frequencies [Hz] of shape (chosen conditions, points)."""
        s = 2j * np.pi * frequency
        start, weight, mu = self.start[index], self.weight[index], self.mu[index]
        w = weight[:, None, :, 0] + s[..., None] * weight[:, None, :, 1]
        modal: ComplexArray = (w / (1 + s[..., None] * mu[:, None, :])).sum(axis=-1)
        return start[:, None, 0] + s * start[:, None, 1] - s * modal


def bandwidth(points: OperatingPoints, source: str, output: str) -> Array:
    """Lowest frequency at which the response has fallen by 3 dB (to half the power) from that at zero frequency.

    Where an amplifier on the way is at its limit it is the bandwidth of what leaks past it: ask only where the
    output is regulated.

    Parameters
    ----------
    points : OperatingPoints
    source : str
        Input by its name: the source value is what varies, a source resistance counts.
    output : str
        Net.

    Returns
    -------
    ndarray, shape (conditions,) [Hz]
        Infinite where the response never falls; NaN where the point did not converge or is not stable, where
        nothing of the input arrives at zero frequency, or an ideal source holds the output.
    """
    placed = next((p for p in points.placed if output in p.nets), None)
    name = None if placed is None else placed.nets.get(source, placed.parts.get(source))
    if placed is None or name is None:
        return np.full(points.conditions.size, np.nan)
    found = respond(placed.solution, name, placed.nets[output])
    if found is None:
        return np.full(points.conditions.size, np.nan)
    return _bandwidths(found)[placed.index]


def respond(points: Solution, source: str, output: str) -> Response | None:
    """Response of one circuit from an input to a net; None where an ideal source holds the net.

    Parameters
    ----------
    points : Solution
    source : str
        Input net or photodiode.
    output : str
        Net.

    Returns
    -------
    Response or None
    """
    node = points.network.nodes[output]
    if node >= points.network.free:
        return None
    circuit = analyse_loops(linearise(points))
    drive = np.where(points.converged[:, None, None], _excitation(points, source), 0.0)
    still = np.linalg.solve(circuit.system.conductance, drive)
    modes = circuit.modes
    inner = modes.left @ still[:, modes.columns].astype(complex)
    outer = np.einsum("nj,nji->ni", modes.response[:, node, :].astype(complex), modes.right)
    return Response(still[:, node], inner * outer[..., None], modes.mu, modes.frequency, settles(points, circuit))


def settles(points: Solution, circuit: CircuitLoops) -> BoolArray:
    """Where a point converged and no natural frequency lies right of the axis, shape (conditions,)."""
    with np.errstate(invalid="ignore"):
        return points.converged & ~(circuit.rightmost > 0)


def _excitation(points: Solution, source: str) -> Array:
    """What a unit of the source adds to the equations, as constant and as factor of s, shape (.., unknowns, 2)."""
    network = points.network
    size = points.equations.size + len(network.amplifiers)
    out = np.zeros((len(points.converged), size, 2))
    driving = [e for e in network.sources if e.key in ((source, "drive"), (source, "photocurrent"))]
    if driving:
        for node, into in ((driving[0].a, -1.0), (driving[0].b, 1.0)):
            if node < network.free:
                out[:, node, 0] += into
        return out
    name = f"{source}.source"
    opened = _freed(points, network.nodes[name if name in network.nodes else source])
    system, column = linearise(opened), network.free
    out[..., 0] = -np.delete(system.conductance[:, :, column], column, axis=1)
    out[..., 1] = -np.delete(system.capacitance[:, :, column], column, axis=1)
    return out


def _freed(points: Solution, node: int) -> Solution:
    """The same operating points with a fixed node among the unknowns, next after the free nodes."""
    network, values, state = points.network, points.values, points.state_vector
    order = [*range(network.free), node, *(i for i in range(network.free, len(network.nodes)) if i != node)]
    place, names = np.argsort(order), list(network.nodes)

    def moved(elements: list[Element]) -> list[Element]:
        return [replace(e, a=int(place[e.a]), b=int(place[e.b])) for e in elements]

    opened = replace(
        network,
        nodes={names[old]: new for new, old in enumerate(order)},
        free=network.free + 1,
        resistors=moved(network.resistors),
        branches=moved(network.branches),
        sources=moved(network.sources),
        diodes=moved(network.diodes),
        clamps=moved(network.clamps),
        terminals=place[network.terminals],
        pins=place[network.pins],
    )
    held = node - network.free
    x = np.insert(state.x, network.free, values.fixed[:, held], axis=1)
    rest = replace(values, fixed=np.delete(values.fixed, held, axis=1))
    there = State(x, state.tangents, state.converged, state.moved)
    return Solution(opened, Equations(opened), points.conditions, rest, there, {}, points.parameters)


def _bandwidths(response: Response) -> Array:
    """The bandwidth at each condition, in chunks that bound the memory."""
    out = np.full(len(response.settles), np.nan)
    where = np.flatnonzero(response.settles & (response.dc != 0))
    if where.size:
        grid = _grid(response.natural[where])
        step = max(1, CHUNK // (grid.size * response.mu.shape[1] + 1))
        for first in range(0, where.size, step):
            part = where[first : first + step]
            out[part] = _fall(response, grid, part)
    return out


def _grid(natural: ComplexArray) -> Array:
    """Frequencies from far below the lowest natural frequency to beyond the highest, ascending [Hz]."""
    lowest = np.nanmin(np.abs(natural), initial=FASTEST)
    decades = np.log10(10 * FASTEST / (lowest / 1e3))
    return np.geomspace(lowest / 1e3, 10 * FASTEST, int(decades * POINTS_PER_DECADE) + 1) / (2 * np.pi)


def _fall(response: Response, grid: Array, where: Index) -> Array:
    """Frequency of the first fall below half power, by bisection inside a cell of the grid."""
    dc = np.abs(response.dc[where])
    level = np.abs(response.at(grid[None, :], where))
    fallen = level < HALF_POWER * dc[:, None]
    falls = fallen.any(axis=1)
    cell = fallen.argmax(axis=1)
    low, high = np.log(grid[np.maximum(cell - 1, 0)]), np.log(grid[cell])
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        below = np.abs(response.at(np.exp(middle)[:, None], where)[:, 0]) < HALF_POWER * dc
        low, high = np.where(below, low, middle), np.where(below, middle, high)
    found = np.where(falls, np.exp((low + high) / 2), np.inf)
    return np.where(dc > NO_GAIN * level.max(axis=1), found, np.nan)
