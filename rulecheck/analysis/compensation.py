"""Search for the least compensation capacitors that keep loops stable at every operating point.

Neither damping nor margin is monotonic in a capacitor, and capacitors of loops that share a node act
on each other. So candidates are scanned over the E12 series, all loops together, on the hardest
conditions; what passes there is confirmed on all.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array, Index
from ..series import decade_values
from .stability import DAMPING_SPAN, analyse_loops, damping_of, mode_frequencies

if TYPE_CHECKING:
    from .small_signal import SmallSignal
    from .solution import Solution

LEAST, MOST = 10e-12, 100e-9
"""Span of the search [F]; less than the least is no more than the strays of a board."""
HARD_CONDITIONS = 20
CONFIRMED_AT_MOST = 24
BATCH = 4096


@dataclass(frozen=True)
class Compensation:
    """Capacitors from output to inverting input that meet damping and margin at every condition.

    Attributes
    ----------
    capacitors : dict of str to float
        By amplifier [F].
    damping : float
        Least damping ratio that is left.
    margin : float
        Least phase margin of the amplifiers named [deg].
    """

    capacitors: dict[str, float]
    damping: float
    margin: float


def required_capacitors(
    points: Solution, system: SmallSignal, amplifiers: Sequence[str], damping: float, margin: float
) -> Compensation | None:
    """Least E12 capacitors, one an amplifier, that meet the limits at every condition where it is linear.

    A capacitor that already lies from output to inverting input counts as replaced.

    Parameters
    ----------
    points : Solution
    system : SmallSignal
        Linearised at `points`.
    amplifiers : sequence of str
        Loops searched together; two are scanned in all combinations, more in step and then one by one.
    damping : float
        Least damping ratio.
    margin : float
        Least phase margin [deg].

    Returns
    -------
    Compensation or None
        None where no values in the span do.
    """
    if not system.judged.any():
        return None
    for others in (True, False):  # first with every loop of the circuit calm, then at least those asked for
        search = _Search(points, system, tuple(amplifiers), damping, margin, others=others)
        for candidate in search.candidates():
            found = search.confirm(candidate)
            if found is not None:
                return search.reduce(found)
    return None


class _Search:
    def __init__(
        self,
        points: Solution,
        system: SmallSignal,
        amplifiers: tuple[str, ...],
        damping: float,
        margin: float,
        *,
        others: bool,
    ) -> None:
        self.amplifiers, self.damping, self.margin = amplifiers, damping, margin
        self.watched = system.amplifiers if others else amplifiers
        self.stamps = [_stamp(points, a, system.capacitance.shape[-1]) for a in amplifiers]
        present = np.array([present_capacitor(points, a) for a in amplifiers])
        capacitance = system.capacitance - np.tensordot(present, self.stamps, axes=1)
        self.system = replace(system, capacitance=capacitance).take(np.flatnonzero(system.judged))
        self.values = decade_values("E12", LEAST, MOST)
        self.fastest = 2 * np.pi * DAMPING_SPAN * system.widest
        self._prepare(present)

    def _prepare(self, present: Array) -> None:
        """Reduce the network to ``N = N_0 + Σ c_k·N_k``, and choose the hardest conditions."""
        stamped = np.any(np.any(self.stamps, axis=0), axis=0)
        columns = np.flatnonzero(np.any(self.system.capacitance != 0, axis=(0, 1)) | stamped)
        inverse = np.linalg.inv(self.system.conductance)[:, columns, :]
        self.fixed = inverse @ self.system.capacitance[:, :, columns]
        self.per_farad = [inverse @ stamp[:, columns] for stamp in self.stamps]
        count = len(self.fixed)
        trials = np.stack([present, np.full(len(present), 1e-11), np.full(len(present), 1e-9)])
        hardness = self._damping(trials, slice(None)).min(axis=0)
        hardest = np.argsort(hardness)[:HARD_CONDITIONS]
        spread = np.linspace(0, count - 1, min(count, HARD_CONDITIONS)).astype(int)
        self.hard = np.unique(np.concatenate([hardest, spread]))
        self.hard_system = self.system.take(self.hard)

    def _damping(self, candidates: Array, conditions: Index) -> Array:
        """Least damping for each candidate and condition, shape (candidates, conditions)."""
        n = self.fixed[conditions][None] + sum(
            candidates[:, k, None, None, None] * m[conditions][None] for k, m in enumerate(self.per_farad)
        )
        return damping_of(mode_frequencies(np.linalg.eigvals(n).astype(complex)), self.fastest)

    def _passing(self, candidates: Array) -> Array:
        """Candidates whose natural frequencies are damped enough on the hard conditions."""
        step = max(1, BATCH // len(self.hard))
        passed = [
            some[self._damping(some, self.hard).min(axis=1) >= self.damping]
            for some in (candidates[i : i + step] for i in range(0, len(candidates), step))
        ]
        return np.concatenate(passed)

    def candidates(self) -> Array:
        """Passing candidates, the least total capacitance (in the logarithm) first."""
        count = len(self.amplifiers)
        if count == 2:
            coarse = decade_values("E3", LEAST, MOST)
            trials = np.array(list(itertools.product(coarse, coarse)))
        else:
            trials = np.repeat(np.asarray(self.values)[:, None], count, axis=1)
        passed = self._passing(trials)
        return passed[np.argsort(np.log(passed).sum(axis=1), kind="stable")][:CONFIRMED_AT_MOST]

    def confirm(self, candidate: Array) -> Compensation | None:
        """The candidate with its figures, where it meets both limits on the hard and then on all conditions."""
        if self._figures(self.hard_system, candidate) is None:
            return None
        return self._figures(self.system, candidate)

    def _figures(self, system: SmallSignal, candidate: Array) -> Compensation | None:
        c = system.capacitance + np.tensordot(candidate, self.stamps, axes=1)
        loops = analyse_loops(replace(system, capacitance=c))
        damping = float(loops.least_damping.min())
        if damping < self.damping or loops.rightmost.max() >= 0:
            return None
        least = np.inf
        for amplifier in self.watched:
            margins = loops.margins(amplifier).phase_margin
            least = min(least, float(np.min(margins, initial=np.inf, where=np.isfinite(margins))))
            if least < self.margin:
                return None
        return Compensation(dict(zip(self.amplifiers, map(float, candidate), strict=True)), damping, least)

    def reduce(self, found: Compensation) -> Compensation:
        """Step each capacitor of several down the series while the limits still hold."""
        if len(self.amplifiers) == 1:
            return found
        for k, amplifier in enumerate(self.amplifiers):
            for value in reversed([v for v in self.values if v < found.capacitors[amplifier] * 0.99]):
                trial = np.array(list(found.capacitors.values()))
                trial[k] = value
                smaller = self.confirm(trial) if len(self._passing(trial[None])) else None
                if smaller is None:
                    break
                found = smaller
        return found


def _stamp(points: Solution, amplifier: str, size: int) -> Array:
    """Matrix of one farad from an amplifier's output to its inverting input."""
    network = points.network
    pins = network.design.parts[amplifier].pins
    a, b = (network.nodes[pins[p]] for p in ("OUT", "IN-"))
    vector = np.zeros(size)
    if a < network.free:
        vector[a] += 1
    if b < network.free:
        vector[b] -= 1
    return np.outer(vector, vector)


def present_capacitor(points: Solution, amplifier: str) -> float:
    """Capacitance that already lies from an amplifier's output to its inverting input [F]."""
    design = points.network.design
    ends = {design.parts[amplifier].pins["OUT"], design.parts[amplifier].pins["IN-"]}
    return sum(p.value.typ for p in design.parts.values() if p.kind == "capacitor" and set(p.pins.values()) == ends)
