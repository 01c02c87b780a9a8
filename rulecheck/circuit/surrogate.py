"""Sign of each amplifier's feedback at DC, from a linear stand-in of the circuit.

Every junction conducts as at one and the same current, capacitors are open, the other amplifiers are at work
with a finite gain. Only the sign of the return ratio and which input it comes back to are read off; the
figures of a real operating point are not needed for that.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field

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
    output stepped, because no other row of the equations changes. Which input is led is read off with the
    other amplifiers at rest where its own feedback reaches it so: a follower inside another loop is one.
    """
    stamps = list(_stamps(wiring, junctions))
    follows = {amp: tuple(wiring.point(amp, pin) for pin in ("OUT", "IN+", "IN-")) for amp in wiring.amplifiers()}
    group_of = _groups(wiring, stamps, follows)
    groups: dict[str, _Group] = {}
    for point, group in group_of.items():
        groups.setdefault(group, _Group()).points.append(point)
    for stamp in stamps:
        for group in dict.fromkeys(group_of[p] for p in (*stamp.path, *stamp.lead) if p in group_of):
            groups[group].stamps.append(stamp)
    for amp, points in follows.items():
        for group in dict.fromkeys(group_of[p] for p in points if p in group_of):
            groups[group].amplifiers[amp] = points
    found = {amp: Feedback(amp, 0, "IN-") for amp in follows}
    for members in groups.values():
        found |= {feedback.amplifier: feedback for feedback in _solve(members)}
    return tuple(found.values())


@dataclass(frozen=True, slots=True)
class _Stamp:
    """A conductance: current along a path of two points, led by the voltage between two points."""

    path: tuple[str, str]
    lead: tuple[str, str]
    conductance: float


@dataclass(frozen=True, slots=True)
class _Group:
    """Points that parts join, with their conductances and the amplifiers by output and inputs."""

    points: list[str] = field(default_factory=list)
    stamps: list[_Stamp] = field(default_factory=list)
    amplifiers: dict[str, tuple[str, ...]] = field(default_factory=dict)


def _groups(wiring: Wiring, stamps: list[_Stamp], follows: Mapping[str, tuple[str, ...]]) -> dict[str, str]:
    """Points that no source holds, each with the first of those that parts join it to."""
    parent = {point: point for point in wiring.nets_at if point not in wiring.known}

    def find(point: str) -> str:
        while parent[point] != point:
            parent[point] = point = parent[parent[point]]
        return point

    for points in [*((*stamp.path, *stamp.lead) for stamp in stamps), *follows.values()]:
        free = [find(point) for point in points if point in parent]
        for point in free[1:]:
            parent[find(point)] = find(free[0])
    return {point: find(point) for point in parent}


def _solve(group: _Group) -> Iterable[Feedback]:
    if not group.amplifiers:
        return []
    place = {point: i for i, point in enumerate(group.points)}
    matrix = _conductances(group, place)
    matrix /= np.abs(matrix).max(axis=1, keepdims=True)
    outputs: dict[str, int] = {}
    for amp, (output, _, _) in group.amplifiers.items():
        if output in place and place[output] not in outputs.values():
            outputs[amp] = place[output]  # an output tied to a source or to another output follows nothing
    steps = np.zeros((len(place), len(outputs)))
    steps[list(outputs.values()), range(len(outputs))] = 1.0
    at_rest, at_work = matrix, matrix.copy()
    for amp, row in outputs.items():
        at_rest[row], at_work[row] = 0.0, 0.0
        at_rest[row, row], at_work[row, row] = 1.0, 1.0 / GAIN
        for point, sign in zip(group.amplifiers[amp][1:], (-1.0, 1.0), strict=True):
            if point in place:
                at_work[row, place[point]] += sign
    alone, together = np.linalg.solve(at_rest, steps), np.linalg.solve(at_work, steps)
    found = []
    for i, (amp, row) in enumerate(outputs.items()):
        inputs = [place.get(point) for point in group.amplifiers[amp][1:]]
        found.append(_read(amp, _led(alone[:, i], row, inputs), _led(together[:, i], row, inputs)))
    return found


def _led(moves: Floats, output: int, inputs: list[int | None]) -> dict[str, float]:
    """What each input adds to the return of the output, per move of the output; negative feedback is positive."""
    if moves[output] == 0.0:
        return {"IN-": 0.0, "IN+": 0.0}
    plus, minus = (float(moves[row] / moves[output]) if row is not None else 0.0 for row in inputs)
    return {"IN-": minus, "IN+": -plus}


def _read(amp: str, alone: dict[str, float], together: dict[str, float]) -> Feedback:
    total = sum(together.values())
    sign = 0 if abs(total) < LEAST_RESPONSE else 1 if total > 0 else -1
    judged = alone if max(sign * led for led in alone.values()) > LEAST_RESPONSE else together
    return Feedback(amp, sign, max(judged, key=lambda pin: sign * judged[pin]))


def _conductances(group: _Group, place: dict[str, int]) -> Floats:
    """Nodal conductances of the points in `place`; points held by sources are at rest."""
    matrix = np.eye(len(place)) * LEAST_CONDUCTANCE
    for stamp in group.stamps:
        for row, sign in zip(stamp.path, (1.0, -1.0), strict=True):
            for column, direction in zip(stamp.lead, (1.0, -1.0), strict=True):
                if row in place and column in place:
                    matrix[place[row], place[column]] += sign * direction * stamp.conductance
    return matrix


def _stamps(wiring: Wiring, junctions: Iterable[str]) -> Iterator[_Stamp]:
    for resistance in wiring.resistances:
        ends = resistance.a, resistance.b
        yield _Stamp(ends, ends, float(1 / resistance.ohm))
    for ref in wiring.parts("voltage-source"):
        if points := wiring.two_points(ref):
            yield _Stamp(points, points, STIFF)
    conductance = CURRENT / THERMAL_VOLTAGE
    for ref in junctions:
        if junction := junction_ends(wiring, ref):
            yield _Stamp(current_path(wiring, ref), junction, conductance)
            if not is_diode_like(wiring, ref):
                yield _Stamp(junction, junction, conductance / FORWARD_BETA)
