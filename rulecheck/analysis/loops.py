"""Stability of a whole design: that of its pieces, at their places."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from ..devices.constants import Array, BoolArray
from .compensation import Compensation, required_capacitors
from .margins import Margins
from .small_signal import SmallSignal, linearise
from .stability import CircuitLoops, analyse_loops

if TYPE_CHECKING:
    from .islands import Placed
    from .operating_points import OperatingPoints
    from .values import Overrides


@dataclass(frozen=True)
class IslandLoops:
    """Stability of one island of the design; arrays over the conditions of the design.

    Attributes
    ----------
    amplifiers : tuple of str
        In the order of the columns of `participation`.
    """

    placed: Placed
    system: SmallSignal
    circuit: CircuitLoops
    amplifiers: tuple[str, ...]

    @property
    def rightmost(self) -> Array:
        """Largest real part of a natural frequency [1/s]."""
        return self.circuit.rightmost[self.placed.index]

    @property
    def least_damping(self) -> Array:
        """Least damping ratio of a complex pair; 1 where there is none."""
        return self.circuit.least_damping[self.placed.index]

    @property
    def damping_frequency(self) -> Array:
        """Frequency of the least damped pair [Hz]."""
        return self.circuit.damping_frequency[self.placed.index]

    @property
    def judged(self) -> BoolArray:
        """Conditions at which stability is judged: no amplifier is saturated that is ever linear."""
        return self.system.judged[self.placed.index]

    @property
    def participation(self) -> BoolArray:
        """Which amplifiers take part in the critical mode, shape (conditions, amplifiers)."""
        return self.circuit.participation[self.placed.index]

    def margins(self, amplifier: str) -> Margins:
        """Margins of one amplifier at the conditions of the solution; `at_design` brings them to the design's."""
        return self.circuit.margins(self.placed.parts[amplifier])

    def at_design(self, figure: Array) -> Array:
        """A figure over the conditions of the solution, over those of the design."""
        return figure[self.placed.index]


class Loops:
    """Natural frequencies and margins at all conditions; NaN where there is no figure.

    Attributes
    ----------
    points : OperatingPoints
    islands : tuple of IslandLoops
        Islands are dynamically independent: each has its own modes.
    """

    def __init__(self, points: OperatingPoints, cache: dict[Any, Any], overrides: Overrides | None = None) -> None:
        self.points = points
        self._cache = cache
        self.islands = tuple(self._island(placed, overrides or {}) for placed in points.placed)
        self._by_amplifier = {a: island for island in self.islands for a in island.amplifiers}

    def _island(self, placed: Placed, overrides: Overrides) -> IslandLoops:
        own = {(placed.parts[ref], name): v for (ref, name), v in overrides.items() if ref in placed.parts}
        system = linearise(placed.solution, own)
        key = ("loops", digest(system))
        if key not in self._cache:
            self._cache[key] = analyse_loops(system)
        back = {solved: here for here, solved in placed.parts.items()}
        amplifiers = tuple(back[a] for a in system.amplifiers)
        return IslandLoops(placed, system, self._cache[key], amplifiers)

    @property
    def amplifiers(self) -> tuple[str, ...]:
        """All amplifiers."""
        return tuple(self._by_amplifier)

    def island_of(self, amplifier: str) -> IslandLoops:
        """The island of an amplifier."""
        return self._by_amplifier[amplifier]

    @cached_property
    def rightmost(self) -> Array:
        """Largest real part of a natural frequency of the design [1/s]."""
        return np.fmax.reduce([i.rightmost for i in self.islands])

    @cached_property
    def least_damping(self) -> Array:
        """Least damping ratio of a complex pair of the design; 1 where there is none."""
        return np.fmin.reduce([i.least_damping for i in self.islands])

    def dc_return_ratio(self, amplifier: str) -> Array:
        """Return ratio at DC; positive is negative feedback."""
        return self._figure(amplifier, "dc_return_ratio")

    def phase_margin(self, amplifier: str) -> Array:
        """Least phase margin over unity crossings [deg]."""
        return self._figure(amplifier, "phase_margin")

    def crossover(self, amplifier: str) -> Array:
        """Unity crossing of least phase margin [Hz]."""
        return self._figure(amplifier, "crossover")

    def gain_margin(self, amplifier: str) -> Array:
        """Gain margin at -180° [dB]."""
        return self._figure(amplifier, "gain_margin")

    def modulus_margin(self, amplifier: str) -> Array:
        """Least ``|1 + T|`` over frequency."""
        return self._figure(amplifier, "modulus_margin")

    def _figure(self, amplifier: str, name: str) -> Array:
        if amplifier not in self._by_amplifier:  # a spare one with open pins
            return np.full(self.points.conditions.size, np.nan)
        island = self.island_of(amplifier)
        return island.at_design(getattr(island.margins(amplifier), name))

    def required_capacitors(self, amplifiers: Sequence[str], damping: float, margin: float) -> Compensation | None:
        """Least compensation capacitors of loops of one island searched together; see `compensation`."""
        island = self.island_of(amplifiers[0])
        solved = tuple(island.placed.parts[a] for a in amplifiers)
        key = ("capacitors", solved, damping, margin, digest(island.system))
        if key not in self._cache:
            self._cache[key] = required_capacitors(island.placed.solution, island.system, solved, damping, margin)
        found: Compensation | None = self._cache[key]
        if found is None:
            return None
        here = dict(zip(amplifiers, found.capacitors.values(), strict=True))
        return Compensation(here, found.damping, found.margin)


def digest(system: SmallSignal) -> str:
    """What a linearised network is recognised by."""
    shape = repr((system.conductance.shape, system.amplifiers, system.widest)).encode()
    arrays = (system.conductance, system.capacitance, system.linear, system.converged)
    return hashlib.sha256(b"".join([shape, *(a.tobytes() for a in arrays)])).hexdigest()
