"""Operating points of a whole design at a batch of conditions."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import AnyArray, Array, BoolArray
from ..errors import AnalysisError
from .network import in_circuit

if TYPE_CHECKING:
    from ..design.model import Design
    from .conditions import Conditions
    from .islands import Placed


@dataclass(frozen=True)
class Worst:
    """The extreme of a figure over the conditions: its value, where it is, and the conditions there."""

    value: float
    index: int
    conditions: dict[str, float]


class OperatingPoints:
    """Solved operating points; all arrays have the conditions first and are NaN where not converged.

    Attributes
    ----------
    design : Design
    conditions : Conditions
    converged : ndarray of bool, shape (conditions,)
        Whether the whole circuit has a solution.
    placed : tuple of Placed
        The solved pieces.
    """

    def __init__(self, design: Design, conditions: Conditions, placed: tuple[Placed, ...]) -> None:
        self.design = design
        self.conditions = conditions
        self.placed = placed
        reached = [p.solution.converged[p.index] for p in placed]
        self.converged: BoolArray = np.all(reached, axis=0) if reached else np.ones(conditions.size, bool)
        # a spare part with an open pin is not in the equations: it has no figures
        held = in_circuit(design)
        self._by_part = {part: p for p in placed for part in p.parts if part in held}
        self._by_net = {n: p for p in placed for n, there in p.nets.items() if there in p.solution.network.nodes}

    def voltage(self, net: str) -> Array:
        """Voltage of a net [V]; of one that no part in the equations touches, what its source gives, if any."""
        placed = self._by_net.get(net)
        if placed is None and self.design.nets[net].role == "ground":
            return np.zeros(self.conditions.size)
        if placed is None:
            return np.asarray(self.conditions.values.get(net, self._none))
        return placed.solution.voltage(placed.nets[net])[placed.index]

    def temperature(self, part: str) -> Array:
        """Temperature of a part, of its junction where it has one [K]."""
        return self._of(part, "temperature")

    def vbe(self, part: str) -> Array:
        """Base-emitter voltage between terminals, signed [V]."""
        return self._of(part, "vbe")

    def vce(self, part: str) -> Array:
        """Collector-emitter voltage between terminals, signed [V]."""
        return self._of(part, "vce")

    def state(self, amplifier: str) -> AnyArray:
        """State of an amplifier: ``linear``, ``high``, ``low`` or ``unpowered``, array of str."""
        return self._of(amplifier, "state")

    def limits(self, amplifier: str) -> tuple[Array, Array]:
        """Low and high limit of an amplifier's internal output [V]."""
        placed = self._by_part.get(amplifier)
        if placed is None:
            return self._none, self._none
        low, high = placed.solution.limits(placed.parts[amplifier])
        return low[placed.index], high[placed.index]

    def linear(self, amplifier: str) -> BoolArray:
        """Whether an amplifier is inside its limits (and the point converged)."""
        return self._of(amplifier, "linear")

    def current(self, part: str, pin: str) -> Array:
        """Current into a pin of a part [A]."""
        placed = self._by_part.get(part)
        if placed is None:
            return self._none
        return placed.solution.current(placed.parts[part], pin)[placed.index]

    def dissipation(self, part: str) -> Array:
        """Power turned to heat in a transistor, amplifier, diode or resistor [W]."""
        return self._of(part, "dissipation")

    def clamp_currents(self) -> dict[str, Array]:
        """Currents of the input clamps and drive limits by name (``U1.IN-.hi``: from IN- to V+) [A]."""
        found: dict[str, Array] = {}
        for placed in self.placed:
            back = {solved: here for here, solved in {**placed.nets, **placed.parts}.items()}
            for name, current in placed.solution.clamp_currents().items():
                owner, _, rest = name.partition(".")
                found[f"{back.get(owner, owner)}.{rest}"] = current[placed.index]
        return found

    def clamp_current(self, amplifier: str, pin: str) -> Array:
        """Largest current in the clamps of one amplifier pin [A]."""
        own = [c for n, c in self.clamp_currents().items() if n.startswith(f"{amplifier}.{pin}.")]
        return np.max(own, axis=0) if own else np.where(self.converged, 0.0, np.nan)

    def worst(self, values: Array) -> Worst:
        """Largest of `values` over the conditions that have one, and where.

        Raises
        ------
        AnalysisError
            Where no condition has a figure.
        """
        return self._extreme(np.asarray(values, dtype=float), np.nanargmax)

    def least(self, values: Array) -> Worst:
        """Smallest of `values`; see `worst`."""
        return self._extreme(np.asarray(values, dtype=float), np.nanargmin)

    def _extreme(self, values: Array, pick: Callable[[Array], AnyArray]) -> Worst:
        if not np.isfinite(values).any():
            raise AnalysisError("no condition has a figure to judge", "see the points that did not converge")
        index = int(pick(values))
        return Worst(float(values[index]), index, self.conditions.at(index))

    def failures(self) -> list[str]:
        """One line for each condition that did not converge: the point, and the net that moved last."""
        lines = []
        for i in np.flatnonzero(~self.converged):
            lost = next(p for p in self.placed if not p.solution.converged[p.index[i]])
            solved = lost.solution.moved_last()[int(lost.index[i])]
            net = next((here for here, there in lost.nets.items() if there == solved), solved)
            place = ", ".join(f"{name} = {value:.6g}" for name, value in self.conditions.at(int(i)).items())
            lines.append(f"no operating point at {place}; net {net} moved last")
        return lines

    @property
    def _none(self) -> Array:
        return np.full(self.conditions.size, np.nan)

    def _of(self, part: str, name: str) -> AnyArray:
        placed = self._by_part.get(part)
        if placed is None:
            return np.full(self.conditions.size, _NOTHING.get(name, np.nan))
        found: Mapping[str, AnyArray] | AnyArray = getattr(placed.solution, name)(placed.parts[part])
        return np.asarray(found)[placed.index]


_NOTHING = {"state": "unpowered", "linear": False}
"""What is said of a part that is not in the equations, where it is not a number."""
