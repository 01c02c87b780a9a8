"""Sensitivities of the error of a requirement: of its output by the adjoint method, less those of its law."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import NOMINAL_TEMPERATURE, Array
from .adjoint import Adjoint
from .conditions import Conditions
from .operating_points import OperatingPoints
from .spreads import NET_KEYS, Deviation, Move, moved
from .transfer import law_values
from .values import Overrides

if TYPE_CHECKING:
    from ..design.model import Requirement
    from .islands import Placed

STEP = 1e-4
"""Difference over which element values are compared, as a share of a deviation's half-spread."""
INPUT_STEP = 1e-7
"""The same for an input, as a share of the end of its range."""


class Sensitivity:
    """Slopes of the error (output less law) of a requirement in deviations, at operating points.

    One transposed solve serves all of them. What the law itself names, such as a reference or a potentiometer, moves
    the law too.

    Parameters
    ----------
    requirement : Requirement
    points : OperatingPoints
        At nominal values of all parameters.
    """

    def __init__(self, requirement: Requirement, points: OperatingPoints) -> None:
        self.requirement, self.points = requirement, points
        self._placed = placing(points, requirement.output)
        placed = self._placed
        known = placed is not None and placed.solution.converged.any()
        self._adjoint = (
            Adjoint(placed.solution, placed.nets[requirement.output]) if placed is not None and known else None
        )

    def of(self, deviation: Deviation) -> Array:
        """Slope of the error, shape (conditions,), in output units for a deviation of one."""
        step = STEP * deviation.half
        return self._of_output(deviation.moves, step) - self._of_law(deviation.moves, step)

    def of_position(self, potentiometer: str) -> Array:
        """Slope of the error in the position of a potentiometer."""
        return self.of(Deviation(potentiometer, -1.0, 1.0, (Move(potentiometer, "position"),)))

    def of_input(self, name: str) -> Array:
        """Slope of the output (not of the law) in the source value of an input."""
        source = self.points.design.inputs[name]
        return self._of_output((Move(name, "input"),), INPUT_STEP * max(abs(source.low), abs(source.high)))

    def _of_output(self, moves: tuple[Move, ...], step: float) -> Array:
        here = () if self._placed is None else _within(self._placed, self.points, moves)
        if self._adjoint is None or self._placed is None or not here:
            return np.where(self.points.converged, 0.0, np.nan)
        return self._adjoint.slope(here, step)[self._placed.index]

    def _of_law(self, moves: tuple[Move, ...], step: float) -> Array:
        named = tuple(move for move in moves if _in_law(self.requirement, move))
        if not named:
            return np.zeros(self.points.conditions.size)
        design, conditions = self.points.design, self.points.conditions
        up, down = (self._law(*moved(design, conditions, [(named, side)])) for side in (step, -step))
        return (up - down) / (2 * step)

    def _law(self, overrides: Overrides, conditions: Conditions) -> Array:
        """The law with references and supplies at the voltages that these conditions give them."""
        design, law = self.points.design, self.requirement.law
        values = dict(conditions.values)
        for name in law.names if law is not None else ():
            net = design.nets.get(name)
            if net is not None and net.role in ("reference", "supply"):
                tempco = net.tempco + overrides.get((name, "voltage_tempco"), 0.0)
                values[name] = values[name] * (1 + tempco * (values["ambient"] - NOMINAL_TEMPERATURE))
        return law_values(self.requirement, OperatingPoints(design, Conditions(values), ()))


def touches(requirement: Requirement, points: OperatingPoints, deviation: Deviation) -> bool:
    """Whether anything that a deviation moves is in the circuit of a requirement's output, or named in its law."""
    placed = placing(points, requirement.output)
    inside = placed is not None and bool(_within(placed, points, deviation.moves))
    return inside or any(_in_law(requirement, move) for move in deviation.moves)


def _within(placed: Placed, points: OperatingPoints, moves: tuple[Move, ...]) -> tuple[Move, ...]:
    """Moves within one piece, named as in its solution."""
    found = []
    for owner, key, per in moves:
        is_net = key in NET_KEYS or (key == "input" and owner in points.design.nets)
        names = placed.nets if is_net else placed.parts
        if owner in names:
            found.append(Move(names[owner], key, per))
    return tuple(found)


def _in_law(requirement: Requirement, move: Move) -> bool:
    named = requirement.law is not None and move.owner in requirement.law.names
    return named and move.key in ("voltage", "voltage_tempco", "position")


def placing(points: OperatingPoints, net: str) -> Placed | None:
    """The solved piece in which a net is free to move; None where there is none."""
    for placed in points.placed:
        network = placed.solution.network
        if net in placed.nets and network.nodes.get(placed.nets[net], network.free) < network.free:
            return placed
    return None
