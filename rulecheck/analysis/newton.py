"""Newton's method on a batch of conditions, and the ways round when it does not arrive."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from ..devices import amplifier
from ..devices.constants import Array, BoolArray, Index, IntArray
from ..devices.junction import critical_voltage, limited_step
from .equations import Aid, Equations, Tangents
from .values import Values, take

VOLTAGE_STEP = 1e-9
CURRENT_STEP = 1e-15
RELATIVE_STEP = 1e-9
FREE_FLIPS = 12
"""Iterations in which every amplifier may change its region; later the worst alone."""


@dataclass
class State:
    """Where a batch stands.

    Attributes
    ----------
    x : ndarray, shape (conditions, unknowns)
    tangents : Tangents
    converged : ndarray of bool, shape (conditions,)
    moved : ndarray of int, shape (conditions,)
        Unknown that moved most in the last step.
    """

    x: Array
    tangents: Tangents
    converged: BoolArray
    moved: IntArray

    def take(self, index: Index) -> State:
        """The chosen conditions."""
        return State(self.x[index], self.tangents.take(index), self.converged[index], self.moved[index])

    def put(self, index: Index, other: State) -> None:
        """Write `other` into the chosen conditions."""
        self.x[index], self.converged[index], self.moved[index] = other.x, other.converged, other.moved
        self.tangents.put(index, other.tangents)


def power_off(equations: Equations, size: int) -> State:
    """Everything at 0 V and without current."""
    network = equations.network
    zeros = [np.zeros((size, n)) for n in (len(network.transistors), len(network.transistors), len(network.diodes))]
    return State(
        np.zeros((size, equations.size)),
        Tangents(*zeros),
        np.zeros(size, bool),
        np.zeros(size, dtype=np.intp),
    )


def iterate(
    equations: Equations,
    values: Values,
    start: State,
    iterations: int,
    aid: Aid | None = None,
    loose: float = 1.0,
) -> State:
    """Newton's method from `start` for at most `iterations`; conditions that arrive are dropped from the batch.

    Parameters
    ----------
    equations : Equations
    values : Values
    start : State
    iterations : int
    aid : Aid, optional
    loose : float
        Factor on the tolerances, for steps on the way.

    Returns
    -------
    State
        Of all conditions; `converged` is that of this run.
    """
    state = State(start.x.copy(), start.tangents.take(slice(None)), np.zeros(len(start.x), bool), start.moved.copy())
    state.tangents = Tangents(start.tangents.v_be.copy(), start.tangents.v_bc.copy(), start.tangents.diode.copy())
    active = np.arange(len(state.x))
    here, now, help_now = values, state.take(active), aid
    linear = equations.linear_matrix(here, help_now)
    small = np.zeros(len(active), bool)
    for round_ in range(iterations):
        residual, jacobian, tolerance, _ = equations.evaluate(now.x, now.tangents, here, linear, help_now)
        step = _solve(jacobian, -residual)
        done = small & np.all(np.abs(residual) <= loose * tolerance, axis=1)
        small = _step(equations, here, now, step, round_ >= FREE_FLIPS, loose)
        now.converged = done
        if done.all():
            break
        if done.any():
            state.put(active, now)
            keep = ~done
            active, now, here, small = active[keep], now.take(keep), take(here, keep), small[keep]
            linear = linear[keep]
            help_now = None if help_now is None else help_now.take(keep)
    state.put(active, now)
    return state


def _solve(matrix: Array, right: Array) -> Array:
    """Batched solution; a condition with a singular matrix gives NaN instead of an exception."""
    try:
        return np.linalg.solve(matrix, right[..., None])[..., 0]
    except np.linalg.LinAlgError:
        singular = np.linalg.slogdet(matrix)[0] == 0
        safe = np.where(singular[:, None, None], np.eye(matrix.shape[-1]), matrix)
        out = np.linalg.solve(safe, right[..., None])[..., 0]
        out[singular] = np.nan
        return out


def _step(equations: Equations, values: Values, now: State, step: Array, one_flip: bool, loose: float) -> BoolArray:
    """Take a step in place; return where it was small and no limit was in force."""
    network = equations.network
    bad = ~np.isfinite(step).all(axis=1)
    step[bad] = 0
    old = now.x.copy()
    now.x += step
    held = _move_amplifiers(equations, values, now, old, one_flip)
    actual = equations.junction_voltages(now.x, values)
    tr, di = values.transistor, values.diode
    tangents = now.tangents
    vbe = limited_step(actual.v_be, tangents.v_be, tr.slope, tr.critical)
    vbc = limited_step(actual.v_bc, tangents.v_bc, tr.slope, tr.critical)
    vd = limited_step(actual.diode, tangents.diode, di.slope, critical_voltage(di.saturation, di.slope))
    limited = (vbe != actual.v_be).any(axis=1) | (vbc != actual.v_bc).any(axis=1) | (vd != actual.diode).any(axis=1)
    tangents.v_be, tangents.v_bc, tangents.diode = vbe, vbc, vd
    floor = np.full(step.shape[1], VOLTAGE_STEP)
    floor[network.free : network.free + len(network.branches) + len(network.amplifiers)] = CURRENT_STEP
    excess = np.abs(step) / (floor + RELATIVE_STEP * np.abs(now.x))
    voltages = np.abs(step[:, : network.free])
    now.moved = voltages.argmax(axis=1) if network.free else np.zeros(len(step), dtype=np.intp)
    small: BoolArray = (excess <= loose).all(axis=1) & ~limited & ~held & ~bad
    return small


def _move_amplifiers(equations: Equations, values: Values, now: State, old: Array, one_flip: bool) -> BoolArray:
    """Carry the amplifiers' parameters over the limits; return where one changed its region."""
    rows = equations.gain_rows
    if not rows.size:
        return np.zeros(len(now.x), bool)
    low, high, _ = equations.limits(equations.node_voltages(now.x, values), values)
    was_low, was_high, _ = equations.limits(equations.node_voltages(old, values), values)
    u, last = now.x[:, rows], old[:, rows]
    # a parameter beyond a limit rides on it: keep its distance when the rail itself moves
    last = np.where(last > was_high, last - was_high + high, np.where(last < was_low, last - was_low + low, last))
    region = np.sign(u - np.clip(u, low, high))
    last_region = np.sign(last - np.clip(last, low, high))
    flips = region != last_region
    moved = amplifier.relocate(u, last, values.gain, low, high)
    if one_flip:
        excess = np.abs(u - np.clip(u, low, high)) * flips + np.where(flips, 1e-9, 0)
        worst = excess == excess.max(axis=1, keepdims=True)
        stay = np.where(last_region == 0, np.clip(u, low, high), last)
        moved = np.where(flips & ~worst, stay, moved)
    now.x[:, rows] = moved
    changed: BoolArray = flips.any(axis=1)
    return changed


def solve(equations: Equations, values: Values, start: State | None = None, lost: BoolArray | None = None) -> State:
    """Operating points of a batch, by the shortest way that arrives.

    A given `start` is tried first; then Newton's method from conducting junctions, a walk through
    switching-on, sources stepped up and conductances to ground stepped down; between them, conditions
    that are left start from the nearest one that arrived. Conditions that `lost` marks have been through
    all of that before, and are tried from the `start` alone.
    """
    state = power_off(equations, values.fixed.shape[0]) if start is None else _hushed(equations, values, start)
    everything = np.ones(len(state.x), bool) if lost is None else ~lost
    for way, where in (
        (_from_conducting, everything),
        (_switch_on, _scouts(everything.size) & everything),
        (_switch_on, everything),
        (_step_sources, everything),
        (_step_conductances, everything),
    ):
        _try(way, equations, values, state, where)
        _spread(equations, values, state, everything)
    return state


SCOUTS = 8


def _scouts(size: int) -> BoolArray:
    """Choose a few conditions, evenly spread, that show the way to the others."""
    chosen = np.zeros(size, bool)
    chosen[np.linspace(0, size - 1, min(SCOUTS, size)).astype(int)] = True
    return chosen


def _spread(equations: Equations, values: Values, state: State, where: BoolArray) -> None:
    """Start each condition that is left from the solution nearest to it, as long as that gains any."""
    gained = True
    while gained and state.converged.any() and (where & ~state.converged).any():
        before = int(state.converged.sum())
        near = state.take(_nearest(values, state.converged)[where & ~state.converged])
        _try(partial(iterate, start=near, iterations=40), equations, values, state, where)
        gained = int(state.converged.sum()) > before


def _hushed(equations: Equations, values: Values, start: State) -> State:
    """Newton's method from a start near by; a wild iterate is left to the other ways, not warned of."""
    with np.errstate(over="ignore", invalid="ignore"):
        return iterate(equations, values, start, 30)


def _try(
    way: Callable[[Equations, Values], State], equations: Equations, values: Values, state: State, where: BoolArray
) -> None:
    """Put into `state` what one way reaches of the conditions that are left among `where`."""
    left = np.flatnonzero(~state.converged & where)
    if not left.size:
        return
    with np.errstate(over="ignore", invalid="ignore"):
        found = way(equations, take(values, left))
    improved = np.flatnonzero(found.converged)
    state.put(left[improved], found.take(improved))
    state.moved[left] = found.moved


def _nearest(values: Values, converged: BoolArray) -> IntArray:
    """For each condition the converged one whose driving values are nearest."""
    drives = np.concatenate([values.fixed, values.source * 1e6, values.branch_resistance * 1e-3], axis=1)
    drives = drives / (np.ptp(drives, axis=0) + 1e-30)
    known = np.flatnonzero(converged)
    distance = ((drives[:, None, :] - drives[None, known, :]) ** 2).sum(axis=-1)
    nearest: IntArray = known[distance.argmin(axis=1)]
    return nearest


CONDUCTING = 0.9
"""Share of the critical voltage at which base-emitter junctions start."""


def _from_conducting(equations: Equations, values: Values) -> State:
    """Newton's method from 0 V everywhere with every base-emitter junction conducting."""
    state = power_off(equations, values.fixed.shape[0])
    state.tangents.v_be[:] = CONDUCTING * values.transistor.critical
    return iterate(equations, values, state, 60)


def _step_sources(equations: Equations, values: Values) -> State:
    state = power_off(equations, values.fixed.shape[0])
    for share in np.linspace(0.1, 0.9, 9):
        weak = replace(
            values, fixed=values.fixed * share, source=values.source * share,
            branch_voltage=values.branch_voltage * share,
        )  # fmt: skip
        state = iterate(equations, weak, state, 20, loose=1e5)
    return iterate(equations, values, state, 80)


def _diagonal(equations: Equations, nodes: float, gain_rows: float) -> Array:
    matrix = np.zeros((equations.size + 1, equations.size + 1))
    free = np.arange(equations.network.free)
    matrix[free, free] = nodes
    matrix[equations.gain_rows, equations.gain_rows] = gain_rows
    return matrix


def _step_conductances(equations: Equations, values: Values) -> State:
    size = values.fixed.shape[0]
    state = power_off(equations, size)
    matrix, anchor = _diagonal(equations, 1.0, 0.0), np.zeros((size, equations.size))
    for conductance in np.geomspace(1e-2, 1e-13, 23):
        aid = Aid(np.full(size, conductance), matrix, anchor)
        state = iterate(equations, values, state, 25, aid, loose=1e5)
    return iterate(equations, values, state, 80)


NODE_CAPACITANCE = 10e-12
AMPLIFIER_LAG = 1e-7
FIRST_STEP, LAST_STEP, MOST_STEPS = 1e-9, 1e4, 100
GROWTH, RETREAT = 2.0, 0.1


def _switch_on(equations: Equations, values: Values) -> State:
    """Pseudo-transient from power-off: implicit steps in time that grow until nothing moves any more.

    Every condition has a step of its own, which grows where a step succeeded and falls back where not.
    """
    size = values.fixed.shape[0]
    state = power_off(equations, size)
    matrix = _diagonal(equations, NODE_CAPACITANCE, -AMPLIFIER_LAG)
    step = np.full(size, FIRST_STEP)
    for _ in range(MOST_STEPS):
        walking = np.flatnonzero((step < LAST_STEP) & (step > FIRST_STEP * 1e-6))
        if not walking.size:
            break
        here = state.take(walking)
        aid = Aid(1 / step[walking], matrix, here.x.copy())
        there = iterate(equations, take(values, walking), here, 15, aid, loose=1e3)
        went = np.flatnonzero(there.converged)
        state.put(walking[went], there.take(went))
        step[walking] *= np.where(there.converged, GROWTH, RETREAT)
    return iterate(equations, values, state, 60)
