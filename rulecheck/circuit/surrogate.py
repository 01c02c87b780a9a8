"""Sign of each amplifier's feedback at DC, from a linear stand-in of the circuit.

Every junction conducts as at one and the same current, capacitors are open, the other amplifiers are at work
with a finite gain. Only the sign of the return ratio and which input it comes back to are read off; the
figures of a real operating point are not needed for that.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .constraints import current_path, is_diode_like, junction_ends
from .wiring import Wiring

CURRENT = 100e-6  # A: of every junction, the middle of the usual range of log transistors
THERMAL_VOLTAGE = 25.85e-3  # V: kT/q at 300 K
FORWARD_BETA = 200.0
GAIN = 1e5
LEAST_CONDUCTANCE = 1e-9  # S: to ground at every point, stands for output resistances left out
STIFF = 1.0  # S: a voltage source between two points, stiff against every resistance of such circuits
LEAST_RESPONSE = 1e-9  # below it an input does not follow its output

Floats = NDArray[np.floating]


@dataclass(frozen=True, slots=True)
class Feedback:
    """How an amplifier's output comes back to its inputs.

    Attributes
    ----------
    amplifier : str
    sign : int
        +1 negative feedback (DC return ratio above zero), -1 positive, 0 none.
    input : str
        The input that is led: ``IN-`` or ``IN+``.
    """

    amplifier: str
    sign: int
    input: str


def dc_feedback(wiring: Wiring, junctions: Iterable[str]) -> tuple[Feedback, ...]:
    """Feedback of every amplifier.

    Parameters
    ----------
    wiring : Wiring
    junctions : iterable of str
        References of the transistors and diodes taken as conducting.

    Returns
    -------
    tuple of Feedback
        In the order of the file.

    Notes
    -----
    With all amplifiers at work, a unit offset at one amplifier moves its output and, by way of the circuit,
    its inputs; the moves of its inputs per move of its output are those with the amplifier held and its
    output stepped, because no other row of the equations changes.
    """
    junctions = list(junctions)
    found: dict[str, Feedback] = {}
    for group in _separate(wiring, junctions):
        found |= {feedback.amplifier: feedback for feedback in _solve(wiring, junctions, group)}
    return tuple(found[amp] for amp in wiring.amplifiers())


def _separate(wiring: Wiring, junctions: list[str]) -> list[list[str]]:
    """Points sorted into groups that no part joins; only groups with an amplifier."""
    parent = {point: point for point in wiring.nets_at if point not in wiring.known}

    def find(point: str) -> str:
        while parent[point] != point:
            parent[point] = point = parent[parent[point]]
        return point

    for points in _joined(wiring, junctions):
        free = [find(point) for point in points if point in parent]
        for point in free[1:]:
            parent[find(point)] = find(free[0])
    groups: dict[str, list[str]] = {}
    for point in parent:
        groups.setdefault(find(point), []).append(point)
    return list(groups.values())


def _joined(wiring: Wiring, junctions: list[str]) -> Iterable[tuple[str, ...]]:
    for resistance in wiring.resistances:
        yield resistance.a, resistance.b
    for ref in [*junctions, *wiring.parts("voltage-source")]:
        yield tuple(wiring.point_of[net] for net in wiring.design.parts[ref].pins.values())
    for amp in wiring.amplifiers():
        yield tuple(wiring.point(amp, pin) for pin in ("IN+", "IN-", "OUT"))


def _solve(wiring: Wiring, junctions: list[str], group: list[str]) -> Iterable[Feedback]:
    place = {point: i for i, point in enumerate(group)}
    amplifiers = [a for a in wiring.amplifiers() if any(wiring.point(a, p) in place for p in ("IN+", "IN-", "OUT"))]
    if not amplifiers:
        return []
    matrix = _conductances(wiring, junctions, place)
    matrix /= np.abs(matrix).max(axis=1, keepdims=True)
    steps = np.zeros((matrix.shape[0], len(amplifiers)))
    outputs: dict[str, int] = {}
    for column, amp in enumerate(amplifiers):
        row = place.get(wiring.point(amp, "OUT"))
        if row is None or row in outputs.values():
            continue  # an output tied to a source or to another output follows nothing
        outputs[amp] = row
        matrix[row] = 0.0
        matrix[row, row] = 1.0 / GAIN
        for pin, sign in (("IN+", -1.0), ("IN-", 1.0)):
            if (other := place.get(wiring.point(amp, pin))) is not None:
                matrix[row, other] += sign
        steps[row, column] = 1.0
    moves = np.linalg.solve(matrix, steps)
    return [_read(wiring, amp, moves[:, column], place, outputs) for column, amp in enumerate(amplifiers)]


def _read(wiring: Wiring, amp: str, moves: Floats, place: dict[str, int], outputs: dict[str, int]) -> Feedback:
    if amp not in outputs or moves[outputs[amp]] == 0.0:
        return Feedback(amp, 0, "IN-")
    led = {
        pin: sign * float(moves[place[point]] / moves[outputs[amp]])
        if (point := wiring.point(amp, pin)) in place
        else 0.0
        for pin, sign in (("IN-", 1.0), ("IN+", -1.0))
    }
    total = led["IN-"] + led["IN+"]
    sign = 0 if abs(total) < LEAST_RESPONSE else 1 if total > 0 else -1
    return Feedback(amp, sign, "IN-" if sign * led["IN-"] >= sign * led["IN+"] else "IN+")


def _conductances(wiring: Wiring, junctions: list[str], place: dict[str, int]) -> Floats:
    """Nodal conductances of the points in `place`; points held by sources are at rest."""
    matrix = np.eye(len(place)) * LEAST_CONDUCTANCE
    for (source, sink), (positive, negative), conductance in _stamps(wiring, junctions):
        for row, sign in ((source, 1.0), (sink, -1.0)):
            for column, direction in ((positive, 1.0), (negative, -1.0)):
                if row in place and column in place:
                    matrix[place[row], place[column]] += sign * direction * conductance
    return matrix


Stamp = tuple[tuple[str, str], tuple[str, str], float]


def _stamps(wiring: Wiring, junctions: list[str]) -> Iterator[Stamp]:
    """Points that a current flows between, points whose voltage leads it, and the conductance."""
    for resistance in wiring.resistances:
        ends = resistance.a, resistance.b
        yield ends, ends, float(1 / resistance.ohm)
    for ref in wiring.parts("voltage-source"):
        if points := wiring.two_points(ref):
            yield points, points, STIFF
    conductance = CURRENT / THERMAL_VOLTAGE
    for ref in junctions:
        if junction := junction_ends(wiring, ref):
            yield current_path(wiring, ref), junction, conductance
            if not is_diode_like(wiring, ref):
                yield junction, junction, conductance / FORWARD_BETA
