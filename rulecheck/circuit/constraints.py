"""The circuit as exact linear relations between voltages, junction currents and junction voltages.

Columns are pairs of a kind and a name:

=========  =============================================================================
``V``      voltage of a point
``J``      current of a voltage source
``I``      current of a junction: collector current of a transistor, current of a diode
``v``      voltage of a junction, counted forward
``K``      what a net brings from outside: a supply, reference or input, by its name
``S``      what a source or photodiode brings, by its reference
``eq``     marks the equation a relation was made from, so that what it rests on can be read off
=========  =============================================================================

Each row states that the sum of coefficient times column is zero.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from fractions import Fraction
from typing import TYPE_CHECKING

from .elimination import Column, Row
from .wiring import SOURCES, TRANSISTORS, Wiring, has_pins

if TYPE_CHECKING:
    from rulecheck.units import Spread

ONE = Fraction(1)


def junction_ends(wiring: Wiring, ref: str) -> tuple[str, str] | None:
    """Points of a junction, the one that is positive in forward direction first; None for no junction.

    A transistor whose base is tied to its emitter, and a diode with both ends on one point, are none.
    """
    part = wiring.design.parts[ref]
    if part.kind in TRANSISTORS and has_pins(part, "C", "B", "E"):
        found = wiring.point(ref, "B"), wiring.point(ref, "E")
        a, b = found if part.kind == "npn" else found[::-1]
    elif part.kind == "diode" and has_pins(part, "A", "K"):
        a, b = wiring.point(ref, "A"), wiring.point(ref, "K")
    else:
        return None
    return (a, b) if a != b else None


def is_diode_like(wiring: Wiring, ref: str) -> bool:
    """Whether a junction has two terminals only: a diode, or a transistor with collector tied to base."""
    part = wiring.design.parts[ref]
    return part.kind == "diode" or wiring.point(ref, "C") == wiring.point(ref, "B")


def current_path(wiring: Wiring, ref: str) -> tuple[str, str]:
    """Points between which a junction's current flows, in its forward direction."""
    part = wiring.design.parts[ref]
    if part.kind == "diode":
        return wiring.point(ref, "A"), wiring.point(ref, "K")
    collector, emitter = wiring.point(ref, "C"), wiring.point(ref, "E")
    return (collector, emitter) if part.kind == "npn" else (emitter, collector)


def constraints(wiring: Wiring, junctions: Iterable[str], held: Mapping[str, tuple[str, str]]) -> list[Row]:
    """All relations of a circuit.

    Parameters
    ----------
    wiring : Wiring
    junctions : iterable of str
        References of the transistors and diodes that conduct.
    held : mapping of amplifier to (point, point)
        The inputs of each amplifier whose negative feedback makes them equal.

    Returns
    -------
    list of dict
        The simple ones first: held inputs, junctions, sources, then the current sums of the points.
    """
    junctions = list(junctions)
    rows = [_tagged({}, "held", amp, ((a, ONE), (b, -ONE)), wiring) for amp, (a, b) in held.items()]
    for ref in junctions:
        ends = junction_ends(wiring, ref)
        if ends is not None:
            rows.append(_tagged({("v", ref): -ONE}, "junction", ref, ((ends[0], ONE), (ends[1], -ONE)), wiring))
    for ref in wiring.parts("voltage-source"):
        if points := wiring.two_points(ref):
            rows.append(_tagged({("S", ref): -ONE}, "source", ref, ((points[0], ONE), (points[1], -ONE)), wiring))
    sums = _current_sums(wiring, junctions)
    return rows + [_tagged(row, "sum", point, (), wiring) for point, row in sums.items()]


def _tagged(row: Row, kind: str, name: str, voltages: Iterable[tuple[str, Fraction]], wiring: Wiring) -> Row:
    for point, factor in voltages:
        _add_voltage(row, point, factor, wiring)
    row["eq", f"{kind} {name}"] = ONE
    return row


def _add_voltage(row: Row, point: str, factor: Fraction, wiring: Wiring) -> None:
    known = wiring.known.get(point)
    if known != "":
        _add(row, ("V", point) if known is None else ("K", known), factor)


def _add(row: Row, column: Column, value: Fraction) -> None:
    total = row.get(column, Fraction(0)) + value
    if total:
        row[column] = total
    else:
        row.pop(column, None)


def _current_sums(wiring: Wiring, junctions: Iterable[str]) -> dict[str, Row]:
    """Sum up the current out of each point that no amplifier or ideal source drives."""
    sums: dict[str, Row] = {point: {} for point in wiring.nets_at if not wiring.is_driven(point)}
    for resistance in wiring.resistances:
        for here, there in ((resistance.a, resistance.b), (resistance.b, resistance.a)):
            if here in sums:
                _add_voltage(sums[here], here, 1 / resistance.ohm, wiring)
                _add_voltage(sums[here], there, -1 / resistance.ohm, wiring)
    for column, (source, sink) in _flows(wiring, junctions):
        for point, sign in ((source, ONE), (sink, -ONE)):
            if point in sums:
                _add(sums[point], column, sign)
    for point, row in sums.items():
        for net in wiring.nets_at[point]:
            if wiring.drives_current(net):
                _add(row, ("K", net), -ONE)
    return {point: row for point, row in sums.items() if row}


def _flows(wiring: Wiring, junctions: Iterable[str]) -> Iterator[tuple[Column, tuple[str, str]]]:
    """List columns of currents with the points they flow between, from the first to the second."""
    for ref in junctions:
        yield ("I", ref), current_path(wiring, ref)
    for ref in wiring.parts("voltage-source", "current-source", "photodiode"):
        points = wiring.two_points(ref)
        if points is None:
            continue
        kind = wiring.design.parts[ref].kind
        if kind == "voltage-source":
            yield ("J", ref), points
        else:  # both drive their current out of the first pin
            yield ("S", ref), points[::-1]


def fixed_spread(wiring: Wiring, column: Column) -> Spread | None:
    """Spread of what a column stands for where it is fixed: a supply, reference or source; else None."""
    kind, name = column
    if kind == "S":
        part = wiring.design.parts[name]
        return part.value_spread if part.kind in SOURCES else None
    net = wiring.design.nets.get(name) if kind == "K" else None
    return net.voltage if net is not None and net.role in ("supply", "reference") else None
