"""Conditions under which a design is analysed: the review grid, fault scenarios, points of the user's own."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array, BoolArray, Index
from ..errors import CommandError
from ..units import format_quantity

if TYPE_CHECKING:
    from ..design.model import Design, Input

POINTS_PER_INPUT = 21
MOST_CORNER_INPUTS = 6
Row = dict[str, float]


@dataclass(frozen=True)
class Conditions:
    """A batch of conditions; every array has the conditions on its first axis.

    Attributes
    ----------
    values : mapping of str to ndarray, shape (conditions,)
        ``ambient`` [K], every input (its source value, SI), supplies and references [V at 25 °C],
        potentiometers (position 0..1).
    scenario : tuple of str, optional
        The fault scenario of each condition in words.
    absent : mapping of str to ndarray of bool
        Supplies and references that are off.
    """

    values: Mapping[str, Array]
    scenario: tuple[str, ...] | None = None
    absent: Mapping[str, Array] = field(default_factory=dict)

    @property
    def size(self) -> int:
        """Number of conditions."""
        return int(self.values["ambient"].size)

    def at(self, index: int) -> dict[str, float]:
        """The values of one condition as plain numbers."""
        return {name: float(array[index]) for name, array in self.values.items()}

    def take(self, index: Index) -> Conditions:
        """The conditions that `index` (integers or booleans) picks."""
        scenario = None if self.scenario is None else tuple(np.array(self.scenario, dtype=object)[index])
        return Conditions(
            {name: array[index] for name, array in self.values.items()},
            scenario,
            {name: array[index] for name, array in self.absent.items()},
        )


def typical_row(design: Design) -> Row:
    """Every quantity of a condition at its typ, inputs in the middle of their ranges."""
    row = {"ambient": design.ambient.typ}
    row |= {name: middle(source) for name, source in design.inputs.items()}
    for name, net in design.nets.items():
        if net.role in ("supply", "reference") and net.voltage is not None:
            row[name] = net.voltage.typ
    for ref, part in design.parts.items():
        if part.kind == "potentiometer":
            row[ref] = part.position.typ
    return row


def middle(source: Input) -> float:
    """Middle of an input's range, geometric where its spacing is logarithmic."""
    if source.log_spacing:
        return float(np.copysign(np.sqrt(source.low * source.high), source.low))
    return (source.low + source.high) / 2


def spaced(source: Input, count: int = POINTS_PER_INPUT) -> Array:
    """Points over an input's range by its spacing, ends included exactly."""
    if source.log_spacing:
        sign = np.sign(source.low)
        points: Array = sign * np.geomspace(abs(source.low), abs(source.high), count)
    else:
        points = np.linspace(source.low, source.high, count)
    points[0], points[-1] = source.low, source.high
    return points


def above_cutoff(source: Input, x: Array) -> BoolArray:
    """Whether source values are such that a law is asked of them.

    Of a range that just reaches across zero the far side is below the cutoff; of one that reaches as far
    on both sides the magnitude counts.
    """
    if source.cutoff is None:
        return np.ones(np.shape(x), bool)
    side = np.sign(x) if source.high == -source.low else 1.0 if source.high > -source.low else -1.0
    above: BoolArray = side * x >= source.cutoff * (1 - 1e-9)
    return above


def review_grid(design: Design, typical: Row | None = None) -> Conditions:
    """The review grid: inputs one at a time and in corners, by ambient, by supplies; potentiometers at their ends.

    Parameters
    ----------
    design : Design
    typical : dict of str to float, optional
        What is not varied; default `typical_row`.
    """
    typical = typical or typical_row(design)
    rows = [
        row | supply | {"ambient": ambient}
        for row in _input_rows(design) + _potentiometer_rows(design, typical)
        for ambient in _distinct((design.ambient.min, design.ambient.typ, design.ambient.max))
        for supply in supply_rows(design)
    ]
    return from_rows([typical | row for row in rows], typical)


def corners_at(design: Design, at: Row) -> Conditions:
    """Ambient and supplies at their corners, all else as `at` says."""
    rows = [
        supply | {"ambient": ambient}
        for ambient in _distinct((design.ambient.min, design.ambient.typ, design.ambient.max))
        for supply in supply_rows(design)
    ]
    return from_rows(rows, at)


def end_conditions(design: Design, typical: Row) -> Conditions:
    """Inputs at the corners of their ranges and in the middle, by ambient."""
    rows = [
        row | {"ambient": ambient}
        for row in [{}, *corner_rows(design.inputs)]
        for ambient in _distinct((design.ambient.min, design.ambient.typ, design.ambient.max))
    ]
    return from_rows(rows, typical)


def from_rows(rows: Sequence[Row], typical: Row) -> Conditions:
    """Conditions of rows in the order given, each completed from `typical`, repeated rows dropped."""
    unique = list({tuple((typical | row).values()): typical | row for row in rows}.values())
    values = {name: _frozen(np.array([row[name] for row in unique], dtype=float)) for name in typical}
    return Conditions(MappingProxyType(values))


def from_points(design: Design, columns: Mapping[str, Array], typical: Row | None = None) -> Conditions:
    """Conditions a user asked for: one a row of `columns`, what is not named at its typ.

    Parameters
    ----------
    design : Design
    columns : mapping of str to ndarray, shape (conditions,)
        SI values by the names of inputs, ``ambient``, supplies, references, potentiometers.
    typical : dict of str to float, optional
        What is not named; default `typical_row`.

    Raises
    ------
    CommandError
        For a name that is none of these.
    """
    typical = typical or typical_row(design)
    for name in columns:
        if name not in typical:
            allowed = ", ".join(typical)
            raise CommandError(f"there is nothing to set by the name {name!r}", f"columns may be {allowed}")
    size = max((np.size(c) for c in columns.values()), default=1)
    values = {
        name: _frozen(np.broadcast_to(np.asarray(columns.get(name, typ), dtype=float), (size,)).copy())
        for name, typ in typical.items()
    }
    return Conditions(MappingProxyType(values))


def supply_rows(design: Design) -> list[Row]:
    """Supplies by magnitude: all least, typical, all greatest, and the two crosswise by polarity."""
    supplies = {
        name: net.voltage for name, net in design.nets.items() if net.role == "supply" and net.voltage is not None
    }
    weak = {n: v.min if v.typ >= 0 else v.max for n, v in supplies.items()}
    strong = {n: v.max if v.typ >= 0 else v.min for n, v in supplies.items()}
    typ = {n: v.typ for n, v in supplies.items()}
    rows = [weak, typ, strong]
    if len({v.typ >= 0 for v in supplies.values()}) > 1:
        rows += [{n: (strong if (supplies[n].typ >= 0) is up else weak)[n] for n in supplies} for up in (True, False)]
    return rows


def corner_rows(sources: Mapping[str, Input]) -> list[Row]:
    """Corners among inputs; beyond six inputs all low, all high and each alone at either end."""
    ends = {name: (s.low, s.high) for name, s in sources.items()}
    if len(ends) <= MOST_CORNER_INPUTS:
        return [dict(zip(ends, corner, strict=True)) for corner in itertools.product(*ends.values())]
    low, high = ({n: e[i] for n, e in ends.items()} for i in (0, 1))
    return [low, high, *({n: v} for n, e in ends.items() for v in e)]


def _input_rows(design: Design) -> list[Row]:
    rows: list[Row] = [{}]
    for name, source in design.inputs.items():
        rows += [{name: float(x)} for x in spaced(source)]
    for group in _input_groups(design):
        rows += corner_rows({name: design.inputs[name] for name in group})
    return rows


def _input_groups(design: Design) -> list[tuple[str, ...]]:
    """Inputs that reach one requirement together: those its law names, else all of them."""
    groups = [
        tuple(n for n in design.inputs if r.law is not None and n in r.law.names) for r in design.requirements.values()
    ]
    return list(dict.fromkeys(g for g in groups if g)) or [tuple(design.inputs)]


def _potentiometer_rows(design: Design, typical: Row) -> list[Row]:
    ends = [
        {ref: position}
        for ref, part in design.parts.items()
        if part.kind == "potentiometer"
        for position in (part.position.min, part.position.max)
        if position != typical[ref]
    ]
    return [row | end for end in ends for row in _input_rows(design)]


def fault_scenarios(design: Design, typical: Row | None = None) -> Conditions:
    """Fault scenarios: inputs at what they must survive, supplies absent alone and all together."""
    typical = typical or typical_row(design)
    powers = [n for n, net in design.nets.items() if net.role in ("supply", "reference")]
    scenarios: list[tuple[str, Row, tuple[str, ...]]] = []
    for name, row in _survival_rows(design):
        scenarios.append((f"{name}, all supplies present", row, ()))
    for supply in (n for n in powers if design.nets[n].role == "supply"):
        off = (supply, *(n for n in powers if design.nets[n].source == supply))
        for name, row in _range_rows(design):
            scenarios.append((f"supply {supply} absent, {name}", row, off))
    for name, row in _survival_rows(design):
        scenarios.append((f"all supplies and references absent, {name}", row, tuple(powers)))
    cases = [
        (words, typical | row | {"ambient": ambient}, off)
        for words, row, off in scenarios
        for ambient in _distinct((design.ambient.min, design.ambient.max))
    ]
    values = {n: _frozen(np.array([row[n] if n not in off else 0.0 for _, row, off in cases])) for n in typical}
    absent = {n: _frozen(np.array([n in off for _, _, off in cases])) for n in powers}
    return Conditions(MappingProxyType(values), tuple(words for words, _, _ in cases), MappingProxyType(absent))


SLIGHT = 0.02
"""Share of a reversed end: a slight reversal can be worse than a full one, which a junction may clamp."""


def _survival_rows(design: Design) -> list[tuple[str, Row]]:
    return _end_rows({n: (s, _survived(s)) for n, s in design.inputs.items()})


def _survived(source: Input) -> tuple[float, ...]:
    """Values an input must survive: the ends, and where one is of the other sign than the signal, a little of it."""
    ends = source.survives or (source.low, source.high)
    reversed_ends = [e for e in ends if e * source.low < 0 and e * source.high < 0]
    return (*ends, *(SLIGHT * e for e in reversed_ends))


def _range_rows(design: Design) -> list[tuple[str, Row]]:
    return _end_rows({n: (s, (s.low, s.high)) for n, s in design.inputs.items()})


def _end_rows(ends: Mapping[str, tuple[Input, tuple[float, ...]]]) -> list[tuple[str, Row]]:
    """Each input alone at either end, with words for it."""
    return [
        (f"{name} at {format_quantity(value, source.unit)}", {name: value})
        for name, (source, values) in ends.items()
        for value in _distinct(values)
    ] or [("no inputs", {})]


def _distinct(values: Sequence[float]) -> list[float]:
    return list(dict.fromkeys(values))


def _frozen(array: Array) -> Array:
    array.flags.writeable = False
    return array
